"""Starting phases, from the phases of the wanted orders."""

import jax
import jax.numpy as jnp
from jax import lax
from jaxtyping import Array, Complex, Float, PRNGKeyArray

from doe.optics.orders import amplitudes, mask_field
from doe.optics.phasor import phasor
from doe.problem import Problem

ROUNDS = 120  # rounds of the fixed point; the uniformity error falls to 1e-3 or less
GENTLE_ROUNDS = 60  # of these with the weaker exponent, which keeps the weights from swinging
GENTLE, FIRM = 0.3, 0.7


def random_orders(problem: Problem, key: PRNGKeyArray) -> Complex[Array, "order_y order_x"]:
    """Wanted amplitudes with random phases: what every start of a spot pattern begins with."""
    turn = jax.random.uniform(key, problem.share.shape, maxval=2 * jnp.pi)
    return jnp.sqrt(problem.share) * phasor(turn)


def superposition(problem: Problem, key: PRNGKeyArray) -> Float[Array, "y x"]:
    """Phase [rad] of the sum of the wanted waves with random phases. Source: common practice."""
    orders = random_orders(problem, key)
    return jnp.angle(mask_field(orders, problem.basis_y, problem.basis_x))


def order_phases(problem: Problem, key: PRNGKeyArray) -> Float[Array, "y x"]:
    """Phase [rad] of a sum of waves that feeds its own orders: the fixed point in their phases.

    Each round takes the phases of the orders as they come out and lifts the weak ones.
    Source: this project; the optimum for fixed order phases is the phase of their sum, Romero and
    Dickey, J. Opt. Soc. Am. A 24, 2280 (2007) (from memory).
    """
    is_wanted = problem.share > 0
    size = jnp.sqrt(problem.share)

    def one_round(
        orders: Complex[Array, "order_y order_x"], index: Array
    ) -> tuple[Complex[Array, "order_y order_x"], None]:
        sum_of_waves = mask_field(orders, problem.basis_y, problem.basis_x)
        got = amplitudes(unit(sum_of_waves), problem.basis_y, problem.basis_x)
        relative = jnp.where(is_wanted, jnp.abs(got) / jnp.where(is_wanted, size, 1.0), 1.0)
        mean = jnp.where(is_wanted, relative, 0.0).sum() / is_wanted.sum()
        lift = (relative / mean) ** -jnp.where(index < GENTLE_ROUNDS, GENTLE, FIRM)
        return jnp.where(is_wanted, jnp.abs(orders) * lift * unit(got), 0.0), None

    orders, _ = lax.scan(one_round, random_orders(problem, key), jnp.arange(ROUNDS))
    return jnp.angle(mask_field(orders, problem.basis_y, problem.basis_x))


def unit(field: Complex[Array, "y x"]) -> Complex[Array, "y x"]:
    """A field divided by its modulus, 0 where it is 0."""
    power = field.real**2 + field.imag**2
    return field * lax.rsqrt(jnp.where(power > 0, power, 1.0))
