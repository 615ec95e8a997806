"""Field types of the config: a text with a unit to an SI number, a limit to a comparison."""

import math
import re
from collections.abc import Callable
from typing import Annotated, Any, Literal

from pydantic import BaseModel, BeforeValidator, ConfigDict
from pydantic_core import PydanticCustomError

from doe import units

Info = Any  # pydantic's ValidationInfo, a protocol that the tests' shape checker cannot look into
POSITIVE = math.ulp(0.0)  # lower end of a range that leaves out 0


class Section(BaseModel):
    """Base of every table of the config: frozen, strict, no unknown keys."""

    model_config = ConfigDict(frozen=True, strict=True, extra="forbid")


def wrong(problem: str, allowed: str, fix: str) -> PydanticCustomError:
    """The error of a field; the loader adds file, line, key and value."""
    parts = {"problem": problem, "allowed": allowed, "fix": fix}
    return PydanticCustomError("field", "{problem}", parts)


def is_resolved(info: Info) -> bool:
    """True where the data are a record's resolved config, in SI numbers already."""
    return bool(info.context and info.context.get("resolved"))


def quantity(
    scale: dict[str, float], example: str, low: float = -math.inf, high: float = math.inf
) -> BeforeValidator:
    """Validator of a quantity in [low, high]; low = POSITIVE asks for more than 0."""

    def convert(given: Any, info: Info) -> float:
        if is_resolved(info) and isinstance(given, int | float):
            return float(given)
        if not isinstance(given, str):
            raise wrong(
                "a quantity is text with its unit",
                f"a number and a unit: {', '.join(scale)}",
                f'write it like "{example}"',
            )
        try:
            value = units.parse(given, scale, example)
        except units.UnitError as fault:
            raise wrong(fault.problem, fault.allowed, fault.fix) from None
        return in_range(value, given, scale, low, high)

    return BeforeValidator(convert)


def in_range(value: float, given: str, scale: dict[str, float], low: float, high: float) -> float:
    """`value` unchanged if it lies in [low, high]; else the error names a unit that would fit."""
    if low <= value <= high:
        return value
    if low >= 0 and value <= 0 and low != 0:
        raise wrong("the value must be above 0", "above 0", "check the sign")
    span = f"{units.show(low, scale)} to {units.show(high, scale)}"
    number, unit = units.split(given)
    other = next((u for u in scale if low <= value / scale[unit] * scale[u] <= high), None)
    fix = f'did you mean "{number} {other}"?' if other else "check number and unit"
    raise wrong("the value is outside the accepted range", span, fix)


Wavelength = Annotated[
    float, quantity(units.LENGTH, "1030 nm", low=100 * units.NANO, high=20 * units.MICRO)
]
Length = Annotated[float, quantity(units.LENGTH, "1.03 mm", low=POSITIVE, high=1e4)]
Distance = Annotated[float, quantity(units.LENGTH, "-2 mm", low=-1e4, high=1e4)]
Angle = Annotated[float, quantity(units.ANGLE, "2.5 deg", low=-math.pi, high=math.pi)]
Duration = Annotated[float, quantity(units.TIME, "300 fs", low=POSITIVE)]
Spread = Annotated[float, quantity(units.SHARE, "2 %", low=0, high=1)]
Shift = Annotated[float, quantity(units.LENGTH, "100 nm", low=0, high=1)]
Tilt = Annotated[float, quantity(units.ANGLE, "1 mrad", low=POSITIVE, high=math.pi / 2)]


def as_pair(given: Any) -> Any:
    """One value stands for both axes; a pair is [y, x]."""
    if isinstance(given, list | tuple):
        if len(given) == 2:
            return tuple(given)
        raise wrong("a pair has two values", "[y, x], or one value for both", "give two values")
    return (given, given)


def as_tuple(given: Any) -> Any:
    """Lists, also nested ones, as tuples; anything else unchanged."""
    if isinstance(given, list | tuple):
        return tuple(as_tuple(item) for item in given)
    return given


LIMIT = re.compile(r"\s*(<=|>=)\s*(.+?)\s*", re.DOTALL)


class Limit(Section):
    """One comparison a score must keep; `value` in SI (a fraction, m or rad)."""

    sense: Literal["<=", ">="]
    value: float

    def met_by(self, score: float) -> bool:
        """Whether a score keeps the limit."""
        return score <= self.value if self.sense == "<=" else score >= self.value

    def __str__(self) -> str:
        return f"{self.sense} {self.value:.6g}"


def limit(kind: Literal["share", "ratio", "length"]) -> Callable[[Any, Info], Any]:
    """Validator of one comparison or a list of them."""
    example = {"share": "<= 1 %", "ratio": "<= 0.25", "length": "<= 1 um"}[kind]

    def one(given: Any) -> Limit:
        match = LIMIT.fullmatch(given) if isinstance(given, str) else None
        if match is None:
            raise wrong(
                "a limit is text: a comparison and a value",
                f'"<= VALUE" or ">= VALUE", like "{example}"',
                f'write it like "{example}"',
            )
        sense, text = match.groups()
        return Limit(
            sense="<=" if sense == "<=" else ">=", value=limit_value(text, kind, f"{sense} 1 %")
        )

    def convert(given: Any, info: Info) -> Any:
        if is_resolved(info):
            return None if given is None else tuple(given)
        if given == []:
            raise wrong("the list of limits is empty", "one comparison or more", "remove the key")
        many = given if isinstance(given, list) else [given]
        return tuple(one(item) for item in many)

    return convert


def limit_value(text: str, kind: str, example: str) -> float:
    """The number behind the comparison sign."""
    if kind == "ratio" and re.fullmatch(r"[\d.]+(e[-+]?\d{1,2})?", text):
        return float(text)
    scale = {"share": units.SHARE, "ratio": units.SHARE, "length": units.LENGTH | units.ANGLE}
    try:
        value = units.parse(text, scale[kind], example)
    except units.UnitError as fault:
        if kind == "share" and "unit is missing" in fault.problem:
            hint = f'did you mean "{example.split()[0]} {text} %"? at most 100 %'
            raise wrong("a share needs the unit %", "0 % to 100 %", hint) from None
        raise wrong(fault.problem, fault.allowed, fault.fix) from None
    if value < 0 or (kind == "share" and value > 1):
        raise wrong("a share lies between 0 and 100 %", "0 % to 100 %", f'like "{example}"')
    return value


Share = Annotated[tuple[Limit, ...], BeforeValidator(limit("share"))]
Ratio = Annotated[tuple[Limit, ...], BeforeValidator(limit("ratio"))]
Offset = Annotated[tuple[Limit, ...], BeforeValidator(limit("length"))]
