"""The mask rule inside compiled loops: breaches of binary layers kept as rows of bits.

A layer is kept as rows of 64-bit words, repeated past the edge, so that the pixels around a move
come out as one word a row and an opening is a few shifts.
"""

from typing import NamedTuple

import numpy as np
from numba import njit

from doe.solvers.search.draws import ONE

WORD = 64


class Rule(NamedTuple):
    """Mask rule of every binary layer, in pixels."""

    feature: tuple[int, int]  # (dy, dx)
    gap: tuple[int, int]  # (gy, gx)
    reach: tuple[int, int]  # how far a changed pixel can make others breaches
    largest: tuple[int, int]  # largest rectangle of a move
    corners: bool  # corner-only contacts are allowed


@njit(cache=True, nogil=True)
def flip_bit(row, nx, x):
    """Flip pixel x and its repeats past the edge."""
    while x < nx + WORD:
        row[x >> 6] ^= ONE << np.uint64(x & 63)
        x += nx


@njit(cache=True, nogil=True)
def bit_rows(levels, n_layers):
    """Rows of bits of layer bit k (value 2^k of the level)."""
    ny, nx = levels.shape
    rows = np.zeros((n_layers, ny, (nx + 2 * WORD) // WORD + 1), np.uint64)
    for k in range(n_layers):
        for y in range(ny):
            for x in range(nx):
                if (levels[y, x] >> k) & 1:
                    flip_bit(rows[k, y], nx, x)
    return rows


@njit(cache=True, nogil=True)
def read_word(row, x):
    """64 pixels from x on."""
    word = x >> 6
    shift = np.uint64(x & 63)
    value = row[word] >> shift
    if shift:
        value |= row[word + 1] << (np.uint64(WORD) - shift)
    return value


@njit(cache=True, nogil=True)
def ones(v):
    """Number of set bits."""
    v = v - ((v >> ONE) & np.uint64(0x5555555555555555))
    v = (v & np.uint64(0x3333333333333333)) + ((v >> np.uint64(2)) & np.uint64(0x3333333333333333))
    v = (v + (v >> np.uint64(4))) & np.uint64(0x0F0F0F0F0F0F0F0F)
    return np.int64((v * np.uint64(0x0101010101010101)) >> np.uint64(56))


@njit(cache=True, nogil=True)
def erode(patch, height, size, work, out):
    """Pixels of the patch from which a size = (rows, columns) rectangle lies inside it."""
    for y in range(height):
        v = patch[y]
        for i in range(1, size[1]):
            v &= patch[y] >> np.uint64(i)
        work[y] = v
    for y in range(height):
        v = work[y]
        for j in range(1, size[0]):
            v &= work[y + j] if y + j < height else np.uint64(0)
        out[y] = v


@njit(cache=True, nogil=True)
def dilate(patch, height, size, work, out):
    """Pixels that the rectangles from the pixels of the patch cover; the inverse of `erode`."""
    for y in range(height):
        v = patch[y]
        for i in range(1, size[1]):
            v |= patch[y] << np.uint64(i)
        work[y] = v
    for y in range(height):
        v = work[y]
        for j in range(1, min(size[0], y + 1)):
            v |= work[y - j]
        out[y] = v


@njit(cache=True, nogil=True)
def lost_in_opening(patch, height, inner, size, work):
    """Pixels of the patch, within inner, that its opening by `size` loses."""
    first, end, mask = inner
    if size[0] * size[1] == 1:
        return 0
    erode(patch, height, size, work[0], work[1])
    dilate(work[1], height, size, work[0], work[1])
    count = 0
    for y in range(first, end):
        lost = patch[y] & ~work[1, y] & mask
        if lost:
            count += ones(lost)
    return count


@njit(cache=True, nogil=True)
def touching_corners(patch, inner):
    """Contacts at a corner only, within inner."""
    first, end, mask = inner
    count = 0
    for y in range(first, end):
        a = patch[y]
        c = patch[y + 1]
        touch = (a ^ (a >> ONE)) & (a ^ c) & ~(a ^ (c >> ONE)) & mask
        if touch:
            count += ones(touch)
    return count


@njit(cache=True, nogil=True)
def count_breaches(patch, height, inner, rule, work):
    """Breaches in the patch within inner = (first row, end row, column mask)."""
    count = lost_in_opening(patch, height, inner, rule.feature, work)
    if rule.gap[0] * rule.gap[1] > 1:
        for y in range(height):
            work[2, y] = ~patch[y]
        count += lost_in_opening(work[2], height, inner, rule.gap, work)
    if not rule.corners:
        count += touching_corners(patch, inner)
    return count


@njit(cache=True, nogil=True)
def inner_part(rule, h, w, ny, nx):
    """Where pixels may come to break the rule around an h x w move; each pixel at most once."""
    first = rule.reach[0]
    end = first + min(h + 2 * first, ny)
    width = min(w + 2 * rule.reach[1], nx)
    mask = ~np.uint64(0) if width >= WORD else (ONE << np.uint64(width)) - ONE
    return first, end, mask << np.uint64(rule.reach[1])


@njit(cache=True, nogil=True)
def total_breaches(rows, ny, nx, rule, work):
    """Breaches of a whole layer, counted in strips of columns."""
    height = ny + 4 * rule.reach[0]
    strip = WORD - 4 * rule.reach[1]
    patch = np.zeros(height + 1, np.uint64)
    total = 0
    for x in range(0, nx, strip):
        w = min(strip, nx - x)
        for y in range(height + 1):
            patch[y] = read_word(rows[(y - 2 * rule.reach[0]) % ny], (x - 2 * rule.reach[1]) % nx)
        mask = ~np.uint64(0) if w >= WORD else (ONE << np.uint64(w)) - ONE
        inner = (2 * rule.reach[0], 2 * rule.reach[0] + ny, mask << np.uint64(2 * rule.reach[1]))
        total += count_breaches(patch, height, inner, rule, work)
    return total
