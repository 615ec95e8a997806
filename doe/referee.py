"""A plane's light computed a second time, without Fourier transforms, at a few of its points."""

from functools import partial
from pathlib import Path
from typing import NamedTuple

import numpy as np
from jaxtyping import Complex, Float, Int

from doe import direct_sum, sampling
from doe.config import derived
from doe.config.schema import Config
from doe.errors import ConfigError, Fault
from doe.optics.beam import beam_field
from doe.result import PlaneLight

BRIGHT = 0.01  # of the peak: points are drawn from those at least as bright, the peak among them
STEP = 1e-6  # of the focal length, over which the lens's mapping is taken to be straight
MOST_WAVELETS = 4_000_000_000  # about four minutes


def worst_departure(
    config: Config, phase: Float[np.ndarray, "y x"], folder: Path, plane: PlaneLight, points: int
) -> float:
    """Largest difference of irradiance at `points` places, over the peak of the plane.

    On a screen by the first Rayleigh-Sommerfeld kind, behind a lens and over angles by the Fourier
    integral of each pixel, summed in float64. plane: before any divergence of the beam.
    Error: ConfigError for planes out of focus, which a lens alone makes, and for sums too long.
    """
    field, _ = beam_field(config, folder)
    near = field * np.exp(1j * phase)
    rows, columns = places(plane, points)
    y, x = plane.y[rows], plane.x[columns]
    make = {"screen": on_screen, "lens": behind_lens, "angles": in_directions}[plane.kind]
    exact = make(config, near, plane, np.stack([y, x], axis=1))
    return float(np.abs(exact - plane.irradiance[rows, columns]).max() / plane.irradiance.max())


class Seen(NamedTuple):
    """Irradiance [1/m^2] at one point by both Rayleigh-Sommerfeld kinds; their spread is the
    uncertainty of the scalar model there."""

    z_m: float
    y_m: float
    x_m: float
    first_kind: float
    second_kind: float


def at_points(
    config: Config,
    phase: Float[np.ndarray, "y x"],
    folder: Path,
    points: Float[np.ndarray, "p 3"],
) -> list[Seen]:
    """Light at any points (z, y, x) [m] behind the element, by direct summation.

    Error: ConfigError for points too near the element or too many.
    """
    field, _ = beam_field(config, folder)
    near = field * np.exp(1j * phase)
    light = [summed(config, near, points, kind) for kind in (1, 2)]
    return [Seen(*map(float, row)) for row in np.column_stack([points, *light])]


def summed(
    config: Config,
    near: Complex[np.ndarray, "y x"],
    points: Float[np.ndarray, "p 3"],
    kind: int,
) -> Float[np.ndarray, " p"]:
    """Irradiance [1/m^2] at points (z, y, x) [m] by one Rayleigh-Sommerfeld kind.

    Error: ConfigError for a sum that would take minutes.
    """
    pitch, wavelength = derived.pixel_pitch(config), config.beam.wavelength
    if direct_sum.terms(near, pitch, points, wavelength) > MOST_WAVELETS:
        raise ConfigError(
            Fault(
                "the direct sum at so many points would take minutes",
                f"up to {MOST_WAVELETS:.0e} wavelets",
                "ask for fewer points, or use fewer pixels",
                key="--referee or --at",
            )
        )
    field = direct_sum.rayleigh_sommerfeld(near, pitch, points, wavelength, kind=kind)
    return np.asarray(np.abs(field) ** 2)


def places(plane: PlaneLight, points: int) -> tuple[Int[np.ndarray, " p"], Int[np.ndarray, " p"]]:
    """Rows and columns of the peak and of bright points drawn at random."""
    light = plane.irradiance
    rows, columns = np.nonzero(light >= BRIGHT * light.max())
    drawn = np.random.default_rng(1).choice(len(rows), min(points, len(rows)), replace=False)
    peak = np.unravel_index(int(light.argmax()), light.shape)
    return np.append(rows[drawn], peak[0]), np.append(columns[drawn], peak[1])


def on_screen(
    config: Config,
    near: Complex[np.ndarray, "y x"],
    plane: PlaneLight,
    points: Float[np.ndarray, "p 2"],
) -> Float[np.ndarray, " p"]:
    """Irradiance on a screen by the direct sum of wavelets."""
    assert config.plane.distance is not None
    distance = np.full(len(points), config.plane.distance + plane.shift)
    return summed(config, near, np.column_stack([distance, points]), kind=1)


def in_directions(
    config: Config,
    near: Complex[np.ndarray, "y x"],
    plane: PlaneLight,
    points: Float[np.ndarray, "p 2"],
) -> Float[np.ndarray, " p"]:
    """Power per direction cosine squared at directions. Source: Fourier integral of each pixel."""
    wavelength, (pitch_y, pitch_x) = config.beam.wavelength, derived.pixel_pitch(config)
    k = 2 * np.pi / wavelength
    rows, columns = near.shape
    y = (np.arange(rows) - (rows - 1) / 2) * pitch_y
    x = (np.arange(columns) - (columns - 1) / 2) * pitch_x
    found = []
    for s_y, s_x in points:
        pixel = np.sinc(s_y * pitch_y / wavelength) * np.sinc(s_x * pitch_x / wavelength)
        waves = np.exp(-1j * k * s_y * y) @ near @ np.exp(-1j * k * s_x * x)
        found.append(abs(pitch_y * pitch_x * pixel * waves) ** 2 / wavelength**2)
    return np.array(found)


def behind_lens(
    config: Config,
    near: Complex[np.ndarray, "y x"],
    plane: PlaneLight,
    points: Float[np.ndarray, "p 2"],
) -> Float[np.ndarray, " p"]:
    """Irradiance in the focal plane: that of the directions, stretched by the lens."""
    lens = config.plane
    assert lens.focal_length is not None
    if plane.shift:
        raise ConfigError(
            Fault(
                "there is no direct sum for a lens out of focus",
                "the plane without shift",
                "leave out plane.shifts, or use a screen",
                key="--referee",
            )
        )
    step = lens.focal_length * STEP
    directions, stretch = [], []
    to_direction = partial(
        sampling.focal_direction, focal_length=lens.focal_length, mapping=lens.mapping
    )
    for place in points:
        ends = [(to_direction(p - step), to_direction(p + step)) for p in place]
        directions.append([sum(pair) / 2 for pair in ends])
        stretch.append(np.prod([(b - a) / (2 * step) for a, b in ends]))
    return in_directions(config, near, plane, np.array(directions)) * np.array(stretch)
