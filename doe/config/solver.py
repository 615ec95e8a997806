"""The `[solver]` table: methods, starts and steps, and the options of each method."""

from typing import Annotated, Any, Literal

from pydantic import BeforeValidator, Field

from doe.config.quantity import Section, as_tuple, wrong
from doe.errors import nearest

Factor = Annotated[float, Field(gt=0, le=100, allow_inf_nan=False)]


class MethodOptions(Section):
    """Base of the options of a method."""


class Gradient(MethodOptions):
    """Descent on the mask phase, levels drawn in over the budget."""

    learning_rate: Factor = 0.02


class GerchbergSaxton(MethodOptions):
    """The alternating-constraint loop without weights."""


class Weighted(MethodOptions):
    """The alternating-constraint loop with a weight on each wanted order."""

    exponent: Factor = 1.0


class Stepwise(MethodOptions):
    """The weighted loop with the levels imposed step by step."""

    exponent: Factor = 1.0


class Search(Section):
    """The exact search of the levels that refines every method; left out = chosen by the job."""

    chains: Annotated[int, Field(ge=1, le=64)] | None = None
    blocks: Annotated[int, Field(ge=10, le=100_000)] | None = None
    trials: Annotated[int, Field(ge=1, le=1_000_000_000)] | None = None  # of a chain in a block


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
    start: Literal["order-phases", "random"] = "order-phases"
    hops: Annotated[int, Field(ge=0, le=1_000_000)] = 4000
    refine: bool = True
    search: Search = Search()
    gradient: Gradient = Gradient()
    gerchberg_saxton: GerchbergSaxton = Field(default=GerchbergSaxton(), alias="gerchberg-saxton")
    weighted: Weighted = Weighted()
    stepwise: Stepwise = Stepwise()

    def options(self, method: str) -> MethodOptions:
        """The options of a method by its name."""
        found: MethodOptions = getattr(self, method.replace("-", "_"))
        return found


def method_names() -> list[str]:
    """The methods there are: the sub-tables of `[solver]`."""
    fields = Solver.model_fields.items()
    return [
        field.alias or name for name, field in fields if isinstance(field.default, MethodOptions)
    ]
