"""Annealing by changes of one and two pixels, where the mask rule is one pixel."""

import numpy as np
from numba import njit

from doe.solvers.search.draws import below, uniform
from doe.solvers.search.light import add_pixel, circle, copy, energy_of, powers, sum_orders

ANY_LEVEL = 0.9  # share of trials below which a level moves by one step only


@njit(cache=True, nogil=True)
def partner(levels, y, x, rng):
    """A pixel within 3 of (y, x), wrapped around: few orders tell the two apart."""
    ny, nx = levels.shape
    return (y + below(rng, 7) - 3) % ny, (x + below(rng, 7) - 3) % nx


@njit(cache=True, nogil=True)
def draw_change(levels, n_levels, any_level, rng):
    """A pixel, its level and another one: a step up or down, or any."""
    y = below(rng, levels.shape[0])
    x = below(rng, levels.shape[1])
    old = np.int64(levels[y, x])
    step = 1 - 2 * below(rng, 2)
    if any_level:
        step = 1 + below(rng, n_levels - 1)
    return y, x, old, (old + step) % n_levels


@njit(cache=True, nogil=True)
def draw_second(levels, n_levels, first, swap, rng):
    """A partner of a changed pixel: it swaps levels with it, or takes the opposite step."""
    y, x, old, new = first
    y2, x2 = partner(levels, y, x, rng)
    old2 = np.int64(levels[y2, x2])
    if swap:
        return y2, x2, old2, old
    return y2, x2, old2, (old2 - (new - old)) % n_levels


@njit(cache=True, nogil=True)
def pixel_block(levels, n_levels, optics, price, trials, seed):
    """Anneal `levels` with one- and two-pixel trials; price = (T, w, u, pairs, swaps).

    Source: Kirkpatrick, Gelatt and Vecchi, Science 220, 671 (1983) (from memory).
    """
    rng = np.array([seed], np.uint64)
    temperature, even_price, slack, pairs, swaps = price
    cos, sin = circle(n_levels)
    amp = np.zeros((2, optics.gain.size), np.float32)
    half = np.zeros_like(amp)
    new = np.zeros_like(amp)
    power = np.zeros(optics.gain.size, np.float32)
    sum_orders(levels, cos, sin, optics, amp[0], amp[1])
    powers(amp, power)
    energy = energy_of(power, optics, even_price, slack)
    for _ in range(trials):
        kind = uniform(rng)
        y, x, a, b = draw_change(levels, n_levels, kind > ANY_LEVEL, rng)
        y2, x2, a2, b2 = y, x, a, b
        source = amp
        if kind < pairs:
            y2, x2, a2, b2 = draw_second(levels, n_levels, (y, x, a, b), kind < pairs * swaps, rng)
            if kind < pairs * swaps:
                b = a2
            if (y == y2 and x == x2) or a == b:
                continue
            add_pixel(optics, y2, x2, cos[b2] - cos[a2], sin[b2] - sin[a2], amp, half, power)
            source = half
        add_pixel(optics, y, x, cos[b] - cos[a], sin[b] - sin[a], source, new, power)
        trial = energy_of(power, optics, even_price, slack)
        if trial <= energy or trial - energy < -temperature * np.log(uniform(rng)):
            energy = trial
            levels[y2, x2] = b2
            levels[y, x] = b
            copy(new, amp)
