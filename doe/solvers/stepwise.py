"""The weighted loop with the levels imposed step by step."""

import jax.numpy as jnp
from jaxtyping import Array, Float

from doe.config.solver import Stepwise, Weighted
from doe.fabrication.makeable import freezing
from doe.optics.phasor import phasor
from doe.problem import Problem
from doe.solvers.method import Method, Tick
from doe.solvers.weighted import WeightedState, weighted


def stepwise(options: Stepwise) -> Method:
    """The weighted loop, in which phases within a growing distance of a level are put on it.

    Source: Wyrowski, J. Opt. Soc. Am. A 7, 961 (1990) (from memory), whose loop has no weights.
    """
    loop = weighted(Weighted(exponent=options.exponent))

    def step(problem: Problem, state: WeightedState, tick: Tick) -> WeightedState:
        moved = loop.step(problem, state, tick)
        phase = freezing(jnp.angle(moved.near), problem.levels, tick.fraction)
        return WeightedState(phasor(phase), moved.weight)

    def init(problem: Problem, start: Float[Array, "y x"]) -> WeightedState:
        state: WeightedState = loop.init(problem, start)
        return state

    return Method(init, step, loop.design)
