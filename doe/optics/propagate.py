"""The field at a finite distance: angular spectrum in the same window, Fresnel in a free one."""

import cmath
import math
from typing import Any, NamedTuple

import jax.numpy as jnp
import numpy as np
from jaxtyping import Array, Complex, Float
from scipy.special import fresnel

from doe.optics.choice import (
    TOLERANCE,
    addressed_direction,
    angular_spectrum_range,
    fresnel_error,
    require,
)
from doe.optics.far_field import two_sided
from doe.optics.fft import fft2, ifft2
from doe.optics.phasor import phasor

TINY = 1e-6  # stands for 0 where there is a division, far below anything that is resolved


class Hop(NamedTuple):
    """A way between two planes [m], with the pixels (y, x) of the element and its padding."""

    pitch: float
    wavelength: float
    distance: float
    shape: tuple[int, int]
    pad: int


def angular_spectrum(
    near: Complex[Array, "y x"],
    pitch: float,
    wavelength: float,
    distance: float,
    *,
    pad: int = 2,
    direction: float | None = None,
) -> Complex[Array, "y x"]:
    """The field at a distance behind the element, at the centres of the same pixels.

    near: [V], constant on each square pixel; pitch, wavelength, distance [m]. pad: the field is
    padded with dark pixels to this many times its size, 2 or more against wrap-around; 1 means
    a unit cell that repeats for ever, whose orders are exact at any distance. direction: largest
    direction cosine of the signal along an axis, where the field is known to be smoother than its
    pixels. The output is the field within the addressed band, so at distance 0 it is `near`
    smoothed; cut the pixels into finer ones where light of their own edges meets the window.
    A distance at which the band limit would cut into the signal is refused (ConfigError). Call it
    under jit: 2.4 padded fields of memory then, against 9 operation by operation.
    Error: round-off, 1e-6 (complex64) plus 6e-8 k z s^4 / 8 for a direction cosine s; light within
    6 degrees of grazing may be lost, and light of replicas is not in it, which lands in the window
    at distances below 2 n pitch^2 / wavelength and is not small there.
    Source: Matsushima and Shimobaba, Opt. Express 17, 19662 (2009) (from memory).
    """
    rows, columns = near.shape
    check_angular_spectrum((rows, columns), pitch, wavelength, distance, pad, direction)
    padded = jnp.pad(near, [(0, (pad - 1) * rows), (0, (pad - 1) * columns)])
    hop = Hop(pitch, wavelength, distance, (rows, columns), pad)
    zone = wavelength / pitch
    s_y, s_x = (np.fft.fftfreq(pad * pixels) * zone for pixels in near.shape)
    transfer = plane_waves(s_y, s_x, hop, near.dtype)
    # Dark pixels at one end only: rays to the other side come round the far end.
    return ifft2(fft2(padded) * transfer)[:rows, :columns]


def check_angular_spectrum(
    shape: tuple[int, int],
    pitch: float,
    wavelength: float,
    distance: float,
    pad: int,
    direction: float | None,
) -> None:
    """Refuses (ConfigError) a distance [m] or padding at which the result would be false.

    Error: as `angular_spectrum_range`. Source: that range.
    """
    require(pad >= 1, f"a padding of {pad}", "1 for a unit cell, 2 or more for an element", "pad 2")
    require(
        distance >= 0,
        f"a distance of {distance:g} m, against which evanescent waves grow without bound",
        "a distance of 0 or more",
        "propagate backwards with jax.vjp of the forward step",
    )
    longest = angular_spectrum_range(shape, pitch, wavelength, pad=pad, direction=direction).longest
    require(
        distance <= longest,
        f"at {distance:g} m the band limit of the angular spectrum cuts into the signal",
        f"at most {longest:.4g} m with this pitch, element and padding",
        f"pad {math.ceil(pad * distance / longest)}, `fresnel_scaled`, or a `direction` "
        f"below {addressed_direction(pitch, wavelength):.3g} if the field is that smooth",
    )


def plane_waves(
    s_y: Float[np.ndarray, " y"], s_x: Float[np.ndarray, " x"], hop: Hop, dtype: np.dtype[Any]
) -> Complex[Array, "y x"]:
    """exp(i k z s_z) of the plane waves of these direction cosines, with the pixel's sinc.

    Evanescent waves decay as exp(-k z sqrt(s^2 - 1)), the others are faded by `kept`.
    Error: 4e-7 plus 6e-8 k z s^4 / 8 in complex64. Source: as `angular_spectrum`.
    """
    wave = hop.distance / hop.wavelength  # turns
    real = np.finfo(dtype).dtype
    y, x = jnp.asarray(s_y, real)[:, None], jnp.asarray(s_x, real)[None, :]
    # The large quadratic part of the phase is a product of two vectors made in float64, so that
    # float32 has only the small rest to carry: s_z - 1 + s^2 / 2 = -s^4 / (2 (1 + s_z)^2).
    piston = cmath.exp(2j * math.pi * math.fmod(wave, 1.0))
    chirp_y = jnp.asarray(piston * np.exp(-1j * np.pi * wave * s_y**2), dtype)[:, None]
    chirp_x = jnp.asarray(np.exp(-1j * np.pi * wave * s_x**2), dtype)[None, :]
    square = y**2 + x**2
    s_z = jnp.sqrt(jnp.maximum(1 - square, 0.0))
    rest = phasor(-math.pi * wave * (square / (1 + s_z)) ** 2)
    decay = jnp.exp(-2 * math.pi * wave * jnp.sqrt(jnp.maximum(square - 1, 0.0)))
    share = kept(abs(y) / jnp.maximum(s_z, TINY), hop.shape[0], hop)
    share *= kept(abs(x) / jnp.maximum(s_z, TINY), hop.shape[1], hop)
    waves = jnp.where(square < 1, chirp_y * chirp_x * rest * share, decay)
    envelope_y = jnp.asarray(np.sinc(s_y * hop.pitch / hop.wavelength), real)[:, None]
    envelope_x = jnp.asarray(np.sinc(s_x * hop.pitch / hop.wavelength), real)[None, :]
    return waves * (envelope_y * envelope_x)


