"""Gradient descent on the mask phase."""

from typing import Any, NamedTuple

import jax
import jax.numpy as jnp
import optax
from jaxtyping import Array, Float

from doe.config.solver import Gradient
from doe.problem import Problem
from doe.solvers.method import Method, Tick

LAST_RATE = 0.1  # of the learning rate, reached on a cosine at the end of the budget


class GradientState(NamedTuple):
    """Phase [rad] and the optimiser's moments."""

    phase: Float[Array, "y x"]
    moments: Any


def gradient(options: Gradient) -> Method:
    """Adam on the phase of each pixel.

    Source: Kingma and Ba, ICLR (2015) (from memory).
    """
    adam = optax.scale_by_adam(b2=0.99)

    def init(problem: Problem, start: Float[Array, "y x"]) -> GradientState:
        return GradientState(start, adam.init(start))

    def step(problem: Problem, state: GradientState, tick: Tick) -> GradientState:
        slope = jax.grad(problem.loss)(state.phase, tick.fraction)
        # A pixel's slope falls as 1 / pixels; the scale keeps it clear of Adam's own epsilon.
        scaled = slope * slope.size
        direction, moments = adam.update(scaled, state.moments)
        decay = (1 + jnp.cos(jnp.pi * tick.fraction)) / 2
        rate = options.learning_rate * (LAST_RATE + (1 - LAST_RATE) * decay)
        return GradientState(state.phase - rate * direction, moments)

    return Method(init, step, design=lambda state: state.phase)
