"""What a perfect continuous phase could send into the wanted orders, told before any design."""

import numpy as np
from jaxtyping import Complex, Float, Int

from doe import sampling
from doe.result import Bound

# Best known efficiency of N equal consecutive orders in one dimension, continuous phase.
# Source: own searches that agree with Krackhardt, Mait and Streibl, Appl. Opt. 31, 27 (1992) and
# Romero and Dickey, J. Opt. Soc. Am. A 24, 2280 (2007) (both from memory).
EQUAL_ORDERS = {
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

ROUNDS = 60  # of the ascent in the free phases
STARTS = 30
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
    spread_y, spread_x = np.unique(m_y), np.unique(m_x)
    line = spread_x if len(spread_y) == 1 else spread_y
    is_line = len(spread_y) == 1 or len(spread_x) == 1
    is_equal = np.ptp(share) < 1e-9 * share.max()
    if is_line and is_equal and count in EQUAL_ORDERS and np.ptp(line) == count - 1:
        return Bound(EQUAL_ORDERS[count] * envelope, factor, "best known")
    return Bound(free_phase_bound(m_y, m_x, share) * envelope, factor, "estimate")


def free_phase_bound(
    m_y: Int[np.ndarray, " spot"], m_x: Int[np.ndarray, " spot"], share: Float[np.ndarray, " spot"]
) -> float:
    """Largest (mean |s|)^2 / mean |s|^2 found over the free phases of the wanted orders.

    s is the sum of the wanted waves; no phase mask does better with these order phases. The
    largest value is searched for, not proved. Source: Wyrowski, J. Opt. Soc. Am. A 8 (1991)
    (from memory).
    """
    rows = grid_size(m_y)
    columns = grid_size(m_x)
    place = (m_y - m_y.min()) % rows, (m_x - m_x.min()) % columns
    starts = STARTS if rows * columns <= 32**2 else 3 if rows * columns <= 128**2 else 1
    generator = np.random.default_rng(1)
    best = 0.0
    for _ in range(starts):
        turn = generator.uniform(0, 2 * np.pi, len(share))
        best = max(best, ascend(np.sqrt(share) * np.exp(1j * turn), place, (rows, columns)))
    return min(best, 1.0)


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


def grid_size(orders: Int[np.ndarray, " spot"]) -> int:
    """Samples, a power of two, that hold a sum of waves four times finer than its fringes."""
    span = int(np.ptp(orders))
    if span == 0:
        return 1
    return max(32, min(power_of_two(4 * (span + 1)), LARGEST_GRID), power_of_two(span + 1))


def power_of_two(number: int) -> int:
    """The smallest power of two that is not below a number."""
    return 1 << (number - 1).bit_length()
