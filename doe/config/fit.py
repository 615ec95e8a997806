"""Whether a target fits its element: period, orders within reach, each order once."""

import math
from collections.abc import Iterator
from itertools import pairwise
from typing import NamedTuple

from doe import units
from doe.config.schema import Beam, Element, Plane
from doe.config.target import Angles, Grid, NoTarget, OrderList, Spot

MOST_SPOTS = 20_000
FEWEST_PIXELS = 8  # along an axis that varies
ON_ORDER = 0.01  # of the order spacing: an angle this close to an order counts as on it
SAME_PERIOD = 1e-4  # relative: periods are rounded to the nanometre on the mask

Spots = Grid | OrderList | Angles | NoTarget


class Trouble(NamedTuple):
    """A fault before the file and line of its key are known."""

    key: str
    problem: str
    allowed: str
    fix: str


def pitch(plane: Plane, target: Spots) -> Iterator[Trouble]:
    """A pitch of the sort the plane measures in."""
    if not isinstance(target, Grid):
        return
    if plane.kind == "angles" and target.pitch is not None:
        yield Trouble(
            "target.pitch", "angles have no length", "angular_pitch", "give `angular_pitch`"
        )
    if target.pitch is not None and target.angular_pitch is not None:
        yield Trouble(
            "target.pitch", "`pitch` and `angular_pitch` both stand", "one of them", "remove one"
        )


def grid(target: Spots) -> Iterator[Trouble]:
    """A grid is told either by its shape or by its orders."""
    if not isinstance(target, Grid):
        return
    named = target.orders_y is not None or target.orders_x is not None
    if (target.shape is not None) == named:
        yield Trouble(
            "target.shape",
            "give either `shape`, or `orders_y` and `orders_x`",
            "one of the two",
            "remove or add one",
        )
    if named and (target.pitch is not None or target.angular_pitch is not None):
        yield Trouble(
            "target.pitch",
            "named orders have no pitch: the period sets it",
            "`shape` with a pitch, or orders with `element.period`",
            "remove the pitch",
        )


def period(beam: Beam, element: Element, plane: Plane, target: Spots) -> Iterator[Trouble]:
    """A period, given or following from the pitch, and no two that differ."""
    if element.kind == "single":
        return
    wanted = period_of_pitch(beam, plane, target)
    given = element.period
    if given is None and wanted is None:
        yield Trouble(
            "element.period", "no period, and no pitch to find it from", "a length", "add it"
        )
    if given is None or wanted is None:
        return
    names = "yx" if element.pixels[0] > 1 else " x"
    for axis, mine, theirs in zip(names, given, wanted, strict=True):
        if axis != " " and abs(mine / theirs - 1) > SAME_PERIOD:
            yield Trouble(
                "element.period",
                f"the pitch asks for a period of {units.length(theirs, 7)} along {axis}",
                "one of period and pitch, or both agreeing",
                "remove the period or correct the pitch",
            )


def period_of_pitch(beam: Beam, plane: Plane, target: Spots) -> tuple[float, float] | None:
    """Period (y, x) [m] whose orders lie at a grid's pitch: step wavelength / sin(angle).

    Source: grating equation; a lens maps near its axis as f sin, whatever its mapping further out.
    """
    if not isinstance(target, Grid):
        return None
    if plane.kind == "lens" and plane.focal_length and target.pitch:
        sines = [pitch / plane.focal_length for pitch in target.pitch]
    elif target.angular_pitch:
        sines = [math.sin(angle) for angle in target.angular_pitch]
    else:
        return None
    step_y, step_x = target.order_steps()
    return step_y * beam.wavelength / sines[0], step_x * beam.wavelength / sines[1]


def square_rows(element: Element, period: tuple[float, float]) -> tuple[float, float]:
    """The period of an element, that of a one-dimensional grating being one pixel along y."""
    if element.pixels[0] == 1:
        return period[1] / element.pixels[1], period[1]
    return period


