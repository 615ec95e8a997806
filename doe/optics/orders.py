"""Diffraction orders of a unit cell of square pixels, scalar thin element in the far field."""

import jax.numpy as jnp
import numpy as np
from jax import lax
from jaxtyping import Array, Complex, Float, Int

from doe.optics.fft import fft2


def basis(orders: Int[np.ndarray, " order"], pixels: int) -> Complex[np.ndarray, "order pixel"]:
    """Weights with which the pixels of a period add up to order amplitudes, along one axis.

    Row m holds sinc(m/n) exp(-2 pi i m (j + 1/2) / n) / n: pixel j covers [j, j+1] pitches, so the
    sinc envelope of the pixel is in the weights. Source: Fourier series of a step function.
    """
    centre = (np.arange(pixels) + 0.5) / pixels
    waves = np.exp(-2j * np.pi * orders[:, None] * centre)
    weights: Complex[np.ndarray, "order pixel"] = np.sinc(orders / pixels)[:, None] * waves / pixels
    return weights


def amplitudes(
    near: Complex[Array, "y x"],
    basis_y: Complex[Array, "order_y y"],
    basis_x: Complex[Array, "order_x x"],
) -> Complex[Array, "order_y order_x"]:
    """Amplitudes of the orders whose basis is given; |amplitude|^2 is a share of the power.

    near: field behind the mask, of mean square 1. Error: round-off. Source: definition.
    """
    return product(product(basis_y, near), basis_x.T)


def mask_field(
    orders: Complex[Array, "order_y order_x"],
    basis_y: Complex[Array, "order_y y"],
    basis_x: Complex[Array, "order_x x"],
) -> Complex[Array, "y x"]:
    """The adjoint of `amplitudes`: the field at the mask that these orders come from."""
    return product(product(basis_y.conj().T, orders), basis_x.conj())


def product(a: Complex[Array, "i j"], b: Complex[Array, "j k"]) -> Complex[Array, "i k"]:
    """Matrix product by four real ones, whose bits do not hang on the number of threads."""
    real = a.real @ b.real - a.imag @ b.imag
    imag = a.real @ b.imag + a.imag @ b.real
    return lax.complex(real, imag)


def order_table(near: Complex[Array, "y x"]) -> Float[Array, "y x"]:
    """Power of every addressed order, the zero order at [ny // 2, nx // 2].

    What is missing to the mean of |near|^2 went into replicas beyond the addressed orders.
    Error: round-off. Source: as `basis`, by fast Fourier transform.
    """
    rows, columns = near.shape
    far = jnp.fft.fftshift(fft2(near)) / (rows * columns)
    envelope_y = jnp.sinc(order_numbers(rows) / rows) ** 2
    envelope_x = jnp.sinc(order_numbers(columns) / columns) ** 2
    return (far.real**2 + far.imag**2) * envelope_y[:, None] * envelope_x[None, :]


def order_numbers(pixels: int) -> Int[np.ndarray, " order"]:
    """Orders addressed by a period of n pixels, in the sequence of `order_table`."""
    return np.arange(pixels) - pixels // 2
