"""The `[solver]` table: methods, starts and steps, and the options of each method."""

from typing import Annotated, Any

from pydantic import BeforeValidator, Field

from doe.config.quantity import Section, as_tuple, wrong
from doe.errors import nearest

Factor = Annotated[float, Field(gt=0, le=100, allow_inf_nan=False)]


class Gradient(Section):
    """Descent on the mask phase, levels drawn in over the budget."""

    learning_rate: Factor = 0.02


class GerchbergSaxton(Section):
    """The alternating-constraint loop without weights."""


class Weighted(Section):
    """The alternating-constraint loop with a weight on each wanted order."""

    exponent: Factor = 1.0


def known_method(given: Any) -> Any:
    """The name of a method there is."""
    known = method_names()
    if given not in known:
        guess = nearest(str(given), known)
        raise wrong(
            f"{given!r} is not a method",
            ", ".join(known),
            f'did you mean "{guess}"?' if guess else "choose one of these",
        )
    return given


MethodName = Annotated[str, BeforeValidator(known_method)]
Methods = Annotated[tuple[MethodName, ...], BeforeValidator(as_tuple), Field(min_length=1)]


class Solver(Section):
    """Methods, starts and budget; one sub-table of options for each method."""

    methods: Methods = ("gradient",)
    starts: Annotated[int, Field(ge=1, le=4096)] = 16
    steps: Annotated[int, Field(ge=1, le=1_000_000)] = 600
    gradient: Gradient = Gradient()
    gerchberg_saxton: GerchbergSaxton = Field(default=GerchbergSaxton(), alias="gerchberg-saxton")
    weighted: Weighted = Weighted()

    def options(self, method: str) -> Section:
        """The options of a method by its name."""
        found: Section = getattr(self, method.replace("-", "_"))
        return found


def method_names() -> list[str]:
    """The methods there are: the sub-tables of `[solver]`."""
    fields = Solver.model_fields.items()
    return [field.alias or name for name, field in fields if isinstance(field.default, Section)]
