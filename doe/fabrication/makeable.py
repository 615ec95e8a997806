"""Phase to makeable phase: the levels of the process, drawn in while a design is under way."""

import jax.numpy as jnp
from jax import lax
from jaxtyping import Array, Float

from doe.fabrication.levels import level_phase, nearest_level

FREE_UNTIL = 0.1  # share of the budget in which every pixel moves freely
SETTLED_FROM = 0.85  # from here on every pixel lies on a level


def makeable(phase: Float[Array, "*batch y x"], levels: int) -> Float[Array, "*batch y x"]:
    """The nearest phase [rad] that the process makes; applying it twice changes nothing."""
    if levels == 0:
        return phase
    return level_phase(nearest_level(phase, levels), levels)


def freezing(
    phase: Float[Array, "y x"], levels: int, fraction: Float[Array, ""]
) -> Float[Array, "y x"]:
    """A phase on its way to the levels: pixels nearest to one are put on it and frozen first.

    fraction: share of the budget that is spent; all pixels are free at its start, all on a level at
    its end, and those still free make good for the rounding of the others.
    Source: gradual freezing, this project; measured against rounding at once and straight-through
    slopes, which lose ten times the uniformity.
    """
    if levels == 0:
        return phase
    share = jnp.clip((fraction - FREE_UNTIL) / (SETTLED_FROM - FREE_UNTIL), 0, 1)
    step = 2 * jnp.pi / levels
    rest = jnp.round(phase / step) * step - phase
    is_frozen = (jnp.abs(rest) <= share * step / 2) | (share >= 1)
    return jnp.where(is_frozen, lax.stop_gradient(phase + rest), phase)
