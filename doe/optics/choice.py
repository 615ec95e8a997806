"""Which propagator serves a window at a distance, and from where to where, in plain floats."""

import math
from dataclasses import dataclass
from typing import Literal, NamedTuple

from doe.errors import ConfigError, Fault

Propagator = Literal["angular-spectrum", "fresnel", "far-field"]

# Largest phase error [rad] of an approximation at its edge: a sixteenth of a wave, the trade's
# 2 D^2 / wavelength far-field distance. Source: Rayleigh distance of antennas (from memory).
TOLERANCE = math.pi / 8

# Least s_z the band limit must keep: rays nearer to grazing are 1 % of all directions.
GRAZING = 0.1

# Most pixels on a side of a padded transform: 2 GB for one complex64 field.
LARGEST_GRID = 16384


class Range(NamedTuple):
    """Distances [m] between which a propagator serves."""

    shortest: float
    longest: float

    def holds(self, distance: float) -> bool:
        """Whether the distance [m] is inside, ends included. Error: exact. Source: definition."""
        return self.shortest <= distance <= self.longest


@dataclass(frozen=True)
class Choice:
    """A propagator, its range of distances [m], and how to call it."""

    propagator: Propagator
    shortest: float
    longest: float
    why: str
    fresnel_number: float
    grid: tuple[int, int]  # pixels (y, x) to which the near field is first padded with dark ones
    pad: int  # of the angular spectrum, otherwise 1


def fresnel_number(
    shape: tuple[int, int], pitch: float, wavelength: float, distance: float
) -> float:
    """a^2 / (wavelength distance) with a [m] half the longer side of the element.

    Error: exact. Source: definition.
    """
    return (max(shape) * pitch / 2) ** 2 / (wavelength * distance)


def addressed_direction(pitch: float, wavelength: float) -> float:
    """Largest direction cosine a pixel pitch addresses along an axis, at most 1.

    Error: exact. Source: Nyquist's sampling theorem with the grating equation.
    """
    return min(1.0, wavelength / (2 * pitch))


def angular_spectrum_range(
    shape: tuple[int, int],
    pitch: float,
    wavelength: float,
    *,
    pad: int = 2,
    direction: float | None = None,
) -> Range:
    """Distances [m] at which the band limit of `angular_spectrum` leaves the whole signal.

    direction: largest direction cosine of the signal along each axis (default: all that the
    pitch addresses). A ray to the corner of these directions must not travel sideways by more
    than half the padded width. 0 is allowed. pad = 1 is a unit cell, without a limit.
    Error: exact, but for rays with s_z < 0.1, which are given up.
    Source: Matsushima and Shimobaba, Opt. Express 17, 19662 (2009), from the slope of the phase.
    """
    if pad == 1:
        return Range(0.0, math.inf)
    s = addressed_direction(pitch, wavelength) if direction is None else direction
    s_z = math.sqrt(max(1 - 2 * s**2, GRAZING**2))
    return Range(0.0, pad * min(shape) * pitch / 2 * s_z / s if s else math.inf)


def far_field_range(shape: tuple[int, int], pitch: float, wavelength: float) -> Range:
    """Distances [m] from which the far field serves: 2 D^2 / wavelength, D the diagonal.

    Error: the phase left out is at most pi / 8 at the corners. Source: as TOLERANCE.
    """
    diagonal = math.hypot(*shape) * pitch
    return Range(math.pi * diagonal**2 / (4 * wavelength * TOLERANCE), math.inf)


def fresnel_error(reach: float, pitch: float, wavelength: float, distance: float) -> float:
    """Bound [rad] of the phase that the Fresnel approximation leaves out: k z s^4 / 8.

    reach: farthest a ray goes sideways [m]. s = reach / z, which makes it k reach^4 / (8 z^3),
    but no more than the corner of the addressed field, since beyond there is only replica light.
    Error: next term k z s^6 / 16. Source: Goodman, Introduction to Fourier Optics, ch. 4 (memory).
    """
    steepest = min(reach / distance, math.sqrt(2) * addressed_direction(pitch, wavelength))
    return math.pi / 4 * distance / wavelength * steepest**4


