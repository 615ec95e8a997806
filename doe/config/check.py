"""Rules across the tables of a config, each told as a fault.

The parameters of a check name the tables it reads; it runs once those are sound by themselves, so
that every fault of a file is told at once.
"""

import inspect
import math
from collections.abc import Callable, Iterator, Mapping
from typing import Any

from doe import sampling, units
from doe.config import fit, single
from doe.config.fit import FEWEST_PIXELS, Spots, Trouble, resolved_period
from doe.config.schema import Beam, Element, Limits, MaterialTable, Plane, Process
from doe.errors import listing, nearest
from doe.material import MATERIALS

WIDEST_RULE = 16  # pixels; the exact search keeps rows of bits that a wider rule does not fit


Check = Callable[..., Iterator[Trouble]]


def run(sections: Mapping[str, Any]) -> list[Trouble]:
    """Every fault of all checks whose tables are in `sections`."""
    found: list[Trouble] = []
    for check in CHECKS:
        needs = list(inspect.signature(check).parameters)
        if all(name in sections for name in needs):
            found += check(**{name: sections[name] for name in needs})
    return found


def material(material: MaterialTable) -> Iterator[Trouble]:
    """One of name and index, a known name, an index that bends light."""
    if (material.name is None) == (material.index is None):
        yield Trouble(
            "material", "give either `name` or `index`", "one of the two", "remove or add one"
        )
    if material.index is not None and not 1 < material.index <= 6:
        yield Trouble(
            "material.index", "no usable etch depth", "a real index above 1, up to 6", "check it"
        )
    if material.name is not None and material.name not in MATERIALS:
        guess = nearest(material.name, MATERIALS)
        fix = f'did you mean "{guess}"?' if guess else "give `index` instead"
        yield Trouble("material.name", "this material is not known", listing(MATERIALS), fix)


def fit_range(beam: Beam, material: MaterialTable) -> Iterator[Trouble]:
    """A wavelength for which the material's index is known."""
    known = MATERIALS.get(material.name or "")
    if known is not None and not known.shortest <= beam.wavelength <= known.longest:
        span = f"{units.length(known.shortest)} to {units.length(known.longest)}"
        problem = f"{units.length(beam.wavelength)} lies outside the fit of {material.name}"
        yield Trouble("beam.wavelength", problem, span, "give `index` instead of `name`")


def levels(element: Element, process: Process) -> Iterator[Trouble]:
    """Binary masks make a power of two of levels."""
    count = element.levels
    if count and count & (count - 1):
        low = 2 ** int(math.log2(count))
        yield Trouble(
            "element.levels",
            "M binary masks give 2^M levels",
            "0, 2, 4, 8, 16, 32, 64, 128 or 256",
            f"set levels to {low} or {2 * low}",
        )


def pixels(element: Element) -> Iterator[Trouble]:
    """Enough pixels along each axis that varies."""
    rows, columns = element.pixels
    if (rows < FEWEST_PIXELS and rows != 1) or columns < FEWEST_PIXELS:
        yield Trouble(
            "element.pixels",
            "too few pixels to hold a pattern",
            f"{FEWEST_PIXELS} or more along an axis; [1, N] for a one-dimensional grating along x",
            "set pixels to 64 or more",
        )


def feature(
    beam: Beam, element: Element, process: Process, plane: Plane, target: Spots
) -> Iterator[Trouble]:
    """A mask rule that leaves room for a structure."""
    size = resolved_period(beam, element, plane, target)
    if size is None:
        return
    for name in ("min_feature", "min_gap"):
        rule = getattr(process, name)
        key = f"process.{name}"
        for axis, length, count in zip("yx", size, element.pixels, strict=True):
            if rule is None or count == 1:
                continue
            if rule > length / 2:
                yield Trouble(
                    key,
                    f"{units.length(rule)} is more than half the period along {axis}",
                    f"at most {units.length(length / 2)}",
                    "choose a finer process or a longer period",
                )
            elif axis == "x" and sampling.pixels_for(rule, length / count) > WIDEST_RULE:
                yield Trouble(
                    key,
                    f"{units.length(rule)} takes {sampling.pixels_for(rule, length / count)} "
                    f"pixels along x",
                    f"at most {WIDEST_RULE} pixels",
                    "use larger pixels: they keep the rule by themselves",
                )


def limits(limits: Limits) -> Iterator[Trouble]:
    """Limits on one score that leave room between them."""
    for scored in (limits, limits.made):
        for name in {name for name, _ in scored.items()} if scored else ():
            both = [one for key, one in scored.items() if key == name] if scored else []
            low = max((one.value for one in both if one.sense == ">="), default=-math.inf)
            high = min((one.value for one in both if one.sense == "<="), default=math.inf)
            if low > high:
                yield Trouble(
                    f"limits.{name}", "the limits contradict one another", "low <= high", "mend one"
                )


CHECKS: list[Check] = [
    material,
    fit_range,
    single.element,
    single.beam,
    single.aperture,
    single.wavefront,
    single.cell_beam,
    single.plane,
    single.window,
    single.reach,
    levels,
    pixels,
    fit.pitch,
    fit.grid,
    fit.period,
    fit.spot_count,
    fit.spots,
    feature,
    limits,
]
