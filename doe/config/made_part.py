"""Made-part errors and points of space written on the command line, to plain numbers."""

from typing import NamedTuple

from doe import units
from doe.config import derived
from doe.config.schema import Config
from doe.errors import ConfigError, Fault, listing, nearest


class Errors(NamedTuple):
    """The error vector of one part: relative depth errors, + = deeper."""

    depth: float = 0.0  # of the whole relief
    etch_depth: tuple[float, ...] = ()  # of each etch, the pi etch first; none = 0


def parse_errors(given: tuple[str, ...], config: Config) -> Errors:
    """The errors in texts such as `depth=3%`. Error: ConfigError naming the text."""
    masks = derived.mask_count(config)
    names = ["depth", *(f"depth_{etch}" for etch in range(1, masks + 1))]
    found = dict.fromkeys(names, 0.0)
    for text in given:
        name, _, value = text.partition("=")
        if name not in found:
            guess = nearest(name, names)
            fix = f"did you mean `{guess}`?" if guess else "use one of these"
            raise ConfigError(
                Fault("there is no such error", listing(names), fix, key="--error", value=text)
            )
        try:
            found[name] = units.parse(value, units.SHARE, "3 %")
        except units.UnitError as fault:
            raise ConfigError(
                Fault(fault.problem, fault.allowed, fault.fix, key="--error", value=text)
            ) from None
    return Errors(found["depth"], tuple(found[name] for name in names[1:]))


def parse_point(text: str) -> tuple[float, float, float]:
    """A point (z, y, x) [m] in a text such as `300 mm, 0 mm, 20 mm`. Error: ConfigError."""
    parts = text.split(",")
    try:
        z, y, x = (units.parse(part, units.LENGTH, "300 mm") for part in parts)
    except (units.UnitError, ValueError):
        raise ConfigError(
            Fault(
                "this is no point",
                "three lengths with units: z, y, x, z from the element",
                'write it like "300 mm, 0 mm, 20 mm"',
                key="--at",
                value=text,
            )
        ) from None
    return z, y, x
