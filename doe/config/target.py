"""The `[target]` table: one frozen model for each kind of pattern, and the orders each asks for."""

import math
from itertools import pairwise
from typing import Annotated, Any, Literal, NamedTuple

from pydantic import BeforeValidator, Field

from doe.config.quantity import Angle, Length, Section, Tilt, as_pair, as_tuple, wrong

Order = Annotated[int, Field(ge=-100_000, le=100_000)]
Count = Annotated[int, Field(ge=1)]


def as_weights(given: Any) -> Any:
    """Relative powers: finite and not negative, at least one above 0."""
    flat: list[Any] = []
    for row in given if isinstance(given, list) else [given]:
        flat += row if isinstance(row, list) else [row]
    for index, weight in enumerate(flat):
        number = isinstance(weight, int | float) and not isinstance(weight, bool)
        if not number or not math.isfinite(weight) or weight < 0:
            raise wrong(
                f"weight {index} is {weight!r}", "finite numbers of at least 0", "mend this weight"
            )
    if not any(flat):
        raise wrong("the target has no power", "at least one weight above 0", "give a weight")
    return tuple(float(weight) for weight in flat)


Weights = Annotated[tuple[float, ...], BeforeValidator(as_weights)]
Orders = Annotated[tuple[Order, ...], BeforeValidator(as_tuple), Field(min_length=1)]


class Spot(NamedTuple):
    """One wanted order and its relative power."""

    m_y: float
    m_x: float
    weight: float


class Grid(Section):
    """A rectangular grid of spots: `shape` counts them, or `orders_y` and `orders_x` name them."""

    kind: Literal["grid"]
    shape: Annotated[tuple[Count, Count], BeforeValidator(as_pair)] | None = None
    orders_y: Orders | None = None
    orders_x: Orders | None = None
    pitch: Annotated[tuple[Length, Length], BeforeValidator(as_pair)] | None = None
    angular_pitch: Annotated[tuple[Tilt, Tilt], BeforeValidator(as_pair)] | None = None
    weights: Weights | None = None
    zero_order: Literal["wanted", "unwanted"] = "wanted"

    def count(self) -> int:
        """Number of spots before weights and the zero order are looked at."""
        if self.shape is not None:
            return self.shape[0] * self.shape[1]
        return len(self.orders_y or (0,)) * len(self.orders_x or (0,))

    def nearest_steps(self) -> tuple[int, int]:
        """Orders between the nearest two spots along (y, x); 0 along a line of one."""
        gaps = [[b - a for a, b in pairwise(sorted(axis))] for axis in self.axes()]
        return min(gaps[0], default=0), min(gaps[1], default=0)

    def order_steps(self) -> tuple[int, int]:
        """Orders from one spot of a `shape` to the next along (y, x): 2 for even counts, else 1."""
        rows, columns = self.shape or (1, 1)
        return 2 - rows % 2, 2 - columns % 2

    def axes(self) -> tuple[tuple[int, ...], tuple[int, ...]]:
        """The orders along y and along x."""
        if self.shape is None:
            return self.orders_y or (0,), self.orders_x or (0,)
        rows, columns = self.shape
        step_y, step_x = self.order_steps()
        return centred(rows, step_y), centred(columns, step_x)

    def spots(self, steps: tuple[float, float]) -> list[Spot]:
        """The wanted orders; `steps` is not used, a grid lies on the orders."""
        orders_y, orders_x = self.axes()
        pairs = [(m_y, m_x) for m_y in orders_y for m_x in orders_x]
        weights = self.weights or (1.0,) * len(pairs)
        dark_centre = self.zero_order == "unwanted"
        found = [Spot(*pair, weight) for pair, weight in zip(pairs, weights, strict=True)]
        return [s for s in found if s.weight and not (dark_centre and s.m_y == s.m_x == 0)]


class OrderList(Section):
    """A free list of orders `[m_y, m_x]`."""

    kind: Literal["orders"]
    orders: Annotated[tuple[tuple[Order, Order], ...], BeforeValidator(as_tuple)]
    weights: Weights | None = None

    def count(self) -> int:
        """Number of orders listed."""
        return len(self.orders)

    def spots(self, steps: tuple[float, float]) -> list[Spot]:
        """The wanted orders; `steps` is not used, they are given as orders."""
        weights = self.weights or (1.0,) * len(self.orders)
        found = [Spot(*pair, weight) for pair, weight in zip(self.orders, weights, strict=True)]
        return [spot for spot in found if spot.weight]


class Angles(Section):
    """A free list of angles `[theta_y, theta_x]`, their sines being the direction cosines."""

    kind: Literal["angles"]
    angles: Annotated[tuple[tuple[Angle, Angle], ...], BeforeValidator(as_tuple)]
    weights: Weights | None = None

    def count(self) -> int:
        """Number of angles listed."""
        return len(self.angles)

    def spots(self, steps: tuple[float, float]) -> list[Spot]:
        """The wanted orders, not rounded; `steps` are the direction cosines of order 1 (y, x)."""
        weights = self.weights or (1.0,) * len(self.angles)
        return [
            Spot(math.sin(theta_y) / steps[0], math.sin(theta_x) / steps[1], weight)
            for (theta_y, theta_x), weight in zip(self.angles, weights, strict=True)
            if weight
        ]


class NoTarget(Section):
    """Nothing is wanted: the light is looked at as it is."""

    kind: Literal["none"]
    weights: None = None

    def count(self) -> int:
        """No spots."""
        return 0

    def spots(self, steps: tuple[float, float]) -> list[Spot]:
        """No spots."""
        return []


Target = Annotated[Grid | OrderList | Angles | NoTarget, Field(discriminator="kind")]


def centred(count: int, step: int) -> tuple[int, ...]:
    """`count` orders spaced by `step` and centred on the axis."""
    return tuple(step * i - step * (count - 1) // 2 for i in range(count))