def fresnel_range(reach: float, pitch: float, wavelength: float, distance: float) -> Range:
    """Distances [m] around this one where `fresnel_error` is at most pi / 8; may exclude it.

    Short distances serve while the addressed angles are small for so short a way, long ones as
    the rays of the window get flat; between the two there can be a gap.
    Error: as `fresnel_error`. Source: that bound, solved for z.
    """
    wave = 8 * TOLERANCE * wavelength / (2 * math.pi)
    steepest = math.sqrt(2) * addressed_direction(pitch, wavelength)
    near_end = wave / steepest**4
    far_start = (reach**4 / wave) ** (1 / 3)
    if far_start <= near_end:
        return Range(0.0, math.inf)
    return Range(0.0, near_end) if distance <= near_end else Range(far_start, math.inf)


def choose(
    shape: tuple[int, int],
    pitch: float,
    wavelength: float,
    distance: float,
    window: tuple[float, float],
) -> Choice:
    """The propagator for a window (height, width) [m] centred on the axis, and why.

    shape: pixels (y, x) of the element; pitch, wavelength, distance [m]. In this order: the far
    field, if it has begun; the angular spectrum, not paraxial, if the window is no larger than the
    element; Fresnel; the angular spectrum on a larger grid, refused (ConfigError) if too large.
    Error: as the ranges above. Source: definition.
    """
    require(distance > 0, f"a distance of {distance:g} m", "a distance above 0", "turn it round")
    number = fresnel_number(shape, pitch, wavelength, distance)
    far = far_field_range(shape, pitch, wavelength)
    if far.holds(distance):
        why = f"the wave front sags by less than a 16th of a wave beyond {far.shortest:.3g} m"
        return Choice("far-field", *far, why, number, shape, 1)
    grid = holding_grid(shape, window, pitch)
    spectrum = angular_spectrum_range(grid, pitch, wavelength)
    if grid == shape and spectrum.holds(distance):
        why = f"no approximation, and all rays are kept up to {spectrum.longest:.3g} m"
        return Choice("angular-spectrum", *spectrum, why, number, grid, 2)
    reach = math.hypot(*(n * pitch / 2 + w / 2 for n, w in zip(shape, window, strict=True)))
    error = fresnel_error(reach, pitch, wavelength, distance)
    if error <= TOLERANCE:
        why = f"free window, and the paraxial phase error is at most {error:.2g} rad"
        fresnel = fresnel_range(reach, pitch, wavelength, distance)
        return Choice("fresnel", *fresnel, why, number, shape, 1)
    return larger_grid(grid, pitch, wavelength, distance, number)


def larger_grid(
    grid: tuple[int, int], pitch: float, wavelength: float, distance: float, number: float
) -> Choice:
    """The angular spectrum padded until all rays are kept [m], or a refusal if that is too large.

    Error: as `angular_spectrum_range`. Source: that range is proportional to the padding.
    """
    per_pad = angular_spectrum_range(grid, pitch, wavelength).longest / 2
    pad = max(2, math.ceil(distance / per_pad))
    require(
        pad * max(grid) <= LARGEST_GRID,
        f"at {distance:g} m the angles are too steep for Fresnel, the element too near for its "
        f"far field, and the angular spectrum needs {pad * max(grid)} pixels on a side",
        f"at most {LARGEST_GRID} pixels",
        "a smaller window, a coarser pitch, a lens behind the element, or a direct sum at points",
    )
    longest = angular_spectrum_range(grid, pitch, wavelength, pad=pad).longest
    why = "the angles are too steep for Fresnel and the element is too near for its far field"
    return Choice("angular-spectrum", 0.0, longest, why, number, grid, pad)


def holding_grid(
    shape: tuple[int, int], window: tuple[float, float], pitch: float
) -> tuple[int, int]:
    """Pixels (y, x) that hold both the element and the window. Error: exact. Source: definition."""
    rows, columns = (
        max(n, math.ceil(w / pitch - 1e-9)) for n, w in zip(shape, window, strict=True)
    )
    return rows, columns


def require(holds: bool, problem: str, allowed: str, fix: str) -> None:
    """Refuses what does not hold, in the four parts of a ConfigError."""
    if not holds:
        raise ConfigError(Fault(problem, allowed, fix))
