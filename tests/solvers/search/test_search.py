"""The exact level search: its sums, its rule, its bits, and that it finds what can be proved."""

from itertools import product

import numpy as np
import pytest
from scipy import ndimage

from doe.solvers.search.chains import (
    State,
    breaches,
    first_state,
    next_state,
    score_of,
    settled,
)
from doe.solvers.search.setup import prepare, rule_of

ORDERS = np.arange(-1, 2)


def basis(orders, pixels):
    """Fourier integral of each pixel, written out here a second time."""
    where = (np.arange(pixels) + 0.5) / pixels
    envelope = np.sinc(np.asarray(orders) / pixels)[:, None]
    return envelope * np.exp(-2j * np.pi * np.asarray(orders)[:, None] * where) / pixels


def setup(shape=(16, 16), levels=4, feature=(1, 1), gap=(1, 1), *, corners=True, **changes):
    """A search for 3 x 3 equal spots, or a line of 3."""
    rows = ORDERS if shape[0] > 1 else [0]
    share = np.ones((len(rows), 3))
    options = {
        "share": share,
        "caps": np.full(share.shape, np.inf),
        "uniformity": 0.05,
        "seed": 3,
        "work": (2, 2000, 20),
    } | changes
    return prepare(
        basis(rows, shape[0]),
        basis(ORDERS, shape[1]),
        levels=levels,
        feature=feature,
        gap=gap,
        corners=corners,
        **options,
    )


def searched(job, start=None):
    """The state at the end."""
    state = first_state(job, np.zeros((job.basis_y.shape[1], job.basis_x.shape[1])))
    if start is not None:
        state = first_state(job, start)
    for index in range(job.blocks):
        state = next_state(job, state, index)
    return state


def keeps(levels, count, feature, gap):
    """Whether each layer equals its opening and closing, by SciPy over the seam."""
    rows, columns = levels.shape
    for bit in range(count.bit_length() - 1):
        layer = np.tile((levels >> bit & 1).astype(bool), (5, 5))
        middle = np.s_[2 * rows : 3 * rows, 2 * columns : 3 * columns]
        if (layer & ~ndimage.binary_opening(layer, np.ones(feature)))[middle].any():
            return False
        if (~layer & ~ndimage.binary_opening(~layer, np.ones(gap)))[middle].any():
            return False
    return True


def corner_contacts(levels, count):
    """Contacts at a corner only, over all layers, by looking at every corner."""
    rows, columns = levels.shape
    found = 0
    for bit, y, x in product(range(count.bit_length() - 1), range(rows), range(columns)):
        cell = [
            levels[(y + j) % rows, (x + i) % columns] >> bit & 1 for j in (0, 1) for i in (0, 1)
        ]
        found += cell in ([1, 0, 0, 1], [0, 1, 1, 0])
    return found


def test_scores_are_those_of_the_fourier_integral():
    job = setup()
    levels = np.random.default_rng(1).integers(0, 4, (16, 16)).astype(np.uint8)
    near = np.exp(2j * np.pi * levels / 4)
    power = np.abs(basis(ORDERS, 16) @ near @ basis(ORDERS, 16).T) ** 2
    _, _, efficiency, error = score_of(job, levels)
    assert efficiency == pytest.approx(power.sum(), rel=1e-12)
    low, high = power.min(), power.max()
    assert error == pytest.approx((high - low) / (high + low), rel=1e-12)


def test_a_small_line_is_solved_to_its_proved_optimum():
    """All 2^12 binary gratings of 12 pixels are tried; the search must reach the best of them."""
    job = setup((1, 12), 2, uniformity=0.02, work=(4, 3000, 30))
    best = 0.0
    line = basis(ORDERS, 12)
    for bits in product((1.0, -1.0), repeat=12):
        power = np.abs(line @ np.array(bits)) ** 2
        if power.sum() > best:
            low, high = power.min(), power.max()
            if high - low <= 0.02 * (high + low):
                best = power.sum()
    state = searched(job)
    found = score_of(job, settled(state))
    if best:
        assert found[1] == 0
        assert found[2] == pytest.approx(best, rel=1e-9)
    else:
        assert found[1] < 0


