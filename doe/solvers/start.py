"""Starts of a spot pattern: amplitudes of its wanted orders, whose sum makes the first phase."""

import jax
import jax.numpy as jnp
import numpy as np
from jax import lax
from jaxtyping import Array, Complex, Float, PRNGKeyArray

from doe.optics.orders import mask_field
from doe.optics.phasor import phasor
from doe.problem import Problem
from doe.solvers.basins import settled_orders

Starts = Complex[Array, "start order_y order_x"]


def random_orders(problem: Problem, key: PRNGKeyArray, count: int) -> Starts:
    """Wanted amplitudes with random phases. Source: common practice for spot patterns."""
    turn = jax.random.uniform(key, (count, *problem.share.shape), maxval=2 * jnp.pi)
    return jnp.sqrt(problem.share)[None] * phasor(turn)


def settled_starts(problem: Problem, seed: int, count: int, hops: int) -> Starts:
    """Amplitudes at fixed points of the order phases, the best found by basin hopping first."""
    orders = settled_orders(
        np.asarray(problem.basis_y, complex),
        np.asarray(problem.basis_x, complex),
        np.asarray(problem.share, float),
        seed=seed,
        count=count,
        hops=hops,
    )
    return jnp.asarray(orders, jnp.complex64)


def first_phase(problem: Problem, orders: Complex[Array, "order_y order_x"]) -> Float[Array, "y x"]:
    """Phase [rad] of the sum of the waves of a start."""
    return jnp.angle(mask_field(orders, problem.basis_y, problem.basis_x))


def unit(field: Complex[Array, "y x"]) -> Complex[Array, "y x"]:
    """A field divided by its modulus, 0 where it is 0."""
    power = field.real**2 + field.imag**2
    return field * lax.rsqrt(jnp.where(power > 0, power, 1.0))
