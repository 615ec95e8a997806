"""What a search is given: orders, rule, schedule and work."""

from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from doe.solvers.search.light import Optics
from doe.solvers.search.rule import WORD, Rule

INSIDE = 0.96  # annealed limits lie this far inside the real ones
INSIDE_RULED = 0.9  # and further where moves are coarse
CORNER_PRICE = 5  # a contact is a single breach but takes many pixels to mend
REFERENCE = 4096  # pixels of the cell the schedules were tuned on
FEW_ORDERS = 64  # a trial's cost grows with the orders beyond this; the trials are cut to match

Array = NDArray[Any]
Pair = tuple[int, int]


class Schedule(NamedTuple):
    """First and last temperature, price of unevenness and price of a breach of the rule."""

    hot: float
    cold: float
    even_low: float
    even_high: float
    rule_low: float
    rule_high: float
    pairs: float  # share of two-pixel trials
    swaps: float  # share of those that swap two levels


class Coarse(NamedTuple):
    """The cell in blocks of pixels that keep the rule by themselves."""

    optics: Optics
    row: Array  # (y,) block of every row
    column: Array
    first_row: Array  # first row of every block
    first_column: Array
    schedule: Schedule


class Setup(NamedTuple):
    """All that a search is given; nothing here changes during a run."""

    basis_y: Array  # (order, y) complex128, order by order, the wanted ones first
    basis_x: Array
    share: Array  # (wanted,) sums to 1
    cap: Array  # (dark,) most power of an unwanted order
    levels: int
    uniformity: float
    optics: Optics
    rule: Rule
    slack: np.float32  # departure from the mean that costs nothing
    schedule: Schedule
    is_ruled: bool
    coarse: Coarse  # used when ruled
    chains: int
    trials: int  # of one chain in one block
    blocks: int
    seed: int


