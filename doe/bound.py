"""What a perfect continuous phase could send into the wanted orders, told before any design."""

import numpy as np
from jaxtyping import Complex, Float, Int

from doe import sampling
from doe.result import Bound

# Best known efficiency of N equal consecutive orders in one dimension, continuous phase.
# Source: own searches that agree with Krackhardt, Mait and Streibl, Appl. Opt. 31, 27 (1992) and
# Romero and Dickey, J. Opt. Soc. Am. A 24, 2280 (2007) (both from memory).
EQUAL_ORDERS = {
    1: 1.0,
    2: 0.810569,
    3: 0.925562,
    4: 0.91902,
    5: 0.921244,
    6: 0.8906,
    7: 0.9684,
    8: 0.9594,
    9: 0.9928,
    10: 0.9583,
    11: 0.9771,
}

# The same for two-dimensional grids that beat the product of their lines.
# Source: own search, the fixed point of the order phases with 4,000 hops from mirrored starts.
EQUAL_GRIDS = {(3, 3): 0.9394, (5, 5): 0.9510, (7, 7): 0.9658}

ROUNDS = 60  # of the ascent in the free phases
STARTS = 30
MOST_SAMPLES = 80_000  # of all starts together: a tenth of a second
FINENESS = 8  # samples for each order of the span; the kinks of |s| want them
FINENESS_OF_LINES = 64
LARGEST_GRID = 512


def bound(
    m_y: Int[np.ndarray, " spot"],
    m_x: Int[np.ndarray, " spot"],
    share: Float[np.ndarray, " spot"],
    pixels: tuple[int, int],
    levels: int,
) -> Bound:
    """Bound on the efficiency of a spot pattern, the pixel envelope included.

    share: wanted shares of the power (sum 1).
    """
    envelope_y = np.sinc(m_y / pixels[0]) ** 2
    envelope_x = np.sinc(m_x / pixels[1]) ** 2
    envelope = float((share * envelope_y * envelope_x).sum())
    factor = sampling.blaze_efficiency(levels)
    count = len(share)
    if count == 1:
        return Bound(envelope, factor, "proved")
    known = best_known(m_y, m_x) if np.ptp(share) < 1e-9 * share.max() else None
    if known is not None:
        return Bound(known * envelope, factor, "best known")
    return Bound(free_phase_bound(m_y, m_x, share) * envelope, factor, "estimate")


def best_known(m_y: Int[np.ndarray, " spot"], m_x: Int[np.ndarray, " spot"]) -> float | None:
    """Best known efficiency of an equal grid at continuous phase; None where none is known.

    Spots spaced by any step have the efficiency of consecutive ones: a shorter period and a tilt
    of the phase turn the one into the other.
    """
    lines = np.unique(m_y), np.unique(m_x)
    rows, columns = (len(line) for line in lines)
    is_even = all(len(np.unique(np.diff(line))) <= 1 for line in lines)
    if not is_even or rows * columns != len(m_y):
        return None
    if (rows, columns) in EQUAL_GRIDS:
        return EQUAL_GRIDS[rows, columns]
    if rows in EQUAL_ORDERS and columns in EQUAL_ORDERS:
        return EQUAL_ORDERS[rows] * EQUAL_ORDERS[columns]
    return None


def free_phase_bound(
    m_y: Int[np.ndarray, " spot"], m_x: Int[np.ndarray, " spot"], share: Float[np.ndarray, " spot"]
) -> float:
    """Largest (mean |s|)^2 / mean |s|^2 found over the free phases of the wanted orders.

    s is the sum of the wanted waves; no phase mask does better with these order phases. The
    largest value is searched for, not proved. Source: Wyrowski, J. Opt. Soc. Am. A 8 (1991)
    (from memory).
    """
    is_line = bool(np.ptp(m_y) == 0 or np.ptp(m_x) == 0)
    rows, columns = (grid_size(orders, is_line=is_line) for orders in (m_y, m_x))
    place = (m_y - m_y.min()) % rows, (m_x - m_x.min()) % columns
    starts = max(1, min(STARTS, MOST_SAMPLES // (rows * columns)))
    generator = np.random.default_rng(1)
    kinds = mirror_classes(m_y, m_x)
    best = 0.0
    for start in range(starts):
        turn = generator.uniform(0, 2 * np.pi, len(share))[kinds[start % len(kinds)]]
        best = max(best, ascend(np.sqrt(share) * np.exp(1j * turn), place, (rows, columns)))
    return min(best, 1.0)


def mirror_classes(
    m_y: Int[np.ndarray, " spot"], m_x: Int[np.ndarray, " spot"]
) -> list[Int[np.ndarray, " spot"]]:
    """For each symmetry about the pattern's centre, spots with one number that share a phase.

    The best phases are often mirrored, and mirrored starts have far fewer of them to find.
    """
    y, x = 2 * m_y - m_y.min() - m_y.max(), 2 * m_x - m_x.min() - m_x.max()
    turned = np.where((y < 0) | ((y == 0) & (x < 0)), -1, 1)
    folds = [
        np.stack([y, x]),
        np.stack([y, x]) * turned,
        np.abs(np.stack([y, x])),
        np.sort(np.stack([y, x]), axis=0),
        np.sort(np.abs(np.stack([y, x])), axis=0),
    ]
    return [np.unique(fold, axis=1, return_inverse=True)[1].ravel() for fold in folds]


def ascend(
    orders: Complex[np.ndarray, " spot"],
    place: tuple[Int[np.ndarray, " spot"], Int[np.ndarray, " spot"]],
    shape: tuple[int, int],
) -> float:
    """(mean |s|)^2 at the end of the rounds; each takes the phases of the orders of s / |s|."""
    size = np.abs(orders)
    mean = 0.0
    for _ in range(ROUNDS):
        spectrum = np.zeros(shape, complex)
        spectrum[place] = orders
        waves = np.fft.ifft2(spectrum) * spectrum.size
        modulus = np.abs(waves)
        mean = float(modulus.mean())
        back = np.fft.fft2(waves / np.maximum(modulus, 1e-12))[place]
        orders = size * back / np.maximum(np.abs(back), 1e-12)
    return mean**2


def grid_size(orders: Int[np.ndarray, " spot"], *, is_line: bool) -> int:
    """Samples, a power of two, that hold a sum of waves well finer than its fringes."""
    span = int(np.ptp(orders))
    if span == 0:
        return 1
    if is_line:
        return power_of_two(FINENESS_OF_LINES * (span + 1))
    return max(min(power_of_two(FINENESS * (span + 1)), LARGEST_GRID), power_of_two(span + 1))


def power_of_two(number: int) -> int:
    """The smallest power of two that is not below a number."""
    return 1 << (number - 1).bit_length()
