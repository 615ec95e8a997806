"""Scalar design arithmetic in plain floats: orders, angles, spots, beam and feature sizes (SI)."""

import math
from typing import Literal

Mapping = Literal["f-sin", "f-tan", "f-theta"]

TURN = 2 * math.pi  # rad
LIGHT_SPEED = 299_792_458.0  # m/s, exact by definition of the metre


def sinc(x: float) -> float:
    """sin(pi x) / (pi x), 1 at 0. Source: definition."""
    return math.sin(math.pi * x) / (math.pi * x) if x else 1.0


def blaze_efficiency(levels: int) -> float:
    """First-order efficiency of an N-level blaze, sinc^2(1/N); 1 for a continuous one (levels = 0).

    Source: Dammann, Optik 31, 95 (1970) (from memory).
    """
    return sinc(1 / levels) ** 2 if levels else 1.0


def pixel_envelope(order: float, pixels: int) -> float:
    """Power factor sinc^2(m/n) of order m on a period of n square pixels. Source: definition."""
    return sinc(order / pixels) ** 2


def largest_angle(wavelength: float, pitch: float) -> float:
    """Half-angle [rad] addressed by a pixel pitch [m]: asin(wavelength / (2 pitch)), at most pi/2.

    Source: Nyquist's sampling theorem with the grating equation.
    """
    return math.asin(min(1.0, wavelength / (2 * pitch)))


def focal_position(direction: float, focal_length: float, mapping: Mapping) -> float:
    """Distance from the axis [m] where a lens focuses direction cosine `direction`.

    Source: definition of the three lens mappings.
    """
    angle = math.asin(direction)
    heights = {"f-sin": direction, "f-tan": math.tan(angle), "f-theta": angle}
    return focal_length * heights[mapping]


def focal_direction(position: float, focal_length: float, mapping: Mapping) -> float:
    """Direction cosine that a lens focuses `position` [m] from the axis: inverse of focal_position.

    Gives 2, which is no direction, where no wave goes there. Source: as focal_position.
    """
    ratio = position / focal_length
    if mapping == "f-sin":
        return ratio
    if mapping == "f-tan":
        return math.sin(math.atan(ratio))
    return math.sin(ratio) if abs(ratio) < math.pi / 2 else 2.0


def spot_diameter(wavelength: float, focal_length: float, beam_diameter: float, m2: float) -> float:
    """1/e^2 diameter [m] of a focused Gaussian beam: 4 wavelength f M^2 / (pi D).

    Source: ISO 11146 beam propagation law (from memory).
    """
    return 4 * wavelength * focal_length * m2 / (math.pi * beam_diameter)


def divergence(wavelength: float, beam_diameter: float, m2: float) -> float:
    """Full 1/e^2 far-field angle [rad] of a Gaussian beam. Source: as spot_diameter."""
    return 4 * wavelength * m2 / (math.pi * beam_diameter)


def aperture_loss(beam_diameter: float, aperture: float) -> float:
    """Share of a Gaussian beam outside a round aperture: exp(-2 (a/D)^2), a and D diameters.

    Source: integral of the Gaussian.
    """
    return math.exp(-2 * (aperture / beam_diameter) ** 2)


def peak_fluence(pulse_energy: float, beam_diameter: float) -> float:
    """Fluence on the axis [J/m^2] of a Gaussian pulse: 2 E / (pi w^2). Source: as aperture_loss."""
    return 2 * pulse_energy / (math.pi * (beam_diameter / 2) ** 2)


def transform_limit(wavelength: float, pulse_duration: float) -> float:
    """Bandwidth [m] (FWHM) of a Gaussian pulse at its limit: 0.441 wavelength^2 / (c tau).

    Source: time-bandwidth product 2 ln 2 / pi of a Gaussian pulse.
    """
    product = 2 * math.log(2) / math.pi
    return product * wavelength**2 / (LIGHT_SPEED * pulse_duration)


def pixels_for(rule: float, pitch: float) -> int:
    """Pixels that a minimum feature or gap [m] takes, at least 1: ceil(rule / pitch - 1e-9)."""
    return max(1, math.ceil(rule / pitch - 1e-9))


def etch_depth(wavelength: float, index: float, etch: int) -> float:
    """Depth [m] of etch m of a multilevel relief in air: wavelength / (2^m (n - 1)), m = 1 first.

    Source: Swanson, MIT Lincoln Laboratory TR-854 (1989) (from memory).
    """
    return wavelength / (2.0**etch * (index - 1))
