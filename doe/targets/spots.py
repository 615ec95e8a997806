"""Spot patterns on the orders of a unit cell."""

from dataclasses import dataclass

import numpy as np
from jaxtyping import Float, Int

from doe import sampling
from doe.config.derived import order_steps
from doe.config.schema import Config
from doe.config.target import Angles, Grid, OrderList


@dataclass(frozen=True)
class SpotTarget:
    """Wanted orders and their shares of the power (sum 1)."""

    m_y: Int[np.ndarray, " spot"]
    m_x: Int[np.ndarray, " spot"]
    share: Float[np.ndarray, " spot"]


def spots(config: Config, target: Grid | OrderList | Angles) -> SpotTarget:
    """The wanted orders of a spot pattern with their shares of the power."""
    found = target.spots(order_steps(config))
    weights = np.array([spot.weight for spot in found])
    return SpotTarget(
        m_y=np.array([round(spot.m_y) for spot in found]),
        m_x=np.array([round(spot.m_x) for spot in found]),
        share=weights / weights.sum(),
    )


def position_error(config: Config, target: SpotTarget) -> float | None:
    """Largest distance of a spot from its wanted place: m behind a lens, direction cosine else.

    None for targets told by orders, whose places are the orders' own.
    Source: grating equation and the mapping of the lens.
    """
    if isinstance(config.target, Angles):
        wanted = config.target.spots(order_steps(config))
        steps = order_steps(config)
        return max(
            float(np.hypot((s.m_y - round(s.m_y)) * steps[0], (s.m_x - round(s.m_x)) * steps[1]))
            for s in wanted
        )
    if not isinstance(config.target, Grid) or config.target.pitch is None:
        return None
    focal_length = config.plane.focal_length or 0.0
    squares = np.zeros(len(target.share))
    per_spot = config.target.order_steps()
    axes = zip(
        (target.m_y, target.m_x), order_steps(config), per_spot, config.target.pitch, strict=True
    )
    for orders, step, spacing, pitch in axes:
        for i, order in enumerate(orders):
            mapped = sampling.focal_position(order * step, focal_length, config.plane.mapping)
            squares[i] += (mapped - order / spacing * pitch) ** 2
    return float(np.sqrt(squares.max()))
