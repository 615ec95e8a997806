"""Phase to complex field: the one place that takes sines and cosines of a phase."""

import jax
import jax.numpy as jnp
from jax import lax
from jaxtyping import Array, Complex, Float

# pi/2 as a sum whose first two parts have so few bits that their multiples are exact in float32.
# Source: Cody and Waite, Software Manual for the Elementary Functions (1980) (from memory).
HALF_PI = (1.5703125, 4.837512969970703125e-4, 7.54978995489188216e-8)


@jax.custom_jvp
def phasor(phase: Float[Array, "*shape"]) -> Complex[Array, "*shape"]:
    """exp(i phase) of a phase [rad].

    Error: 4e-7 in float32 for |phase| < 1000 rad; exact to round-off in float64.
    Source: reduction to an eighth of a turn, then the Taylor polynomials of sine (degree 7) and
    cosine (degree 8), which fuse with their neighbours where XLA's own trigonometry does not.
    """
    if phase.dtype == jnp.float64:
        return lax.complex(jnp.cos(phase), jnp.sin(phase))
    turn = jnp.round(phase * (2 / jnp.pi))
    x = ((phase - turn * HALF_PI[0]) - turn * HALF_PI[1]) - turn * HALF_PI[2]
    square = x * x
    sine = x * (1 + square * (-1 / 6 + square * (1 / 120 - square / 5040)))
    cosine = 1 + square * (-1 / 2 + square * (1 / 24 + square * (-1 / 720 + square / 40320)))
    quadrant = turn.astype(jnp.int32) & 3
    swapped = (quadrant & 1) == 1
    real = jnp.where(swapped, sine, cosine)
    imag = jnp.where(swapped, cosine, sine)
    real = jnp.where((quadrant == 1) | (quadrant == 2), -real, real)
    imag = jnp.where(quadrant >= 2, -imag, imag)
    return lax.complex(real, imag)


@phasor.defjvp
def phasor_jvp(
    primals: tuple[Float[Array, "*shape"]], tangents: tuple[Float[Array, "*shape"]]
) -> tuple[Complex[Array, "*shape"], Complex[Array, "*shape"]]:
    """d exp(i phase) = i exp(i phase) d phase: the field itself serves as its slope."""
    field = phasor(primals[0])
    slope = tangents[0]
    return field, lax.complex(-field.imag * slope, field.real * slope)
