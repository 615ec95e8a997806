"""Config to Result: runs a method, scores what it found, and says how it was made."""

import time
from dataclasses import replace
from typing import Any

import jax
import jax.numpy as jnp
import numpy as np
from numpy.typing import NDArray

from doe import units
from doe.config.schema import Config
from doe.config.solver import Gradient
from doe.errors import NumericalError
from doe.metrics import before_search
from doe.problem import Problem, problem_of
from doe.result import Mask, Result, Trace
from doe.scoring import finish, mask_of_phase, relief
from doe.solvers import METHODS
from doe.solvers.driver import STRIDE, Found, Look, plan_of, solve
from doe.solvers.hooks import Hooks, Saved
from doe.solvers.refine import Refined, is_refined, refine, setup_of
from doe.solvers.start import random_orders, settled_starts


def design(
    config: Config, text: str, method: str, hooks: Hooks, *, as_published: bool = False
) -> tuple[Result, bool]:
    """The best design of one method, and whether it was stopped before its budget was spent.

    Two stages: the method shapes a phase from many starts, and the exact search settles its levels.
    text: the config as given. as_published: with the method's own starts and without the search.
    Error: NumericalError as the driver's.
    """
    begun = time.monotonic()
    problem = problem_of(config)
    is_searched = not as_published and is_refined(config, problem)
    if is_searched:
        problem = replace(problem, limits=before_search(problem.limits))
    saved_shape, saved_refine = saved_by_stage(hooks)
    if saved_refine is None:
        shaping = hooks._replace(saved=saved_shape)
        try:
            found = shape(config, problem, method, shaping, as_published=as_published)
        except NumericalError as error:
            mask = shaped_mask(error.best, problem, config)
            seconds = time.monotonic() - begun
            error.best = finish(
                config, text, method, mask, trace_of(error.best, config.solver.steps), seconds
            )
            raise
    else:
        found = unpacked(saved_refine[1])
    mask = shaped_mask(found, problem, config)
    trace, stopped = trace_of(found, config.solver.steps), found.stopped
    if is_searched and not stopped:
        settled = refine(
            setup_of(config, problem), found.phase, refine_hooks(hooks, found, saved_refine)
        )
        mask = replace(mask, **relief(settled.levels, config))
        trace, stopped = longer(trace, settled), settled.stopped
    result = finish(config, text, method, mask, trace, time.monotonic() - begun)
    if is_searched and result.status == "missed":
        result = replace(result, warnings=(nearest(result), *result.warnings))
    return result, stopped


def nearest(result: Result) -> str:
    """What a search that misses a limit came nearest to."""
    efficiency, error = (result.scores[name] or 0.0 for name in ("efficiency", "uniformity_error"))
    return (
        f"the search found no mask within the limits and the rule; the nearest has an efficiency "
        f"of {units.percent(efficiency)} and a uniformity error of {units.percent(error)}: relax "
        f"one, or use more levels, a finer process or more blocks"
    )


def shaped_mask(found: Found, problem: Problem, config: Config) -> Mask:
    """The relief drawn from a shaped phase, before the search."""
    return mask_of_phase(np.asarray(problem.on_blocks(jnp.asarray(found.phase))), config)


def shape(
    config: Config, problem: Problem, method: str, hooks: Hooks, *, as_published: bool
) -> Found:
    """The phase a method makes of its starts."""
    options = config.solver.options(method)
    solver = config.solver
    key = jax.random.key(config.run.seed)
    is_own = as_published and not isinstance(options, Gradient)
    if is_own or solver.start == "random":
        starts = random_orders(problem, key, solver.starts)
    else:
        starts = settled_starts(problem, config.run.seed, solver.starts, solver.hops)
    plan = plan_of(problem, solver.starts, solver.steps)
    return solve(problem, METHODS[type(options)](options), plan, starts, key, hooks)


def saved_by_stage(hooks: Hooks) -> tuple[Saved | None, Saved | None]:
    """What a checkpoint holds for the shaping and for the search, at most one being there."""
    if hooks.saved is None:
        return None, None
    is_refine = hooks.saved[0].get("stage") == "refine"
    return (None, hooks.saved) if is_refine else (hooks.saved, None)


def refine_hooks(hooks: Hooks, found: Found, saved: Saved | None) -> Hooks:
    """Hooks of the search, whose checkpoints carry the shaped phase and its trace along."""
    mine = packed(found)

    def save(facts: dict[str, Any], arrays: list[NDArray[Any]]) -> None:
        hooks.save(facts | {"stage": "refine"}, [*mine, *arrays])

    rest = None if saved is None else (saved[0], saved[1][len(mine) :])
    return hooks._replace(saved=rest, save=save)


def packed(found: Found) -> list[NDArray[Any]]:
    """A finished shaping as arrays of a checkpoint."""
    return [found.phase, np.array([found.start, found.step]), *map(np.asarray, found.trace)]


def unpacked(arrays: list[NDArray[Any]]) -> Found:
    """The shaping a checkpoint holds."""
    phase, place, *trace = arrays[: 2 + len(Look._fields)]
    return Found(phase, int(place[0]), int(place[1]), Look(*trace), stopped=False)


def longer(trace: Trace, settled: Refined) -> Trace:
    """The trace with a row for each block of the search; its loss is the light lost."""
    last = int(trace.step[-1]) if len(trace.step) else 0
    return Trace(
        step=np.append(trace.step, last + settled.block),
        loss=np.append(trace.loss, 1 - settled.efficiency),
        efficiency=np.append(trace.efficiency, settled.efficiency),
        uniformity_error=np.append(trace.uniformity_error, settled.uniformity_error),
    )


def trace_of(found: Found, steps: int) -> Trace:
    """The trace of the start that won; looks that were not taken are left out."""
    rows = np.flatnonzero(np.isfinite(found.trace.loss[found.start]))
    return Trace(
        step=np.minimum((rows + 1) * STRIDE, steps),
        loss=found.trace.loss[found.start][rows],
        efficiency=found.trace.efficiency[found.start][rows],
        uniformity_error=found.trace.uniformity_error[found.start][rows],
    )
