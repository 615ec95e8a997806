"""What every method must keep; a method that joins METHODS is tested here without an edit."""

from functools import cache

import jax
import jax.numpy as jnp
import numpy as np
import pytest
from helpers import job

from doe.config.load import load
from doe.problem import Problem, problem_of
from doe.solvers import METHODS
from doe.solvers.driver import Found, plan_of, solve
from doe.solvers.hooks import Hooks
from doe.solvers.method import Method, Tick
from doe.solvers.start import first_phase, random_orders

QUIET = Hooks(None, lambda *_: None, lambda: False, lambda: False, lambda *_: None)
STEPS, STARTS = 30, 2

every_method = pytest.mark.parametrize("options", METHODS, ids=lambda kind: kind.__name__)


def problem(**changes: object) -> Problem:
    """Nine spots from a cell of 16 x 16 pixels, with changes."""
    return problem_of(load(job(**({"element__pixels": 16} | changes)))[0])


@cache
def method_of(options: type) -> Method:
    """A method with its default options; made once, so that it is compiled once."""
    return METHODS[options](options())


def solved(options: type, task: Problem, seed: int = 1) -> Found:
    """What a method with its default options finds."""
    method = method_of(options)
    key = jax.random.key(seed)
    starts = random_orders(task, key, STARTS)
    return solve(task, method, plan_of(task, STARTS, STEPS), starts, key, QUIET)


@every_method
def test_the_same_seed_gives_the_same_bits_and_another_seed_another_design(options):
    task = problem()
    one, again, other = solved(options, task), solved(options, task), solved(options, task, seed=2)
    assert one.phase.tobytes() == again.phase.tobytes()
    for first, second in zip(one.trace, again.trace, strict=True):
        assert first.tobytes() == second.tobytes()
    assert one.phase.tobytes() != other.phase.tobytes()


@every_method
@pytest.mark.parametrize(
    "changes",
    [
        {},
        {"element__levels": 0, "element__pixels": [1, 64], "target__shape": [1, 4]},
        {
            "element__levels": 2,
            "element__period": ["0.6 mm", "0.7 mm"],
            "target": {"kind": "orders", "orders": [[0, 1], [3, -2], [5, 5]], "weights": [1, 2, 3]},
        },
    ],
    ids=["square", "continuous line", "two levels and weights"],
)
def test_the_design_is_finite_and_of_the_cells_shape(options, changes):
    task = problem(**changes)
    found = solved(options, task)
    rows, columns = changes.get("element__pixels", [16, 16])
    assert found.phase.shape == task.shape == (rows, columns)
    assert np.isfinite(found.phase).all()
    assert not found.stopped
    assert 0 <= found.start < STARTS
    assert 0 <= found.step <= STEPS
    assert np.isfinite(found.trace.loss).all()
    assert ((found.trace.efficiency > 0) & (found.trace.efficiency <= 1 + 1e-5)).all()


@every_method
def test_the_result_is_at_least_as_good_as_every_start(options):
    task = problem()
    method = method_of(options)
    starts = random_orders(task, jax.random.key(1), STARTS)

    @jax.jit
    def merit(task: Problem, orders: jax.Array) -> jax.Array:
        return task.judge(method.design(method.init(task, first_phase(task, orders)))).merit

    best = max(float(merit(task, orders)) for orders in starts)
    # The same sums in another compilation differ by round-off of float32.
    assert float(task.judge(jnp.asarray(solved(options, task).phase)).merit) >= best - 1e-5


@every_method
def test_a_step_keeps_the_pytree_of_arrays_and_depends_on_nothing_hidden(options):
    """A checkpoint is the leaves of the state, and resuming relies on equal bits."""
    task = problem()
    method = method_of(options)
    step = jax.jit(method.step)
    state = method.init(task, jax.random.uniform(jax.random.key(3), task.shape))
    tick = Tick(jnp.int32(5), jnp.float32(0.4), jax.random.key(4))
    later, again = step(task, state, tick), step(task, state, tick)
    assert jax.tree.structure(later) == jax.tree.structure(state)
    leaves = (jax.tree.leaves(tree) for tree in (state, later, again))
    for before, after, same in zip(*leaves, strict=True):
        assert isinstance(before, jax.Array)
        assert (after.shape, after.dtype) == (before.shape, before.dtype)
        assert np.asarray(after).tobytes() == np.asarray(same).tobytes()


@every_method
def test_the_trace_shows_what_the_drawn_design_does(options):
    """The last look of the winner, scored again by itself, where the winner was seen last."""
    task = problem(solver__steps=STEPS)
    found = solved(options, task)
    looks = found.trace.efficiency[found.start]
    assert looks.shape == (3,)
    if found.step:
        seen = looks[found.step // 10 - 1]
        again = task.judge(jnp.asarray(found.phase)).scores.efficiency
        assert float(seen) == pytest.approx(float(again), rel=1e-5)


@every_method
def test_every_method_has_a_name_in_the_config(options):
    config, _ = load(job())
    from doe.config.solver import method_names

    kinds = [type(config.solver.options(name)) for name in method_names()]
    assert options in kinds
