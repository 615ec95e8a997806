"""Far field of an element of square pixels: any directions, or the whole addressed field."""

import jax.numpy as jnp
import numpy as np
from jax import lax
from jaxtyping import Array, Complex, Float, Int

from doe.optics.fft import fft2
from doe.optics.orders import product


def centres(pixels: int, pitch: float) -> Float[np.ndarray, " pixel"]:
    """Pixel centres [m] from the axis, which is at the middle of the array: (j + 1/2 - n/2) pitch.

    Error: exact to round-off. Source: definition.
    """
    return (np.arange(pixels) + 0.5 - pixels / 2) * pitch


def direction_basis(
    directions: Float[np.ndarray, " direction"], pixels: int, pitch: float, wavelength: float
) -> Complex[np.ndarray, "direction pixel"]:
    """Weights [m] with which the pixels of one axis add up to the far field.

    directions: direction cosines, of any spacing; pitch, wavelength [m]. Row s holds
    pitch sinc(s pitch / wavelength) exp(-2 pi i s x_j / wavelength), the integral over pixel j.
    Error: round-off of float64. Source: Fourier integral of a step function.
    """
    # On the host in float64: in float32 a phase of a thousand turns would lose 4 digits.
    waves = np.exp(-2j * np.pi / wavelength * directions[:, None] * centres(pixels, pitch))
    envelope = pitch * np.sinc(directions * pitch / wavelength)
    weights: Complex[np.ndarray, "direction pixel"] = envelope[:, None] * waves
    return weights


def far_field(
    near: Complex[Array, "y x"],
    pitch: float,
    wavelength: float,
    directions_y: Float[np.ndarray, " direction_y"],
    directions_x: Float[np.ndarray, " direction_x"],
) -> Complex[Array, "direction_y direction_x"]:
    """T(s_y, s_x): the integral of the field times exp(-i k s.x) over the element's square pixels.

    near: [V] so that |V|^2 is an irradiance [W/m^2]; pitch, wavelength [m]; directions: direction
    cosines, of any spacing and range, replicas included. Returns T [V m^2]: |T|^2 / wavelength^2
    [W] is the power per direction cosine squared, s_z^4 |T|^2 / (wavelength z)^2 the irradiance on
    a screen at z. Directions with s_y^2 + s_x^2 >= 1 are evaluated too, but carry no light.
    Error: round-off, 1e-6 of the largest |T| in complex64; scalar thin element.
    Source: Goodman, Introduction to Fourier Optics, ch. 4 (from memory).
    """
    rows, columns = near.shape
    basis_y = direction_basis(directions_y, rows, pitch, wavelength)
    basis_x = direction_basis(directions_x, columns, pitch, wavelength)
    return two_sided(near, basis_y, basis_x)


def two_sided(
    near: Complex[Array, "y x"],
    basis_y: Complex[np.ndarray, "out_y y"],
    basis_x: Complex[np.ndarray, "out_x x"],
) -> Complex[Array, "out_y out_x"]:
    """basis_y near basis_x^T in the precision of `near`, the cheaper product first.

    Unit: the product of the three. Error: round-off, 1e-6 in complex64. Source: definition.
    """
    left = jnp.asarray(basis_y, near.dtype)
    right = jnp.asarray(basis_x, near.dtype).T
    out_y, rows = basis_y.shape
    out_x, columns = basis_x.shape
    if out_y * columns * (rows + out_x) <= out_x * rows * (columns + out_y):
        return product(product(left, near), right)
    return product(left, product(near, right))


