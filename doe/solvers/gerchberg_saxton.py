"""The Gerchberg-Saxton loop on the orders of a unit cell."""

import jax.numpy as jnp
from jaxtyping import Array, Complex, Float

from doe.config.solver import GerchbergSaxton
from doe.optics.orders import amplitudes, mask_field
from doe.optics.phasor import phasor
from doe.problem import Problem
from doe.solvers.method import Method, Tick
from doe.solvers.start import unit


def gerchberg_saxton(options: GerchbergSaxton) -> Method:
    """Wanted moduli in the far field, unit modulus at the mask, by turns.

    Source: Gerchberg and Saxton, Optik 35, 237 (1972) (from memory).
    """

    def init(problem: Problem, start: Float[Array, "y x"]) -> Complex[Array, "y x"]:
        return phasor(start)

    def step(problem: Problem, near: Complex[Array, "y x"], tick: Tick) -> Complex[Array, "y x"]:
        got = amplitudes(near, problem.basis_y, problem.basis_x)
        orders = jnp.sqrt(problem.share) * unit(got)
        return unit(mask_field(orders, problem.basis_y, problem.basis_x))

    return Method(init, step, design=jnp.angle)
