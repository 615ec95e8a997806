"""Annealing by small rectangles of the binary layers, under a mask rule."""

import numpy as np
from numba import njit

from doe.solvers.search.draws import below, uniform
from doe.solvers.search.light import FAST, circle, copy, energy_of, powers, sum_orders
from doe.solvers.search.rule import (
    WORD,
    bit_rows,
    count_breaches,
    flip_bit,
    inner_part,
    read_word,
    total_breaches,
)

PIXEL_GAIN = 4.0  # a move hardly ever gains more than this / pixels for each of its pixels


@njit(cache=True, nogil=True)
def neighbour(levels, box, rng):
    """Level of a random pixel that touches the box from outside."""
    y0, x0, h, w = box
    ny, nx = levels.shape
    side = below(rng, 4)
    if side < 2:
        return levels[(y0 - 1 if side else y0 + h) % ny, (x0 + below(rng, w)) % nx]
    return levels[(y0 + below(rng, h)) % ny, (x0 - 1 if side == 2 else x0 + w) % nx]


@njit(cache=True, nogil=True)
def choose(levels, n_layers, box, rng):
    """A random move of the box: new level = ((old & keep) | put) + step."""
    top = (1 << n_layers) - 1
    kind = below(rng, 8)
    if kind < 3:  # all layers take over a neighbour: an edge moves
        return 0, np.int64(neighbour(levels, box, rng)), 0
    if kind == 7:
        return top, 0, 1 - 2 * below(rng, 2)
    bit = 1 << below(rng, n_layers)  # one layer takes over a neighbour, or is switched
    put = bit * below(rng, 2) if kind == 6 else np.int64(neighbour(levels, box, rng)) & bit
    return top - bit, put, 0


@njit(cache=True, nogil=True)
def propose(levels, n_layers, box, fresh, flips, rng):
    """Fill `fresh` with the new levels of the box and `flips` with its changed bits.

    flips[k, j] has bit i set where layer bit k changes at row j, column i of the box.
    Returns the layer bits that change anywhere.
    """
    y0, x0, h, w = box
    ny, nx = levels.shape
    top = (1 << n_layers) - 1
    keep, put, step = choose(levels, n_layers, box, rng)
    changed = 0
    for j in range(h):
        y = y0 + j if y0 + j < ny else y0 + j - ny
        for k in range(n_layers):
            flips[k, j] = np.uint64(0)
        for i in range(w):
            x = x0 + i if x0 + i < nx else x0 + i - nx
            old = np.int64(levels[y, x])
            new = (((old & keep) | put) + step) & top
            fresh[j, i] = new
            flip = old ^ new
            if flip:
                changed |= flip
                for k in range(n_layers):
                    flips[k, j] |= np.uint64((flip >> k) & 1) << np.uint64(i)
    return changed


@njit(cache=True, nogil=True)
def repeat(word, nx):
    """Repeat changed pixels that a cell narrower than a word shows more than once."""
    shift = nx
    out = word
    while shift < WORD:
        out |= (word << np.uint64(shift)) | (word >> np.uint64(shift))
        shift += nx
    return out


@njit(cache=True, nogil=True)
def breach_change(rows, shape, box, flips, rule, breaches, patch, work):
    """Change of the breaches pixels of one layer by the move."""
    y0, x0, h, w = box
    ny, nx = shape
    above = 2 * rule.reach[0]
    left = 2 * rule.reach[1]
    height = h + 2 * above
    inner = inner_part(rule, h, w, ny, nx)
    x = (x0 - left) % nx
    y = (y0 - above) % ny
    for j in range(height + 1):
        patch[j] = read_word(rows[y], x)
        y = y + 1 if y + 1 < ny else 0
    before = 0
    if breaches:  # a legal layer needs no count
        before = count_breaches(patch, height, inner, rule, work)
    for j in range(h):
        flip = repeat(flips[j] << np.uint64(left), nx)
        y = (above + j) % ny
        while y <= height:
            patch[y] ^= flip
            y += ny
    return count_breaches(patch, height, inner, rule, work) - before


