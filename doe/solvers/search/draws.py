"""Random numbers inside compiled loops."""

import numpy as np
from numba import njit

ONE = np.uint64(1)


@njit(cache=True, nogil=True)
def bits(rng):
    """Next 64 random bits; `rng` is a one-element uint64 array that is not 0.

    Source: Vigna, ACM Trans. Math. Softw. 42, 30 (2016), xorshift64* (from memory).
    """
    s = rng[0]
    s ^= s >> np.uint64(12)
    s ^= s << np.uint64(25)
    s ^= s >> np.uint64(27)
    rng[0] = s
    return s * np.uint64(2685821657736338717)


@njit(cache=True, nogil=True)
def below(rng, n):
    """Random integer 0 .. n-1, n < 2^31."""
    return np.int64(((bits(rng) >> np.uint64(32)) * np.uint64(n)) >> np.uint64(32))


@njit(cache=True, nogil=True)
def uniform(rng):
    """Random float32 in (0, 1]."""
    return np.float32((bits(rng) >> np.uint64(40)) + ONE) * np.float32(2.0**-24)


def stream(*numbers: int) -> np.uint64:
    """Seed of a stream of its own for each tuple of numbers, never 0."""
    found: np.uint64 = np.random.SeedSequence(numbers).generate_state(1, np.uint64)[0] | ONE
    return found
