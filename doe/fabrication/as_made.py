"""How a made part departs from the drawing."""

import jax.numpy as jnp
from jaxtyping import Array, Bool, Float

from doe.config.made_part import Errors


def made_phase(phase: Float[Array, "y x"], errors: Errors) -> Float[Array, "y x"]:
    """Phase [rad] of a relief drawn as `phase` (0 = the deepest place) and made with `errors`.

    Source: phase is proportional to height.
    """
    return phase * (1 + errors.depth)


def made_layers(layers: Bool[Array, "mask y x"], errors: Errors) -> Float[Array, "y x"]:
    """Phase [rad] of binary layers made with `errors`; etch m is pi / 2^(m-1) deep.

    Source: Swanson, MIT Lincoln Laboratory TR-854 (1989) (from memory).
    """
    masks = len(layers)
    own = jnp.asarray(errors.etch_depth or (0.0,) * masks)
    steps = jnp.pi / 2.0 ** jnp.arange(masks) * (1 + errors.depth + own)
    return jnp.tensordot(steps, layers.astype(steps.dtype), axes=1)