@njit(cache=True, nogil=True, fastmath=FAST)
def add_box(levels, box, fresh, cos, sin, optics, row, new, power):
    """Add the change of the box to `new` (which holds the amplitudes so far)."""
    y0, x0, h, w = box
    ny, nx = levels.shape
    count = power.size
    for j in range(h):
        y = (y0 + j) % ny
        touched = False
        for i in range(w):
            x = (x0 + i) % nx
            old = levels[y, x]
            if old == fresh[j, i]:
                continue
            if not touched:
                row[:] = np.float32(0)
                touched = True
            dr = cos[fresh[j, i]] - cos[old]
            di = sin[fresh[j, i]] - sin[old]
            xr, xi = optics.x_re[x], optics.x_im[x]
            for k in range(count):
                row[0, k] += dr * xr[k] - di * xi[k]
                row[1, k] += dr * xi[k] + di * xr[k]
        if touched:
            yr, yi = optics.y_re[y], optics.y_im[y]
            for k in range(count):
                new[0, k] += row[0, k] * yr[k] - row[1, k] * yi[k]
                new[1, k] += row[0, k] * yi[k] + row[1, k] * yr[k]
    powers(new, power)


@njit(cache=True, nogil=True)
def take(levels, rows, box, fresh, n_layers):
    """Write the move into the levels and the bit rows."""
    y0, x0, h, w = box
    ny, nx = levels.shape
    for j in range(h):
        y = (y0 + j) % ny
        for i in range(w):
            x = (x0 + i) % nx
            flips = levels[y, x] ^ fresh[j, i]
            levels[y, x] = fresh[j, i]
            for k in range(n_layers):
                if (flips >> k) & 1:
                    flip_bit(rows[k, y], nx, x)


@njit(cache=True, nogil=True)
def breaches_of(rows, shape, rule, work):
    """Breaches of every layer."""
    found = np.zeros(len(rows), np.int64)
    for k in range(len(rows)):
        found[k] = total_breaches(rows[k], shape[0], shape[1], rule, work)
    return found


@njit(cache=True, nogil=True)
def rectangle_block(levels, n_layers, optics, rule, price, trials, seed):
    """Anneal with rectangle moves; price = (T, w, u, p).  Returns the breaches left."""
    rng = np.array([seed], np.uint64)
    ny, nx = levels.shape
    temperature, even_price, slack, rule_price = price
    cos, sin = circle(1 << n_layers)
    amp = np.zeros((2, optics.gain.size), np.float32)
    row = np.zeros_like(amp)
    new = np.zeros_like(amp)
    power = np.zeros(optics.gain.size, np.float32)
    fresh = np.zeros(rule.largest, np.uint8)
    flips = np.zeros((n_layers, rule.largest[0]), np.uint64)
    hopeless = np.float32(PIXEL_GAIN / (ny * nx))
    patch = np.zeros(ny + rule.largest[0] + 4 * rule.reach[0] + 1, np.uint64)
    work = np.zeros((3, patch.size), np.uint64)
    rows = bit_rows(levels, n_layers)
    change = np.zeros(n_layers, np.int64)
    breaches = breaches_of(rows, (ny, nx), rule, work)
    sum_orders(levels, cos, sin, optics, amp[0], amp[1])
    powers(amp, power)
    energy = energy_of(power, optics, even_price, slack)
    for _ in range(trials):
        h = 1 + below(rng, rule.largest[0])
        w = 1 + below(rng, rule.largest[1])
        box = (below(rng, ny), below(rng, nx), h, w)
        changed = propose(levels, n_layers, box, fresh, flips, rng)
        if changed == 0:
            continue
        for k in range(n_layers):
            change[k] = 0
            if (changed >> k) & 1:
                change[k] = breach_change(
                    rows[k], (ny, nx), box, flips[k], rule, breaches[k], patch, work
                )
        budget = -temperature * np.log(uniform(rng)) - rule_price * np.float32(change.sum())
        if budget < -hopeless * h * w:
            continue
        copy(amp, new)
        add_box(levels, box, fresh, cos, sin, optics, row, new, power)
        trial = energy_of(power, optics, even_price, slack)
        if trial - energy <= budget:
            energy = trial
            take(levels, rows, box, fresh, n_layers)
            copy(new, amp)
            breaches += change
    return breaches.sum()
