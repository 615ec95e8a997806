"""Gauss-Legendre nodes that a pixel needs, by an error bound set before any sum."""

import math

import numpy as np
from jaxtyping import Float, Int

from doe.errors import ConfigError, Fault

TOLERANCE = 1e-6  # of the sum of the moduli of all wavelets
MOST_NODES = 64  # per pixel side; beyond, 4096 wavelets a pixel are a sign of a wrong set-up
ELLIPSES = np.geomspace(1.02, 1e6, 96)  # Bernstein ellipses tried by the error bound


def nodes_per_side(
    shape: tuple[int, ...],
    pitch: tuple[float, ...],
    points: Float[np.ndarray, "point coordinate"],
    wavelength: float,
    *,
    tolerance: float = TOLERANCE,
) -> Int[np.ndarray, "point axis"]:
    """Gauss-Legendre nodes along each side of a pixel that resolve the wavelet at every pixel.

    shape, pitch [m]: of the field, (y, x) or (x,). points [m]: z first, then one per axis.
    The phase changes by k sin(theta) pitch across a pixel, theta being the steepest ray's angle.
    Error: the rule of all sides together is off by less than tolerance int |wavelet| dA; seldom
    more than three nodes above the fewest that would do. ConfigError where a side needs more
    than MOST_NODES.
    Source: an N-point rule is off by at most (16/3) M rho^(-2 N) / (1 - rho^-2) on [-1, 1], M the
    maximum on the Bernstein ellipse rho (Trefethen, Approximation Theory and Approximation
    Practice, ch. 19, from memory; the factor for N = 1 derived); M from r^2 = rho0^2 + x^2.
    """
    check_plane(shape, pitch, points, wavelength, tolerance)
    nodes = fewest_nodes(shape, pitch, points, wavelength, tolerance)
    worst = int(np.argmax(nodes.max(axis=1))) if len(nodes) else 0
    if len(nodes) and nodes[worst].max() > MOST_NODES:
        point = points[worst : worst + 1].copy()
        point[0, 0] = max(point[0, 0], min(pitch) / 100)  # where the flattest ellipse begins to fit
        while fewest_nodes(shape, pitch, point, wavelength, tolerance).max() > MOST_NODES:
            point[0, 0] *= 1.25
        raise ConfigError(
            Fault(
                f"the point {metres(points[worst])} is so near the plane, or seen so obliquely "
                f"from its far pixels, that a pixel of {metres(np.array(pitch))} needs more than "
                f"{MOST_NODES} nodes a side",
                f"z from about {point[0, 0]:.2g} m at this place",
                "move the point away, or sample the field with a finer pitch",
            )
        )
    return nodes.astype(np.int64)


def fewest_nodes(
    shape: tuple[int, ...],
    pitch: tuple[float, ...],
    points: Float[np.ndarray, "point coordinate"],
    wavelength: float,
    tolerance: float,
) -> Float[np.ndarray, "point axis"]:
    """Nodes per side by the bound of nodes_per_side, infinite where no ellipse will do.

    On an ellipse reaching i b h off the real axis (h half a pitch), x = X + i Y has |Y| <= b h, so
    |r|^2 >= rho0^2 + X^2 - Y^2, and |exp(i k r)| <= exp(k |Y| |X| / |r|): the growth is that of
    the steepest ray, rho0 = z. Smaller |r| than on the pixel raises the wavelet by less than the
    third power of the ratio, whose bound is the triangle inequality of (d, w) and (c, z - w).
    """
    k = 2 * np.pi / wavelength
    z = points[:, 0]
    found = np.full((len(points), len(shape)), np.inf)
    # Each axis may use its share; sqrt(2) covers |1 / r - i k| < 1 / |r| + k.
    safety = math.log(math.sqrt(2) * 8 / 3 * len(shape) / tolerance)
    for axis, (count, step) in enumerate(zip(shape, pitch, strict=True)):
        half = step / 2
        reach = np.abs(points[:, axis + 1]) + (count - 1) * half
        for rho in ELLIPSES:
            wide, high = (rho + 1 / rho) / 2 * half, (rho - 1 / rho) / 2 * half
            fits = high < 0.99 * z
            w = np.sqrt(np.where(fits, z**2 - high**2, 1))
            slope = (reach + wide) / np.hypot(reach + wide, w)
            rise = 3 * np.log1p(np.hypot(half + wide, z - w) / w)
            gain = safety + k * slope * high + rise - math.log1p(-(rho**-2.0))
            needed = np.where(fits, gain / (2 * math.log(rho)), np.inf)
            found[:, axis] = np.minimum(found[:, axis], np.ceil(needed))
    return found


def metres(numbers: Float[np.ndarray, " number"]) -> str:
    """Coordinates as text."""
    return "(" + ", ".join(f"{number:.3g}" for number in numbers) + ") m"


def check_plane(
    shape: tuple[int, ...],
    pitch: tuple[float, ...],
    points: Float[np.ndarray, "point coordinate"],
    wavelength: float,
    tolerance: float,
) -> None:
    """Raise a ConfigError for what no sum can be made of."""
    faults = []
    sizes = [*pitch, wavelength]
    if not all(math.isfinite(size) and size > 0 for size in sizes):
        faults.append(
            Fault(
                f"pitch and wavelength are {metres(np.array(sizes))}",
                "finite lengths above zero",
                "give both in metres",
            )
        )
    if not 0 < tolerance < 1:
        faults.append(Fault(f"tolerance = {tolerance}", "above 0 and below 1", f"{TOLERANCE}"))
    if len(pitch) != len(shape) or points.ndim != 2 or points.shape[1] != len(shape) + 1:
        faults.append(
            Fault(
                f"a field of {len(shape)} axes, a pitch of {len(pitch)} and points of shape "
                f"{points.shape} do not fit together",
                "one pitch per axis, and points of shape (n, 1 + axes), z first",
                f"points of shape (n, {len(shape) + 1})",
            )
        )
    elif not (np.isfinite(points).all() and (points[:, 0] > 0).all()):
        faults.append(
            Fault(
                "a point is not finite, or not behind the plane",
                "finite coordinates with z above zero",
                "mirror the set-up so that the light travels towards +z",
            )
        )
    if faults:
        raise ConfigError(*faults)
