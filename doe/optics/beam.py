"""The beam at the element: amplitude and wavefront on its pixels, and how far it blurs."""

import math
from pathlib import Path
from typing import Any

import numpy as np
from jaxtyping import Bool, Complex, Float
from numpy.typing import NDArray
from scipy import ndimage, special

from doe.config import derived
from doe.config.schema import Beam, Config
from doe.errors import Fault, FileError
from doe.optics.far_field import centres
from doe.store.mask import read_array

Plane = Float[np.ndarray, "_ _"]
SMALLEST = 4  # pixels along a side of a measured profile


def beam_field(config: Config, folder: Path) -> tuple[Complex[np.ndarray, "y x"], float]:
    """Field [1/m] on the pixels of a single element, dark outside the aperture, and what is cut.

    The power of the whole beam is 1: pitch^2 times the sum of |field|^2 is 1 less the share cut by
    aperture and element, which is the second value. folder: where a profile's file is looked for.
    Error: pixel-centre sampling of the aperture's edge. Source: definitions of the profiles.
    """
    pitch = derived.pixel_pitch(config)[1]
    rows, columns = config.element.pixels
    y, x = centres(rows, pitch)[:, None], centres(columns, pitch)[None, :]
    inside: Bool[np.ndarray, "y x"] = np.hypot(y, x) <= config.element.aperture / 2
    shift_y, shift_x = config.beam.decentre
    irradiance = profile(config.beam, y - shift_y, x - shift_x, folder) * inside
    field = np.sqrt(irradiance) * np.exp(1j * wavefront(config.beam, y, x))
    return field, max(0.0, 1 - float(irradiance.sum() * pitch**2))


def profile(beam: Beam, y: Plane, x: Plane, folder: Path) -> Plane:
    """Irradiance [1/m^2] of a beam of power 1 at points (y, x) [m] from its centre.

    Source: definitions; the norm of exp(-2 r^m) is (2 pi / m) Gamma(2 / m) 2^(-2 / m).
    """
    assert beam.diameter is not None  # filled in by config.load.resolve
    half_y, half_x = beam.diameter[0] / 2, beam.diameter[1] / 2
    radius = np.hypot(y / half_y, x / half_x)
    area = half_y * half_x
    if beam.profile == "gaussian":
        return np.asarray(2 / (math.pi * area) * np.exp(-2 * radius**2))
    if beam.profile == "super-gaussian":
        m = beam.order
        norm = 2 * math.pi / m * special.gamma(2 / m) * 2 ** (-2 / m) * area
        return np.asarray(np.exp(-2 * radius**m) / norm)
    if beam.profile == "plane":
        return np.asarray((radius <= 1) / (math.pi * area))
    return measured(beam, y, x, folder)


def measured(beam: Beam, y: Plane, x: Plane, folder: Path) -> Plane:
    """Irradiance [1/m^2] of a measured profile at points, linear between its pixels, 0 outside."""
    assert beam.file is not None
    assert beam.file_pixel is not None
    image = np.maximum(checked(read_array(folder / beam.file), folder / beam.file), 0.0)
    image /= image.sum() * beam.file_pixel**2
    rows, columns = image.shape
    place_y = y / beam.file_pixel + (rows - 1) / 2
    place_x = x / beam.file_pixel + (columns - 1) / 2
    places = np.broadcast_arrays(place_y, place_x)
    return np.asarray(ndimage.map_coordinates(image, places, order=1, cval=0.0))


def checked(image: NDArray[Any], path: Path) -> Plane:
    """A measured profile as floats. Error: FileError where it is no picture with light in it."""
    is_picture = image.ndim == 2 and min(image.shape) >= SMALLEST and image.dtype.kind in "uif"
    if not is_picture or not np.all(np.isfinite(image)) or not image.max() > 0:
        raise FileError(
            Fault(
                "this is no beam profile",
                f"finite irradiances, at least {SMALLEST} x {SMALLEST}, some of them above 0",
                "give the camera's picture with its background taken off",
                file=str(path),
            )
        )
    return image.astype(float)


def wavefront(beam: Beam, y: Plane, x: Plane) -> Plane:
    """Phase [rad] of tilt and curvature at points (y, x) [m] from the axis.

    Source: plane wave k s.r; sphere in the parabolic form k r^2 / (2 R) about the beam's centre.
    """
    k = 2 * math.pi / beam.wavelength
    phase = k * (math.sin(beam.tilt[0]) * y + math.sin(beam.tilt[1]) * x)
    if beam.curvature is not None:
        square = (y - beam.decentre[0]) ** 2 + (x - beam.decentre[1]) ** 2
        phase = phase + k * square / (2 * beam.curvature)
    return np.asarray(phase)


def divergences(beam: Beam) -> tuple[float, float]:
    """Full 1/e^2 angles (y, x) [rad] by which an imperfect beam blurs the far field.

    That of M^2 is (4 lambda / (pi D)) sqrt(M^4 - 1), M^4 the square of `m2`, the near-field
    diameter kept; a residual
    divergence without emitters adds in squares. Source: ISO 11146 propagation law (from memory).
    """
    assert beam.diameter is not None
    excess = math.sqrt(beam.m2**2 - 1)
    residual = 0.0 if beam.divergence is None or beam.emitters is not None else beam.divergence
    y, x = (
        math.hypot(4 * beam.wavelength / (math.pi * diameter) * excess, residual)
        for diameter in beam.diameter
    )
    return y, x


def blurred(irradiance: Plane, beam: Beam, steps: tuple[float, float], scale: float) -> Plane:
    """A plane's irradiance summed incoherently over the angles of the beam.

    steps: sample spacing (y, x); scale: spacing units per radian (focal length, distance or 1).
    The plane is taken to be dark outside its window. Source: convolution in direction cosines.
    """
    sigma = [angle * scale / 4 / step for angle, step in zip(divergences(beam), steps, strict=True)]
    found = (
        ndimage.gaussian_filter(irradiance, sigma, mode="constant") if any(sigma) else irradiance
    )
    if beam.emitters is None or beam.divergence is None:
        return found
    total = np.zeros_like(found)
    places = [
        ((np.arange(n) + 0.5) / n - 0.5) * beam.divergence * scale / step
        for n, step in zip(beam.emitters, steps, strict=True)
    ]
    for shift_y in places[0]:
        for shift_x in places[1]:
            total += ndimage.shift(found, (shift_y, shift_x), order=1, mode="constant")
    return np.asarray(total / (len(places[0]) * len(places[1])))
