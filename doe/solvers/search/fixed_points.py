"""Fixed points of the phases of a pattern's orders, and hops between them, compiled by numba."""

import numpy as np
from numba import njit

from doe.solvers.search.draws import below, uniform
from doe.solvers.search.light import FAST

EVEN = 1e-3  # uniformity error below which a fixed point counts
ROUNDS = 100  # of one fixed point
GENTLE, FIRM = 0.3, 0.7  # exponents that lift weak orders, early and late
MOST_KICKS = 8
EARLIEST_END = 20  # rounds before a fixed point may count as reached


@njit(cache=True, nogil=True, fastmath=FAST)
def element(ey, ex, orders, half, t):
    """t = S / |S| on the grid, S the sum of the waves; ey, ex are (pixel, order)."""
    for y in range(ey.shape[0]):
        for b in range(ex.shape[1]):
            zr = 0.0
            zi = 0.0
            for a in range(ey.shape[1]):
                er, ei = ey[y, a].real, ey[y, a].imag
                cr, ci = orders[a, b].real, orders[a, b].imag
                zr += cr * er + ci * ei
                zi += ci * er - cr * ei
            half[0, b] = zr
            half[1, b] = zi
        for x in range(ex.shape[0]):
            zr = 0.0
            zi = 0.0
            for b in range(ex.shape[1]):
                er, ei = ex[x, b].real, ex[x, b].imag
                zr += half[0, b] * er + half[1, b] * ei
                zi += half[1, b] * er - half[0, b] * ei
            scale = 1.0 / np.sqrt(zr * zr + zi * zi + 1e-300)
            t[0, y, x] = zr * scale
            t[1, y, x] = zi * scale


@njit(cache=True, nogil=True, fastmath=FAST)
def amplitudes(ey, ex, t, half, got):
    """got[a, b] = sum over the grid of t ey ex."""
    got[:] = 0.0
    for y in range(ey.shape[0]):
        half[:] = 0.0
        for x in range(ex.shape[0]):
            tr = t[0, y, x]
            ti = t[1, y, x]
            for b in range(ex.shape[1]):
                er, ei = ex[x, b].real, ex[x, b].imag
                half[0, b] += tr * er - ti * ei
                half[1, b] += tr * ei + ti * er
        for a in range(ey.shape[1]):
            for b in range(ex.shape[1]):
                got[a, b] += ey[y, a] * complex(half[0, b], half[1, b])


@njit(cache=True, nogil=True)
def judge(got, share):
    """Efficiency and uniformity error of the wanted orders."""
    efficiency = 0.0
    low = np.inf
    high = 0.0
    for a in range(share.shape[0]):
        for b in range(share.shape[1]):
            if share[a, b] > 0:
                power = got[a, b].real ** 2 + got[a, b].imag ** 2
                efficiency += power
                low = min(low, power / share[a, b])
                high = max(high, power / share[a, b])
    return efficiency, (high - low) / (high + low + 1e-300)


@njit(cache=True, nogil=True)
def lift(got, share, exponent, orders):
    """Take over the phases the orders came out with, and ask the weak ones for more."""
    total = 0.0
    count = 0
    for a in range(share.shape[0]):
        for b in range(share.shape[1]):
            if share[a, b] > 0:
                total += abs(got[a, b]) / np.sqrt(share[a, b])
                count += 1
    for a in range(share.shape[0]):
        for b in range(share.shape[1]):
            if share[a, b] > 0:
                size = abs(got[a, b]) + 1e-30
                relative = size * count / (np.sqrt(share[a, b]) * total)
                orders[a, b] = abs(orders[a, b]) * relative**-exponent * got[a, b] / size


@njit(cache=True, nogil=True)
def settle(ey, ex, share, orders, rounds):
    """Iterate `orders` to the fixed point; gives back efficiency and uniformity error.

    The phase of the sum is the best mask for given order phases: Romero and Dickey, J. Opt. Soc.
    Am. A 24, 2280 (2007) (from memory); the weights that follow the powers are this project's.
    """
    t = np.zeros((2, ey.shape[0], ex.shape[0]))
    half = np.zeros((2, ex.shape[1]))
    got = np.zeros(share.shape, np.complex128)
    efficiency, error = 0.0, 1.0
    for i in range(rounds):
        element(ey, ex, orders, half, t)
        amplitudes(ey, ex, t, half, got)
        efficiency, error = judge(got, share)
        if (i > EARLIEST_END and error < 0.3 * EVEN) or i == rounds - 1:
            break
        lift(got, share, GENTLE if 3 * i < rounds else FIRM, orders)
    return efficiency, error


@njit(cache=True, nogil=True)
def turn(orders, images, k, angle):
    """Give order k and its mirror images the phase `angle`."""
    columns = orders.shape[1]
    for g in range(images.shape[0]):
        a = images[g, k] // columns
        b = images[g, k] % columns
        orders[a, b] = abs(orders[a, b]) * np.exp(1j * angle)


@njit(cache=True, nogil=True)
def hop(ey, ex, share, images, seed, hops):
    """One random start and the best basin that `hops` kicks of 1 to 8 phases lead to."""
    rng = np.array([seed], np.uint64)
    orders = np.sqrt(share).astype(np.complex128)
    for k in range(share.size):
        turn(orders, images, k, 2 * np.pi * uniform(rng))
    efficiency, error = settle(ey, ex, share, orders, 2 * ROUNDS)
    best = efficiency - error  # any even basin may follow an uneven start
    for _ in range(hops):
        trial = orders.copy()
        for _ in range(1 + below(rng, MOST_KICKS)):
            turn(trial, images, below(rng, share.size), 2 * np.pi * uniform(rng))
        efficiency, error = settle(ey, ex, share, trial, ROUNDS)
        if error < EVEN and efficiency > best:
            best = efficiency
            orders[:] = trial
    return orders, best
