"""Quantities as text with a unit, to SI numbers and back: the only place that scales units."""

import math
import re
from decimal import Decimal

from doe.errors import listing, nearest

DEGREE = math.pi / 180
MICRO = 1e-6
NANO = 1e-9

LENGTH = {"nm": NANO, "um": MICRO, "mm": 1e-3, "m": 1.0}
ANGLE = {"deg": DEGREE, "mrad": 1e-3, "rad": 1.0, "arcmin": DEGREE / 60}
TIME = {"fs": 1e-15, "ps": 1e-12, "ns": NANO}
ENERGY = {"uJ": MICRO, "mJ": 1e-3, "J": 1.0}
POWER = {"mW": 1e-3, "W": 1.0, "kW": 1e3}
FLUENCE = {"J/cm^2": 1e4}
SHARE = {"%": 1e-2}
ALL = LENGTH | ANGLE | TIME | ENERGY | POWER | FLUENCE | SHARE

NUMBER = re.compile(r"\s*([-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d{1,3})?)\s*(.*?)\s*", re.DOTALL)


class UnitError(Exception):
    """Text that is no usable quantity: what is wrong, what is allowed, what to write."""

    def __init__(self, problem: str, allowed: str, fix: str) -> None:
        super().__init__(problem)
        self.problem, self.allowed, self.fix = problem, allowed, fix


def split(text: str) -> tuple[str, str]:
    """Number and unit of a text that is a quantity."""
    match = NUMBER.fullmatch(text)
    assert match is not None
    return match[1], match[2]


def parse(text: str, units: dict[str, float], example: str) -> float:
    """The SI value of text such as `1030 nm`; raises UnitError."""
    allowed = f"a number and a unit: {listing(units)}"
    match = NUMBER.fullmatch(text)
    if match is None:
        raise UnitError("this is not a number with a unit", allowed, f'write it like "{example}"')
    number, unit = match.groups()
    if not unit:
        raise UnitError("the unit is missing", allowed, f'write it like "{example}"')
    if unit not in units:
        guess = nearest(unit, units)
        hint = f'did you mean "{number} {guess}"?' if guess else f'write it like "{example}"'
        kind = "does not fit here" if unit in ALL else "is not a known unit"
        raise UnitError(f"unit {unit!r} {kind}", allowed, hint)
    value = float(Decimal(number) * Decimal(repr(units[unit])))  # rounded once: 0.5 um is 500 nm
    if not math.isfinite(value):
        raise UnitError("the value must be finite", allowed, f'write it like "{example}"')
    return value


def show(value: float, units: dict[str, float], digits: int = 4) -> str:
    """An SI value as text in the largest listed unit that leaves a number of at least 1."""
    magnitude = abs(value)
    names = sorted(units, key=lambda name: units[name], reverse=True)
    unit = next((name for name in names if magnitude >= units[name] * (1 - 1e-9)), names[-1])
    return f"{value / units[unit]:.{digits}g} {unit}"


def length(value: float, digits: int = 4) -> str:
    """Metres as text in nm, um, mm or m."""
    return show(value, LENGTH, digits)


def angle(value: float, digits: int = 4) -> str:
    """Radians as text in degrees or milliradians."""
    unit = "deg" if abs(value) >= DEGREE else "mrad"
    return f"{value / ANGLE[unit]:.{digits}g} {unit}"


def percent(value: float, digits: int = 2) -> str:
    """A fraction as text in per cent."""
    return f"{value * 100:.{digits}f} %"


def micrometres(value: float) -> float:
    """Micrometres in metres, rounded once."""
    return float(Decimal(repr(value)) * Decimal(repr(MICRO)))


def in_nm(value: float) -> int:
    """Metres to whole nanometres, the database unit of layouts."""
    return round(value / NANO)


def gigabytes(count: float) -> str:
    """Bytes as text in gigabytes."""
    return f"{count / 1e9:.2f} GB"


def from_nm(count: int) -> float:
    """Whole nanometres in metres."""
    return count / 1e9


def in_um(value: float) -> float:
    """Metres to micrometres."""
    return value / MICRO
