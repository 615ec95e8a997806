"""Figures of merit of a spot pattern: one definition each for the search and for the record."""

from typing import NamedTuple

import jax.numpy as jnp
import numpy as np
from jaxtyping import Array, Float, Int

from doe.config.schema import Limits
from doe.optics.orders import order_numbers

MISS = (
    1.0  # taken off the merit of a design that misses a limit, so that none beats one that does not
)
SHORTFALL_PRICE = 10.0  # efficiency given up for a score one unit nearer its limit
INSIDE = 2e-4  # of each limit: the search works in float32, the verdict in float64
USUAL_UNIFORMITY = 0.02  # steers the search where the config states no limit on uniformity
UNEVEN = 0.25  # of the mean: what the search of the levels takes away
UNEVENNESS = {"uniformity_error": UNEVEN, "rms_error": UNEVEN, "hottest_to_mean": 1 + UNEVEN}


class Scores(NamedTuple):
    """Scores of a pattern, fractions of the transmitted power or ratios; names as in the record."""

    efficiency: Float[Array, ""]
    efficiency_with_surfaces: Float[Array, ""]
    uniformity_error: Float[Array, ""]
    rms_error: Float[Array, ""]
    zero_order: Float[Array, ""]
    zero_order_to_mean: Float[Array, ""]
    worst_stray_to_mean: Float[Array, ""]
    stray: Float[Array, ""]
    hottest_to_mean: Float[Array, ""]


class Wanted(NamedTuple):
    """Where the wanted orders lie in an order table, and their shares of the power (sum 1)."""

    row: Int[Array, " spot"]
    column: Int[Array, " spot"]
    share: Float[Array, " spot"]
    surfaces: Float[Array, ""]  # transmission of both surfaces


class Range(NamedTuple):
    """Limits on the scores, in their order; infinite where there is none."""

    low: Float[Array, " score"]
    high: Float[Array, " score"]


def uniformity_error(relative: Float[Array, " spot"]) -> Float[Array, ""]:
    """(max - min) / (max + min) of powers over their targets. Source: definition."""
    return (relative.max() - relative.min()) / (relative.max() + relative.min())


def scores(table: Float[Array, "y x"], wanted: Wanted) -> Scores:
    """All scores of an order table with the zero order at [ny // 2, nx // 2].

    Source: definitions; ISO 15902 for diffraction efficiency (from memory).
    """
    rows, columns = table.shape
    spot = table[wanted.row, wanted.column]
    relative = spot / wanted.share / spot.sum()
    zero = table[rows // 2, columns // 2]
    is_zero = (wanted.row == rows // 2) & (wanted.column == columns // 2)
    unwanted_zero = jnp.where(is_zero.any(), 0.0, zero)
    efficiency = spot.sum()
    return Scores(
        efficiency=efficiency,
        efficiency_with_surfaces=efficiency * wanted.surfaces,
        uniformity_error=uniformity_error(relative),
        rms_error=relative.std() / relative.mean(),
        zero_order=zero,
        zero_order_to_mean=zero / spot.mean(),
        worst_stray_to_mean=worst_stray(table, wanted) / spot.mean(),
        stray=1 - efficiency - unwanted_zero,
        hottest_to_mean=relative.max() / relative.mean(),
    )


def worst_stray(table: Float[Array, "y x"], wanted: Wanted) -> Float[Array, ""]:
    """Power of the strongest unwanted order, replicas included, the zero order left out.

    The strongest replica of order m of n is m - n, with (m / (n - m))^2 of its power.
    Source: ratio of the pixel's sinc^2 at the two orders.
    """
    rows, columns = table.shape
    outside = table.at[wanted.row, wanted.column].set(0.0)
    outside = outside.at[rows // 2, columns // 2].set(0.0)
    ratio_y = replica_ratio(rows)[:, None]
    ratio_x = replica_ratio(columns)[None, :]
    return jnp.maximum(outside.max(), (table * np.maximum(ratio_y, ratio_x)).max())


def replica_ratio(pixels: int) -> Float[np.ndarray, " order"]:
    """Power of the nearest replica over that of each addressed order. Source: `worst_stray`."""
    order = np.abs(order_numbers(pixels))
    ratio: Float[np.ndarray, " order"] = (order / np.maximum(pixels - order, 1)) ** 2
    return ratio * (pixels > 1)


def range_of(limits: Limits) -> Range:
    """The limits as arrays in the order of `Scores`, a trace inside the stated ones."""
    stated = [limit for limit in limits.items() if limit[0] in Scores._fields]
    low = {name: one.value * (1 + INSIDE) for name, one in stated if one.sense == ">="}
    high = {name: one.value * (1 - INSIDE) for name, one in stated if one.sense == "<="}
    if not UNEVENNESS.keys() & high.keys():
        high["uniformity_error"] = USUAL_UNIFORMITY
    return Range(
        low=jnp.array([low.get(name, -jnp.inf) for name in Scores._fields]),
        high=jnp.array([high.get(name, jnp.inf) for name in Scores._fields]),
    )


def before_search(limits: Range) -> Range:
    """The limits on a design whose levels are still to be searched: unevenness is let be.

    The search mends unevenness; light that the phase has not got it cannot find.
    """
    at = [Scores._fields.index(name) for name in UNEVENNESS]
    bearable = jnp.array(list(UNEVENNESS.values()))
    zero = Scores._fields.index("zero_order_to_mean")
    return Range(
        low=limits.low.at[zero].multiply(1 - UNEVEN),
        high=limits.high.at[jnp.array(at)].max(bearable).at[zero].multiply(1 + UNEVEN),
    )


def merit(found: Scores, limits: Range) -> Float[Array, ""]:
    """Efficiency where every limit is met, else below 0 by how far they are missed.

    The design with the most merit reaches the limits first and then has the most light.
    """
    values = jnp.stack(found)
    excess = jnp.maximum(0.0, jnp.maximum(limits.low - values, values - limits.high)).sum()
    return found.efficiency - jnp.where(excess > 0, MISS + SHORTFALL_PRICE * excess, 0.0)