def resolved_period(
    beam: Beam, element: Element, plane: Plane, target: Spots
) -> tuple[float, float] | None:
    """Period (y, x) [m] given or following from the pitch; None where neither is there."""
    if element.kind == "single":
        return None
    found = element.period or period_of_pitch(beam, plane, target)
    return None if found is None else square_rows(element, found)


def spot_count(target: Spots) -> Iterator[Trouble]:
    """Some spots, not too many, with as many weights."""
    if isinstance(target, NoTarget):
        return
    count = target.count()
    key = "target.shape" if isinstance(target, Grid) else f"target.{target.kind}"
    if not 0 < count <= MOST_SPOTS:
        yield Trouble(key, f"{count} spots", f"1 to {MOST_SPOTS} spots", "ask for fewer")
    if target.weights is not None and len(target.weights) != count:
        yield Trouble(
            "target.weights",
            f"{len(target.weights)} weights for {count} spots",
            "one weight for each spot",
            "give as many weights as spots",
        )


def spots(beam: Beam, element: Element, plane: Plane, target: Spots) -> Iterator[Trouble]:
    """Every wanted spot on an order of its own that the pixels address."""
    size = resolved_period(beam, element, plane, target)
    usable = 0 < target.count() <= MOST_SPOTS
    fits = target.weights is None or len(target.weights) == target.count()
    if size is None or not usable or not fits or element.pixels[1] < FEWEST_PIXELS:
        return
    steps = (beam.wavelength / size[0], beam.wavelength / size[1])
    wanted = target.spots(steps)
    if not wanted:
        yield Trouble("target", "the target has no power", "at least one spot", "ask for a spot")
    for spot in wanted:
        found = off_order(spot, steps) or out_of_field(spot, element, steps)
        if found:
            yield found
            return
    places = sorted((round(spot.m_y), round(spot.m_x)) for spot in wanted)
    for one, other in pairwise(places):
        if one == other:
            text = f"two spots coincide in order {list(one)}"
            yield Trouble("target", text, "each order once", "remove one of the two")
            return


def off_order(spot: Spot, steps: tuple[float, float]) -> Trouble | None:
    """The fault of an angle that falls between orders."""
    for axis, order, step in zip("yx", (spot.m_y, spot.m_x), steps, strict=True):
        if abs(order - round(order)) > ON_ORDER:
            near = math.asin(max(-1.0, min(1.0, round(order) * step)))
            return Trouble(
                "target.angles",
                f"an angle lies on order {order:.3f} along {axis}, between two orders",
                f"angles whose sine is a whole multiple of wavelength / period = {step:.6g}",
                f"use {units.angle(near, 6)}, or choose a period that has this angle",
            )
    return None


def out_of_field(spot: Spot, element: Element, steps: tuple[float, float]) -> Trouble | None:
    """The fault of a spot that the pixels cannot address, or that no wave reaches."""
    key = "target"
    orders = (round(spot.m_y), round(spot.m_x))
    for axis, order, count, step in zip("yx", orders, element.pixels, steps, strict=True):
        half_angle = units.angle(math.asin(min(1.0, count * step / 2)))
        allowed = f"orders below {count / 2:g}, angles below {half_angle} along {axis}"
        if 2 * abs(order) == count:
            text = f"order {order} along {axis} is the Nyquist order, where +m and -m coincide"
            return Trouble(key, text, allowed, "use more pixels in a period")
        if 2 * abs(order) > count:
            text = f"order {order} along {axis} is beyond what {count} pixels address"
            return Trouble(key, text, allowed, "use more pixels in a period, or a smaller angle")
    if math.hypot(orders[0] * steps[0], orders[1] * steps[1]) >= 1:
        text = f"order {list(orders)} is evanescent: its direction cosines exceed 1"
        return Trouble(key, text, "orders that propagate", "use a longer period")
    return None
