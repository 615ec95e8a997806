"""A job as arrays: light, orders, target and the makeable rule in differentiable functions."""

from dataclasses import dataclass, field
from typing import NamedTuple

import jax
import jax.numpy as jnp
import numpy as np
from jaxtyping import Array, Complex, Float, Int

from doe.config import derived
from doe.config.made_part import Errors
from doe.config.schema import Config
from doe.fabrication.as_made import made_phase
from doe.fabrication.blocks import block_centres
from doe.fabrication.makeable import freezing, makeable
from doe.metrics import Range, Scores, Wanted, merit, range_of, scores
from doe.optics.orders import amplitudes, basis, order_table
from doe.optics.phasor import phasor
from doe.targets import build

# Weight of the uniformity term, at the start and at the end of the budget; measured on the
# needle mill: less leaves 2 % of uniformity error, more loses efficiency early.
PENALTY = (3.0, 300.0)
DRAWN = Errors()


class Judged(NamedTuple):
    """A makeable design: its merit and scores."""

    merit: Float[Array, ""]
    scores: Scores


@jax.tree_util.register_dataclass
@dataclass(frozen=True)
class Problem:
    """A unit cell, its wanted orders and its limits; arrays are leaves, the rest is static."""

    basis_y: Complex[Array, "order_y y"]
    basis_x: Complex[Array, "order_x x"]
    share: Float[Array, "order_y order_x"]  # wanted share of the power, 0 = not wanted
    zero_cap: Float[Array, ""]  # of an unwanted zero order, over the mean spot; inf = free
    wanted: Wanted
    limits: Range
    centre_y: Int[Array, " y"]  # the pixel whose phase stands for each pixel's block
    centre_x: Int[Array, " x"]
    zero_row: int = field(metadata={"static": True})  # where the zero order stands in `share`
    zero_column: int = field(metadata={"static": True})
    levels: int = field(metadata={"static": True})
    is_ruled: bool = field(metadata={"static": True})  # blocks are larger than a pixel

    @property
    def shape(self) -> tuple[int, int]:
        """Pixels of the cell (y, x)."""
        return self.basis_y.shape[1], self.basis_x.shape[1]

    def forward(
        self, phase: Float[Array, "y x"], fraction: Float[Array, ""], errors: Errors = DRAWN
    ) -> Complex[Array, "order_y order_x"]:
        """Amplitudes of the orders of a design on its way to the levels, made with `errors`."""
        drawn = freezing(self.on_blocks(phase), self.levels, fraction)
        made = made_phase(drawn, errors)
        return amplitudes(phasor(made), self.basis_y, self.basis_x)

    def loss(
        self, phase: Float[Array, "y x"], fraction: Float[Array, ""], errors: Errors = DRAWN
    ) -> Float[Array, ""]:
        """Lost light plus the weighted mean square departure from the target shares."""
        order = self.forward(phase, fraction, errors)
        power = order.real**2 + order.imag**2
        is_wanted = self.share > 0
        efficiency = jnp.where(is_wanted, power, 0.0).sum()
        departure = jnp.where(is_wanted, power / efficiency / safe(self.share) - 1, 0.0)
        zero_excess = jnp.maximum(0.0, self.zero_to_mean(power, efficiency) - self.zero_cap)
        penalty = (departure**2).sum() / is_wanted.sum() + zero_excess**2
        weight = PENALTY[0] * (PENALTY[1] / PENALTY[0]) ** fraction
        return 1 - efficiency + weight * penalty

    def zero_to_mean(
        self, power: Float[Array, "order_y order_x"], efficiency: Float[Array, ""]
    ) -> Float[Array, ""]:
        """Power of the zero order over that of the mean spot."""
        return power[self.zero_row, self.zero_column] * (self.share > 0).sum() / efficiency

    def drawn(self, phase: Float[Array, "y x"]) -> Float[Array, "y x"]:
        """The phase [rad] that the process makes of a design."""
        return makeable(self.on_blocks(phase), self.levels)

    def on_blocks(self, phase: Float[Array, "y x"]) -> Float[Array, "y x"]:
        """The phase made constant on blocks that keep the mask rule; itself without a rule."""
        if not self.is_ruled:
            return phase
        return phase[self.centre_y[:, None], self.centre_x[None, :]]

    def judge(self, phase: Float[Array, "y x"]) -> Judged:
        """Merit and scores of a design as drawn, from its whole order table."""
        found = scores(order_table(phasor(self.drawn(phase))), self.wanted)
        return Judged(merit(found, self.limits), found)


def safe(share: Float[Array, "y x"]) -> Float[Array, "y x"]:
    """Shares with 1 in place of 0, so that no slope meets a division by 0."""
    return jnp.where(share > 0, share, 1.0)


def surface_transmission(index: float) -> float:
    """Power through both uncoated surfaces of a plate at normal incidence: (1 - R)^2.

    Source: Fresnel's formula R = ((n - 1) / (n + 1))^2.
    """
    return (1 - ((index - 1) / (index + 1)) ** 2) ** 2


def wanted_of(config: Config) -> Wanted:
    """Where a job's wanted orders lie in its order table."""
    target = build(config)
    rows, columns = config.element.pixels
    return Wanted(
        row=jnp.asarray(target.m_y + rows // 2),
        column=jnp.asarray(target.m_x + columns // 2),
        share=jnp.asarray(target.share),
        surfaces=jnp.asarray(surface_transmission(derived.index(config))),
    )


def problem_of(config: Config) -> Problem:
    """The arrays of a job, in float32."""
    target = build(config)
    rows, columns = config.element.pixels
    # The zero order is always among them, wanted or not, so that its power is at hand.
    orders_y, orders_x = np.union1d(target.m_y, 0), np.union1d(target.m_x, 0)
    share = np.zeros((len(orders_y), len(orders_x)))
    share[np.searchsorted(orders_y, target.m_y), np.searchsorted(orders_x, target.m_x)] = (
        target.share
    )
    zero_row, zero_column = int(np.searchsorted(orders_y, 0)), int(np.searchsorted(orders_x, 0))
    feature, gap = derived.rule_pixels(config)
    block = [max(pair) for pair in zip(feature, gap, strict=True)]
    return Problem(
        basis_y=jnp.asarray(basis(orders_y, rows), jnp.complex64),
        basis_x=jnp.asarray(basis(orders_x, columns), jnp.complex64),
        share=jnp.asarray(share, jnp.float32),
        zero_cap=jnp.float32(zero_cap(config)),
        wanted=wanted_of(config),
        limits=range_of(config.limits),
        centre_y=jnp.asarray(block_centres(rows, block[0])),
        centre_x=jnp.asarray(block_centres(columns, block[1])),
        zero_row=zero_row,
        zero_column=zero_column,
        levels=config.element.levels,
        is_ruled=config.element.levels > 0 and max(block) > 1,
    )


def zero_cap(config: Config) -> float:
    """The most an unwanted zero order may have, over the mean spot; inf where it is free."""
    target = build(config)
    if np.any((target.m_y == 0) & (target.m_x == 0)):
        return np.inf
    spots = len(target.share)
    caps = [
        one.value * (spots if name == "zero_order" else 1)
        for name, one in config.limits.items()
        if name in ("zero_order", "zero_order_to_mean") and one.sense == "<="
    ]
    return min(caps, default=np.inf)
