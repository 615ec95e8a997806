"""The chains of a search: first state, next block, best design."""

from concurrent.futures import ThreadPoolExecutor
from typing import NamedTuple

import numpy as np

from doe import machine
from doe.solvers.search.draws import stream
from doe.solvers.search.light import Optics
from doe.solvers.search.pixels import pixel_block
from doe.solvers.search.rectangles import breaches_of, rectangle_block
from doe.solvers.search.rule import Rule, bit_rows
from doe.solvers.search.setup import Array, Coarse, Schedule, Setup

COARSE_SHARE = 0.1  # of the blocks of a ruled search anneal blocks of pixels, towards much light
COARSE_TRIALS = 4  # times the trials of a block: they are cheap


class State(NamedTuple):
    """Chains and the best design each has passed through."""

    levels: Array  # (chain, y, x) uint8
    best: Array  # (chain, y, x) uint8
    score: Array  # (chain, 4): legal, minus violation, efficiency; compared so; uniformity error

    def leader(self) -> int:
        """The chain with the best design."""
        return max(range(len(self.score)), key=lambda chain: rank(self.score[chain]))

    def best_scores(self) -> tuple[float, float]:
        """Efficiency and uniformity error of the best design."""
        score = self.score[self.leader()]
        return float(score[2]), float(score[3])


def rank(score: Array) -> tuple[float, ...]:
    """What decides between two designs: the rule, the limits, the light."""
    return tuple(float(part) for part in score[:3])


def settled(state: State) -> Array:
    """Levels of the best design."""
    levels: Array = state.best[state.leader()].copy()
    return levels


def first_state(setup: Setup, phase: Array) -> State:
    """Chains that start from a phase [rad]; the best design starts as a legal one.

    The chains add different constants before rounding: all serve a continuous phase equally, but
    each rounds to another relief.
    """
    offsets = np.arange(setup.chains)[:, None, None] / setup.chains
    turns = np.asarray(phase, float)[None] * setup.levels / (2 * np.pi) + offsets
    levels = np.mod(np.rint(turns), setup.levels).astype(np.uint8)
    best = np.stack([legal(setup, one) for one in levels])
    return State(levels, best, np.stack([score_of(setup, one) for one in best]))


def next_state(setup: Setup, state: State, index: int) -> State:
    """The state after block `index` on every chain; the old one is untouched."""
    with ThreadPoolExecutor(machine.cores()) as pool:
        runs = list(
            pool.map(
                lambda chain: run_chain(setup, state.levels[chain], chain, index),
                range(len(state.levels)),
            )
        )
    best, score = state.best.copy(), state.score.copy()
    for chain, (levels, points) in enumerate(runs):
        if rank(points) > rank(score[chain]):
            best[chain], score[chain] = levels, points
    return State(np.stack([levels for levels, _ in runs]), best, score)


def run_chain(setup: Setup, levels: Array, chain: int, index: int) -> tuple[Array, Array]:
    """One block of one chain on a copy of its levels, and the score it ends with."""
    levels = levels.copy()
    seed = stream(setup.seed, chain, index)
    head = int(COARSE_SHARE * setup.blocks) if setup.is_ruled else 0
    if index < head:
        small = shrunk(setup.coarse, levels)
        part = index / max(1, head - 1)
        trials = COARSE_TRIALS * setup.trials
        coarse = setup.coarse
        anneal_pixels(small, setup, (coarse.optics, coarse.schedule), part, (trials, seed))
        levels = grown(coarse, small)
        return levels, score_of(setup, levels)
    part = (index - head) / max(1, setup.blocks - head - 1)
    if setup.is_ruled:
        anneal_rectangles(levels, setup, part, seed)
    else:
        anneal_pixels(levels, setup, (setup.optics, setup.schedule), part, (setup.trials, seed))
    return levels, score_of(setup, levels)


def anneal_pixels(
    levels: Array,
    setup: Setup,
    model: tuple[Optics, Schedule],
    fraction: float,
    work: tuple[int, np.uint64],
) -> None:
    """Change `levels` by one block of pixel trials; work = trials and seed."""
    optics, schedule = model
    price = (
        geometric(schedule.hot, schedule.cold, fraction),
        geometric(schedule.even_low, schedule.even_high, fraction),
        setup.slack,
        np.float32(schedule.pairs),
        np.float32(schedule.swaps),
    )
    pixel_block(levels, setup.levels, optics, price, *work)


def anneal_rectangles(levels: Array, setup: Setup, fraction: float, seed: np.uint64) -> None:
    """Change `levels` by one block of rectangle trials."""
    schedule = setup.schedule
    price = (
        geometric(schedule.hot, schedule.cold, fraction),
        geometric(schedule.even_low, schedule.even_high, fraction),
        setup.slack,
        geometric(schedule.rule_low, schedule.rule_high, fraction),
    )
    masks = setup.levels.bit_length() - 1
    rectangle_block(levels, masks, setup.optics, setup.rule, price, setup.trials, seed)


def geometric(first: float, last: float, fraction: float) -> np.float32:
    """A value on its way from `first` to `last` in equal ratios; 0 stays 0."""
    return np.float32(first * (last / first) ** fraction if first > 0 else first)


def shrunk(coarse: Coarse, levels: Array) -> Array:
    """One level a block: that of its middle."""
    middle = []
    for cell, first in ((coarse.row, coarse.first_row), (coarse.column, coarse.first_column)):
        middle.append((first + np.append(first[1:], len(cell)) - 1) // 2)
    return np.ascontiguousarray(levels[np.ix_(*middle)])


def grown(coarse: Coarse, small: Array) -> Array:
    """Every pixel with the level of its block."""
    return np.ascontiguousarray(small[np.ix_(coarse.row, coarse.column)])


def legal(setup: Setup, levels: Array) -> Array:
    """A design that keeps the rule: blocks do, but for corners; there a flat plate does."""
    if not setup.is_ruled:
        return levels
    levels = grown(setup.coarse, shrunk(setup.coarse, levels))
    return levels if breaches(levels, setup.levels, setup.rule) == 0 else np.zeros_like(levels)


def breaches(levels: Array, count: int, rule: Rule) -> int:
    """Pixels of all layers that break the rule, and forbidden corner contacts."""
    masks = count.bit_length() - 1
    rows = bit_rows(np.ascontiguousarray(levels), masks)
    work = np.zeros((3, levels.shape[0] + 4 * rule.reach[0] + 1), np.uint64)
    return int(breaches_of(rows, levels.shape, rule, work).sum())


def score_of(setup: Setup, levels: Array) -> Array:
    """Legal, minus violation, efficiency and uniformity error, in float64.

    Source: definitions of doe.metrics, here on the orders of the search alone.
    """
    near = np.exp(2j * np.pi * levels / setup.levels)
    power = np.abs(np.einsum("kx,kx->k", setup.basis_y @ near, setup.basis_x)) ** 2
    wanted = power[: len(setup.share)]
    relative = wanted / setup.share
    error = (relative.max() - relative.min()) / (relative.max() + relative.min())
    dark = power[len(setup.share) :] / np.maximum(setup.cap, 1e-30)
    is_legal = not setup.is_ruled or breaches(levels, setup.levels, setup.rule) == 0
    violation = max(error / setup.uniformity - 1, dark.max(initial=0.0) - 1, 0.0)
    return np.array([float(is_legal), -violation, wanted.sum(), error])
