"""The last stage of every method: the exact level search, block by block."""

from typing import Any, NamedTuple

import numpy as np
from jaxtyping import Float, Int, UInt8
from numpy.typing import NDArray

from doe.config.derived import rule_pixels
from doe.config.schema import Config
from doe.metrics import UNEVENNESS, USUAL_UNIFORMITY
from doe.problem import Problem
from doe.solvers.hooks import Hooks
from doe.solvers.search.chains import State, first_state, next_state, settled
from doe.solvers.search.setup import Setup, prepare

LEAST_DEPARTURE = 1e-5  # what float32 amplitudes can be steered to
MOST_ORDERS = 400  # wanted orders; the cost of a trial grows with them


class Refined(NamedTuple):
    """The settled levels, and efficiency and uniformity error after each block."""

    levels: UInt8[np.ndarray, "y x"]
    block: Int[np.ndarray, " row"]
    efficiency: Float[np.ndarray, " row"]
    uniformity_error: Float[np.ndarray, " row"]
    stopped: bool


def is_refined(config: Config, problem: Problem) -> bool:
    """Whether the exact search runs: levels, few orders, and the user does not forbid it."""
    few = int((problem.share > 0).sum()) <= MOST_ORDERS
    return config.solver.refine and config.element.levels > 0 and few


def setup_of(config: Config, problem: Problem) -> Setup:
    """The search of a job: limits, rule and work."""
    feature, gap = rule_pixels(config)
    search = config.solver.search
    share = np.asarray(problem.share, float)
    caps = np.full(share.shape, np.inf)
    if share[problem.zero_row, problem.zero_column] == 0:
        mean = 1 / (share > 0).sum()
        caps[problem.zero_row, problem.zero_column] = float(problem.zero_cap) * mean
    return prepare(
        np.asarray(problem.basis_y, complex),
        np.asarray(problem.basis_x, complex),
        share=share,
        caps=caps,
        levels=config.element.levels,
        uniformity=most_departure(config),
        feature=feature,
        gap=gap,
        corners=config.process.corner_contacts == "allow",
        seed=config.run.seed,
        work=(search.chains, search.trials, search.blocks),
    )


def most_departure(config: Config) -> float:
    """Most relative departure of an order from the mean that keeps every limit on unevenness.

    A departure of at most u keeps a uniformity error and an rms error of u and a hottest order of
    1 + u, so that one number steers the search to all three.
    """
    evenness = [
        one.value - 1 if name == "hottest_to_mean" else one.value
        for name, one in config.limits.items()
        if name in UNEVENNESS and one.sense == "<="
    ]
    return max(min(evenness, default=USUAL_UNIFORMITY), LEAST_DEPARTURE)


def refine(setup: Setup, phase: Float[np.ndarray, "y x"], hooks: Hooks) -> Refined:
    """Levels settled from a design phase [rad], keeping the mask rule."""
    rows = np.zeros((setup.blocks, 2))
    state, block = first_state(setup, phase), 0
    if hooks.saved is not None:
        facts, arrays = hooks.saved
        block, rows, state = int(facts["block"]), arrays[0], State(*arrays[1:])
    while block < setup.blocks:
        if hooks.stop():
            hooks.save(*packed(block, rows, state))
            return refined(state, rows, block, stopped=True)
        state = next_state(setup, state, block)
        rows[block] = state.best_scores()
        block += 1
        hooks.report("settling the levels", block / setup.blocks, *map(float, rows[block - 1]))
        if hooks.save_is_due():
            hooks.save(*packed(block, rows, state))
    return refined(state, rows, block, stopped=False)


def packed(
    block: int, rows: Float[np.ndarray, "row 2"], state: State
) -> tuple[dict[str, Any], list[NDArray[Any]]]:
    """The stage as facts and arrays for a checkpoint."""
    return {"block": block}, [rows, *state]


def refined(
    state: State, rows: Float[np.ndarray, "row 2"], block: int, *, stopped: bool
) -> Refined:
    """What the search has found."""
    seen = rows[:block]
    numbers = np.arange(1, block + 1)
    return Refined(settled(state), numbers, seen[:, 0], seen[:, 1], stopped)