def prepare(
    basis_y: Array,
    basis_x: Array,
    *,
    share: Array,
    caps: Array,
    levels: int,
    uniformity: float,
    feature: Pair,
    gap: Pair,
    corners: bool,
    seed: int,
    work: tuple[int | None, int | None, int | None] = (None, None, None),
) -> Setup:
    """A search for levels.

    basis_y (order_y, y) and basis_x (order_x, x): order bases with the pixel envelope.
    share (order_y, order_x): wanted shares of the power, 0 where an order is not wanted.
    caps: most power of an unwanted order, inf where it does not matter.
    corners: contacts at a corner only are allowed. work: chains, trials and blocks, None = usual.
    """
    light = np.flatnonzero(share.ravel() > 0)
    dark = np.flatnonzero(np.isfinite(caps.ravel()) & (share.ravel() <= 0))
    which = np.concatenate([light, dark])
    basis_y = np.asarray(basis_y, np.complex128)[which // share.shape[1]]
    basis_x = np.asarray(basis_x, np.complex128)[which % share.shape[1]]
    parts = share.ravel()[light] / share.sum()
    shape = basis_y.shape[1], basis_x.shape[1]
    pixels = shape[0] * shape[1]
    rule = rule_of(shape, feature, gap, corners=corners)
    is_ruled = max(rule.feature + rule.gap) > 1 or not corners
    size = max(*rule.feature, *rule.gap, 2 if is_ruled else 1)
    gain = np.concatenate([1 / parts, np.full(dark.size, float(light.size))])
    scaled = np.concatenate([np.zeros(light.size), INSIDE * caps.ravel()[dark] * light.size])
    chains, trials, blocks = usual_work(levels, size, pixels)
    trials = int(trials * min(1.0, FEW_ORDERS / which.size))
    return Setup(
        basis_y=basis_y,
        basis_x=basis_x,
        share=parts,
        cap=caps.ravel()[dark],
        levels=levels,
        uniformity=uniformity,
        optics=optics_of(basis_y, basis_x, gain, scaled, light.size),
        rule=rule,
        slack=np.float32((INSIDE_RULED if is_ruled else INSIDE) * uniformity),
        schedule=usual_schedule(levels, size, pixels, dear=1 if corners else CORNER_PRICE),
        is_ruled=is_ruled,
        coarse=coarse_of(basis_y, basis_x, gain, scaled, light.size, rule),
        chains=work[0] or chains,
        trials=work[1] or trials,
        blocks=work[2] or blocks,
        seed=seed,
    )


def rule_of(shape: Pair, feature: Pair, gap: Pair, *, corners: bool) -> Rule:
    """The rule of a cell; sizes beyond the cell mean the whole period."""
    feature = min(feature[0], shape[0]), min(feature[1], shape[1])
    gap = min(gap[0], shape[0]), min(gap[1], shape[1])
    size = max(feature[0], gap[0]), max(feature[1], gap[1])
    least = 0 if corners else 1
    reach = max(size[0] - 1, least), max(size[1] - 1, least)
    room = WORD - 4 * reach[1]
    largest = min(size[0] + 1, shape[0]), min(size[1] + 1, shape[1], room)
    return Rule(feature, gap, reach, largest, corners)


def usual_schedule(levels: int, size: int, pixels: int, *, dear: int) -> Schedule:
    """Prices and temperatures that served well for features or gaps of `size` pixels.

    One pixel moves 1 / pixels of the light, so the temperatures follow that. dear: factor on the
    price of a breach.
    Source: tuned on the 7 x 7 splitter of experiments/ladder.
    """
    unit = REFERENCE / pixels
    if size > 1:
        hot = 1.2e-5 * size**2 * unit
        return Schedule(hot, hot / 33, 30, 1e5, 8 * dear * hot, 200 * dear * hot, 0, 0)
    if levels == 2:
        return Schedule(4e-4 * unit, 1e-7 * unit, 3, 3e5, 0, 0, 0.5, 0.7)
    if levels == 4:
        return Schedule(2e-4 * unit, 1e-7 * unit, 30, 3e5, 0, 0, 0.5, 0.7)
    return Schedule(1.5e-5 * unit, 1e-7 * unit, 30, 3e5, 0, 0, 0.5, 0)


def usual_work(levels: int, size: int, pixels: int) -> tuple[int, int, int]:
    """Chains, trials of a chain in a block, and blocks: 5 to 35 s for 49 orders on two cores.

    Chains of few levels or wide features end in very different basins: there many chains serve
    better than long ones. Source: as usual_schedule.
    """
    large = pixels > 2 * REFERENCE
    if size > 1:
        trials = 50_000 if size <= 4 else 25_000
        return 4 if large else 6, 2 * trials if large else trials, 160
    if levels <= 4:
        return 8, 400_000, 100
    return 2, 1_000_000 if large else 500_000, 100


def block_of(pixels: int, size: int) -> tuple[Array, Array]:
    """Block of every pixel and first pixel of every block; none narrower than `size`."""
    count = max(1, pixels // size)
    cell = np.arange(pixels) * count // pixels
    return cell, np.searchsorted(cell, np.arange(count))


def coarse_of(
    basis_y: Array, basis_x: Array, gain: Array, cap: Array, wanted: int, rule: Rule
) -> Coarse:
    """The cell in blocks: their bases are the sums over their pixels."""
    size = [max(pair) for pair in zip(rule.feature, rule.gap, strict=True)]
    row, first_row = block_of(basis_y.shape[1], size[0])
    column, first_column = block_of(basis_x.shape[1], size[1])
    basis_y = np.add.reduceat(basis_y, first_row, axis=1)
    basis_x = np.add.reduceat(basis_x, first_column, axis=1)
    hot = 0.1 / (len(first_row) * len(first_column))
    schedule = Schedule(hot, hot / 400, 1, 10, 0, 0, 0.5, 0.3)
    optics = optics_of(basis_y, basis_x, gain, cap, wanted)
    return Coarse(optics, row, column, first_row, first_column, schedule)


def optics_of(basis_y: Array, basis_x: Array, gain: Array, cap: Array, wanted: int) -> Optics:
    """Factors of the orders as the compiled loops read them."""
    y_re, y_im, x_re, x_im = (
        np.ascontiguousarray(part.T, dtype=np.float32)
        for part in (basis_y.real, basis_y.imag, basis_x.real, basis_x.imag)
    )
    return Optics(y_re, y_im, x_re, x_im, gain.astype(np.float32), cap.astype(np.float32), wanted)