@pytest.mark.parametrize(
    ("shape", "levels", "feature", "gap", "corners"),
    [
        ((24, 24), 8, (2, 2), (2, 2), True),
        ((24, 20), 4, (2, 3), (3, 2), True),
        ((16, 16), 8, (1, 1), (1, 1), False),
        ((24, 24), 4, (3, 3), (3, 3), False),
        ((1, 64), 4, (1, 4), (1, 3), True),
        ((32, 32), 8, (8, 8), (8, 8), True),
        ((30, 40), 2, (4, 2), (2, 5), True),
    ],
)
def test_the_rule_is_kept_whatever_it_is(shape, levels, feature, gap, corners):
    job = setup(shape, levels, feature, gap, corners=corners)
    noise = np.random.default_rng(2).uniform(0, 2 * np.pi, shape)
    found = settled(searched(job, noise))
    assert keeps(found, levels, feature, gap)
    if not corners:
        assert corner_contacts(found, levels) == 0


def test_breaches_are_counted_as_scipy_counts_them():
    generator = np.random.default_rng(0)
    for shape, feature, gap in (
        ((20, 30), (2, 3), (1, 1)),
        ((5, 7), (3, 2), (2, 2)),
        ((1, 40), (1, 4), (1, 3)),
        ((70, 130), (4, 4), (3, 5)),
    ):
        smooth = ndimage.gaussian_filter(generator.random(shape), 2, mode="wrap")
        layer = smooth > np.median(smooth)
        tiled = np.tile(layer, (9, 9))
        rows, columns = shape
        middle = np.s_[4 * rows : 5 * rows, 4 * columns : 5 * columns]
        lost = (tiled & ~ndimage.binary_opening(tiled, np.ones(feature)))[middle].sum()
        filled = (~tiled & ~ndimage.binary_opening(~tiled, np.ones(gap)))[middle].sum()
        rule = rule_of(shape, feature, gap, corners=True)
        assert breaches(layer.astype(np.uint8), 2, rule) == lost + filled


@pytest.mark.parametrize("feature", [(1, 1), (2, 2)])
def test_a_search_resumed_between_blocks_has_the_same_bits(feature):
    job = setup(levels=8, feature=feature, gap=feature)
    whole = searched(job)
    state = first_state(job, np.zeros((16, 16)))
    for index in range(7):
        state = next_state(job, state, index)
    state = State(*(array.copy() for array in state))
    for index in range(7, job.blocks):
        state = next_state(job, state, index)
    for one, other in zip(whole, state, strict=True):
        assert one.tobytes() == other.tobytes()


def test_threads_do_not_change_a_bit(monkeypatch):
    from doe import machine

    job = setup(levels=8)
    two = searched(job)
    monkeypatch.setattr(machine, "cores", lambda: 1)
    for one, other in zip(two, searched(job), strict=True):
        assert one.tobytes() == other.tobytes()


def test_a_capped_zero_order_stays_below_its_cap():
    share = np.ones((3, 3))
    share[1, 1] = 0
    caps = np.full((3, 3), np.inf)
    caps[1, 1] = 1e-3
    job = setup((32, 32), 8, share=share, caps=caps, uniformity=0.1, work=(2, 20_000, 40))
    start = np.random.default_rng(5).uniform(0, 2 * np.pi, (32, 32))
    levels = settled(searched(job, start))
    near = np.exp(2j * np.pi * levels / 8)
    assert abs(near.mean()) ** 2 <= 1e-3
    assert score_of(job, levels)[2] > 0.5


def test_the_best_design_never_gets_worse():
    job = setup(levels=4, work=(2, 500, 30))
    state = first_state(job, np.random.default_rng(4).uniform(0, 6, (16, 16)))
    for index in range(job.blocks):
        later = next_state(job, state, index)
        for before, after in zip(state.score, later.score, strict=True):
            assert tuple(after[:3]) >= tuple(before[:3])
        state = later
