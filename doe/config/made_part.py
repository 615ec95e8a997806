"""Made-part errors written as KEY=VALUE, to plain numbers."""

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