def kept(slope: Float[Array, "y x"], pixels: int, hop: Hop) -> Float[Array, "y x"]:
    """Share of a wave that the band limit keeps, by how far sideways its ray goes along an axis.

    slope: s / s_z. All up to half the padded width, beyond which the phase steps by more than pi
    from bin to bin; none from where a ray would come back into the window from the other side;
    smooth between, as a hard limit rings. The two are one for pad = 2. Error: exact.
    Source: Matsushima and Shimobaba (2009), as above; the fading is ours.
    """
    if hop.pad == 1:
        return jnp.ones_like(slope)
    width = pixels * hop.pitch
    whole, none = hop.pad * width / 2, (hop.pad - 1) * width
    fade = jnp.clip((none - hop.distance * slope) / max(none - whole, TINY * width), 0.0, 1.0)
    return fade**2 * (3 - 2 * fade)


def fresnel_scaled(
    near: Complex[Array, "y x"],
    pitch: float,
    wavelength: float,
    distance: float,
    points_y: Float[np.ndarray, " point_y"],
    points_x: Float[np.ndarray, " point_x"],
) -> Complex[Array, "point_y point_x"]:
    """The paraxial field at any points of a plane at a distance behind the element.

    near: [V], constant on each square pixel; pitch, wavelength, distance, points [m] from the
    axis, of any spacing and range, replicas included. Refused (ConfigError) where the paraxial
    phase error k r^4 / (8 z^3) of the steepest ray exceeds pi / 8; r / z counts no further than
    the addressed field. The integral over each pixel is exact, so there is no aliasing at any
    distance: a phase of more than pi from pixel to pixel is light of a replica, rightly so.
    Error: that phase (printed by `fresnel_error`) and round-off, 1e-6 in complex64.
    Source: Goodman, Introduction to Fourier Optics, ch. 4 (from memory).
    """
    rows, columns = near.shape
    require(distance > 0, f"a distance of {distance:g} m", "a distance above 0", "turn it round")
    check_fresnel((rows, columns), pitch, wavelength, distance, points_y, points_x)
    piston = cmath.exp(2j * math.pi * math.fmod(distance / wavelength, 1.0))
    basis_y = piston * fresnel_basis(points_y, rows, pitch, wavelength, distance)
    basis_x = fresnel_basis(points_x, columns, pitch, wavelength, distance)
    return two_sided(near, basis_y, basis_x)


def fresnel_basis(
    points: Float[np.ndarray, " point"],
    pixels: int,
    pitch: float,
    wavelength: float,
    distance: float,
) -> Complex[np.ndarray, "point pixel"]:
    """Weights with which the pixels of one axis add up to the paraxial field at points [m].

    (i wavelength z)^(-1/2) times the integral of exp(i k (x - x')^2 / (2 z)) over pixel x', as a
    difference of Fresnel integrals C + i S at the pixel's edges; without the piston exp(i k z).
    Error: round-off of float64, over the pixel's share of a Fresnel zone. Source: definition.
    """
    scale = math.sqrt(2 / (wavelength * distance))
    edges = (np.arange(pixels + 1) - pixels / 2) * pitch
    sine, cosine = fresnel((edges - points[:, None]) * scale)
    weights: Complex[np.ndarray, "point pixel"] = np.diff(cosine + 1j * sine, axis=1)
    return weights * cmath.exp(-0.25j * math.pi) / math.sqrt(2)


def check_fresnel(
    shape: tuple[int, int],
    pitch: float,
    wavelength: float,
    distance: float,
    points_y: Float[np.ndarray, " point_y"],
    points_x: Float[np.ndarray, " point_x"],
) -> None:
    """Refuses (ConfigError) points [m] too steep for the paraxial approximation.

    Error: as `fresnel_error`. Source: that bound.
    """
    farthest = [
        pixels * pitch / 2 + float(np.abs(points).max())
        for pixels, points in zip(shape, (points_y, points_x), strict=True)
    ]
    error = fresnel_error(math.hypot(*farthest), pitch, wavelength, distance)
    require(
        error <= TOLERANCE,
        f"the Fresnel approximation is off by up to {error:.3g} rad at {distance:g} m",
        f"a phase error of at most {TOLERANCE:.3g} rad",
        "`angular_spectrum`, a window nearer to the axis, or a longer distance",
    )
