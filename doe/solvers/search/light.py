"""Order amplitudes and the annealed energy inside compiled loops."""

from typing import Any, NamedTuple

import numpy as np
from numba import njit
from numpy.typing import NDArray

FAST = {"nnan", "ninf", "nsz", "reassoc", "contract"}


class Optics(NamedTuple):
    """Per-pixel factors of the K controlled orders, wanted ones first."""

    y_re: NDArray[Any]  # (ny, K) float32
    y_im: NDArray[Any]
    x_re: NDArray[Any]  # (nx, K) float32
    x_im: NDArray[Any]
    gain: NDArray[Any]  # (K,) 1 / target of a wanted order, 1 / scale of a dark one
    cap: NDArray[Any]  # (K,) capped power of a dark order times its gain
    wanted: int


@njit(cache=True, nogil=True, fastmath=FAST)
def sum_orders(levels, cos, sin, optics, re, im):
    """Sum all amplitudes anew, in double precision within every row."""
    ny, nx = levels.shape
    count = optics.gain.size
    row = np.zeros((2, count))
    total = np.zeros((2, count))
    for y in range(ny):
        row[:] = 0.0
        for x in range(nx):
            tr = cos[levels[y, x]]
            ti = sin[levels[y, x]]
            for k in range(count):
                row[0, k] += tr * optics.x_re[x, k] - ti * optics.x_im[x, k]
                row[1, k] += tr * optics.x_im[x, k] + ti * optics.x_re[x, k]
        for k in range(count):
            total[0, k] += row[0, k] * optics.y_re[y, k] - row[1, k] * optics.y_im[y, k]
            total[1, k] += row[0, k] * optics.y_im[y, k] + row[1, k] * optics.y_re[y, k]
    for k in range(count):
        re[k] = total[0, k]
        im[k] = total[1, k]


@njit(cache=True, nogil=True, fastmath=FAST)
def energy_of(power, optics, even_price, slack):
    """Optical energy of the order powers."""
    gain = optics.gain
    wanted = optics.wanted
    zero = np.float32(0)
    one = np.float32(1)
    light = zero
    relative = zero
    for k in range(wanted):
        light += power[k]
        relative += power[k] * gain[k]
    per_mean = np.float32(wanted) / max(relative, np.float32(1e-20))  # no light at all
    penalty = zero
    for k in range(wanted):
        over = max(abs(power[k] * gain[k] * per_mean - one) - slack, zero)
        penalty += over * over
    for k in range(wanted, power.size):
        over = max(power[k] * gain[k] - optics.cap[k], zero)
        penalty += over * over
    return one - light + even_price * penalty / np.float32(wanted)


@njit(cache=True, nogil=True, fastmath=FAST)
def add_pixel(optics, y, x, dr, di, old, new, power):
    """new = old + the change of one pixel; rows of old and new are re, im."""
    yr, yi, xr, xi = optics.y_re[y], optics.y_im[y], optics.x_re[x], optics.x_im[x]
    for k in range(power.size):
        er = yr[k] * xr[k] - yi[k] * xi[k]
        ei = yr[k] * xi[k] + yi[k] * xr[k]
        a = old[0, k] + dr * er - di * ei
        b = old[1, k] + dr * ei + di * er
        new[0, k] = a
        new[1, k] = b
        power[k] = a * a + b * b


@njit(cache=True, nogil=True, fastmath=FAST)
def powers(amp, power):
    """Squared moduli of amplitudes whose rows are real and imaginary part."""
    for k in range(power.size):
        power[k] = amp[0, k] * amp[0, k] + amp[1, k] * amp[1, k]


@njit(cache=True, nogil=True, fastmath=FAST)
def copy(source, goal):
    """Copy amplitudes; a slice assignment would cost more at this length."""
    for k in range(goal.shape[1]):
        goal[0, k] = source[0, k]
        goal[1, k] = source[1, k]


@njit(cache=True, nogil=True)
def circle(n_levels):
    """Cosine and sine of the phase of every level."""
    turn = 2 * np.pi * np.arange(n_levels) / n_levels
    return np.cos(turn).astype(np.float32), np.sin(turn).astype(np.float32)
