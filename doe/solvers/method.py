"""The protocol of a method: a pair of pure functions and how to read a design off the state."""

from collections.abc import Callable
from typing import Any, NamedTuple

from jaxtyping import Array, Float, Int, PRNGKeyArray

from doe.problem import Problem

State = Any  # a pytree of arrays, so that a checkpoint is its leaves


class Tick(NamedTuple):
    """Where in the budget a step stands, with a key of its own."""

    number: Int[Array, ""]
    fraction: Float[Array, ""]
    key: PRNGKeyArray


class Method(NamedTuple):
    """A way to design: `init` makes a state of a first phase, `step` the next state."""

    init: Callable[[Problem, Float[Array, "y x"]], State]
    step: Callable[[Problem, State, Tick], State]
    design: Callable[[State], Float[Array, "y x"]]
