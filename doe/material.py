"""Refractive indices of the materials an element is made of, relative to air."""

import math
from collections.abc import Callable
from dataclasses import dataclass

from doe.units import MICRO, micrometres


@dataclass(frozen=True)
class Material:
    """A published index formula and the wavelengths [m] it was fitted over."""

    index: Callable[[float], float]
    shortest: float
    longest: float
    source: str


def sellmeier(*terms: tuple[float, float]) -> Callable[[float], float]:
    """Index n(wavelength in m) with n^2 - 1 = sum of B L^2 / (L^2 - C^2), L in micrometres."""

    def index(wavelength: float) -> float:
        square = (wavelength / MICRO) ** 2
        return math.sqrt(1 + sum(b * square / (square - c**2) for b, c in terms))

    return index


MATERIALS = {
    "fused silica": Material(
        sellmeier((0.6961663, 0.0684043), (0.4079426, 0.1162414), (0.8974794, 9.896161)),
        shortest=micrometres(0.21),
        longest=micrometres(3.71),
        source="Malitson, J. Opt. Soc. Am. 55, 1205 (1965)",
    ),
}