def grid_directions(
    pixels: int, pitch: float, wavelength: float, oversampling: int = 2
) -> Float[np.ndarray, " direction"]:
    """Direction cosines of one axis of `far_field_grid`, 0 at [n // 2], n = oversampling pixels.

    pitch, wavelength [m]; the spacing is wavelength / (n pitch), the range +-wavelength/(2 pitch).
    Error: exact to round-off. Source: Nyquist's sampling theorem with the grating equation.
    """
    count = oversampling * pixels
    return (np.arange(count) - count // 2) * (wavelength / (count * pitch))


def far_field_grid(
    near: Complex[Array, "y x"], pitch: float, oversampling: int = 2
) -> Complex[Array, "direction_y direction_x"]:
    """T of `far_field` in the whole addressed field, on the directions of `grid_directions`.

    near, pitch: as `far_field`; oversampling: how much finer than the bins of the element's own
    transform, per axis. The zero order is at [n // 2] of each axis. T does not depend on the
    wavelength, only its directions do. The sum of |T|^2 / wavelength^2 over the grid, times the
    cell of the grid (see `addressed_power`), is the power within the addressed field; what is
    missing to pitch^2 sum |near|^2 went into replicas beyond it.
    Error: round-off, 1e-6 of the root mean square in complex64.
    Source: Fourier integral of a step function, zero padding as interleaved shorter transforms.
    """
    rows, columns = near.shape
    before_y, after_y = interleaved(rows, pitch, oversampling)
    before_x, after_x = interleaved(columns, pitch, oversampling)
    ramps = [jnp.asarray(v, near.dtype) for v in (before_y, after_y, before_x, after_x)]

    # Row and column of the sub-grid together make one index, so that only one transform of the
    # element's own size is in flight, whatever the oversampling.
    def sub_grid(index: Int[Array, ""]) -> Complex[Array, "y x"]:
        row, column = index // oversampling, index % oversampling
        field = near * ramps[0][row][:, None] * ramps[2][column][None, :]
        return fft2(field) * ramps[1][row][:, None] * ramps[3][column][None, :]

    parts = lax.map(sub_grid, jnp.arange(oversampling**2))
    parts = parts.reshape(oversampling, oversampling, rows, columns)
    whole: Complex[Array, "direction_y direction_x"] = parts.transpose(2, 0, 3, 1).reshape(
        oversampling * rows, oversampling * columns
    )
    return whole


def interleaved(
    pixels: int, pitch: float, oversampling: int
) -> tuple[Complex[np.ndarray, "part pixel"], Complex[np.ndarray, "part pixel"]]:
    """Factors before and after the transforms of n pixels whose bins interleave to a finer grid.

    Part r holds the directions oversampling a + r, a = 0 .. n - 1, of `grid_directions`. The
    factor before shifts its spectrum to start there, the one after [m] moves the axis to the
    middle of the array and brings the pixel's sinc. Error: exact to round-off. Source: definition.
    """
    count = oversampling * pixels
    start = (np.arange(oversampling) - count // 2) / count  # cycles per pixel
    bins = np.arange(pixels) / pixels
    before = np.exp(-2j * np.pi * start[:, None] * centres(pixels, 1.0))
    centring = np.exp(-2j * np.pi * bins * centres(pixels, 1.0)[0])
    after = pitch * np.sinc(start[:, None] + bins) * centring
    return before, after


def addressed_power(
    far: Complex[Array, "direction_y direction_x"], pitch: float
) -> Float[Array, ""]:
    """Power [W] in the field of `far_field_grid`: sum |T|^2 / (n_y n_x pitch^2).

    The replicas hold pitch^2 sum |near|^2 minus this. Every direction of the grid is counted,
    also those beyond the unit circle, which exist where pitch < wavelength / sqrt(2).
    Error: round-off as a sum over bins; the light between them needs oversampling 2.
    Source: Parseval's theorem.
    """
    return (far.real**2 + far.imag**2).sum() / (far.size * pitch**2)


def defocus_phase(
    y: Float[Array, " y"],
    x: Float[Array, " x"],
    focal_length: float,
    shift: float,
    wavelength: float,
) -> Float[Array, "y x"]:
    """Phase [rad] to add to the near field so that its far field is that of a plane out of focus.

    y, x: pixel centres from the axis [m]; focal_length, shift, wavelength [m]. shift > 0 lies
    beyond the focal plane. Phase 0 on the axis: the piston k shift is left out. Element in the
    front focal plane, or any place if only |far|^2 near the axis matters. It is
    k shift (sqrt(1 - r^2 / f^2) - 1), so -k r^2 shift / (2 f^2) for small angles.
    Error: exact for a lens that obeys the sine condition; k shift r^4 / (8 f^4) for others. Beyond
    r = f, where no ray of the lens is, the phase is held at -k shift.
    Source: each point of the pupil is a plane wave of direction r / f behind the lens (derived).
    """
    square = jnp.minimum((y[:, None] ** 2 + x[None, :] ** 2) / focal_length**2, 1.0)
    # sqrt(1 - s) - 1 in a form that keeps its digits for small s.
    return -2 * jnp.pi * shift / wavelength * square / (1 + jnp.sqrt(1 - square))
