"""The weighted Gerchberg-Saxton loop: weak orders are asked for more."""

from typing import NamedTuple

import jax.numpy as jnp
from jaxtyping import Array, Complex, Float

from doe.config.solver import Weighted
from doe.optics.orders import amplitudes, mask_field
from doe.optics.phasor import phasor
from doe.problem import Problem
from doe.solvers.method import Method, Tick
from doe.solvers.start import unit


class WeightedState(NamedTuple):
    """Field at the mask and the weight of each order."""

    near: Complex[Array, "y x"]
    weight: Float[Array, "order_y order_x"]


def weighted(options: Weighted) -> Method:
    """Gerchberg-Saxton, weights w_k <- w_k (mean |A| / |A_k|)^exponent; 1 is as published.

    Source: Di Leonardo, Ianni and Ruocco, Opt. Express 15, 1913 (2007) (from memory).
    """

    def init(problem: Problem, start: Float[Array, "y x"]) -> WeightedState:
        return WeightedState(phasor(start), jnp.sqrt(problem.share))

    def step(problem: Problem, state: WeightedState, tick: Tick) -> WeightedState:
        is_wanted = problem.share > 0
        got = amplitudes(state.near, problem.basis_y, problem.basis_x)
        size = jnp.where(is_wanted, jnp.sqrt(problem.share), 1.0)
        relative = jnp.where(is_wanted, jnp.abs(got) / size, 1.0)
        mean = jnp.where(is_wanted, relative, 0.0).sum() / is_wanted.sum()
        weight = state.weight * (mean / relative) ** options.exponent
        near = unit(mask_field(weight * unit(got), problem.basis_y, problem.basis_x))
        return WeightedState(near, weight)

    return Method(init, step, design=lambda state: jnp.angle(state.near))
