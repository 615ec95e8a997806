"""The one loop of all methods: stopping, resuming, batches, and numbers that are not finite."""

import json
from collections.abc import Callable
from functools import cache
from pathlib import Path
from typing import Any

import jax
import jax.numpy as jnp
import numpy as np
import pytest
from helpers import call, job

from doe import solvers
from doe.config.load import load
from doe.errors import NumericalError
from doe.problem import Problem, problem_of
from doe.solvers import METHODS, driver
from doe.solvers.driver import Found, plan_of, solve
from doe.solvers.hooks import Hooks
from doe.solvers.method import Method
from doe.solvers.start import first_phase, random_orders

STARTS, STEPS = 3, 95  # 10 looks in two chunks, the last look after 5 steps

every_method = pytest.mark.parametrize("options", METHODS, ids=lambda kind: kind.__name__)


@cache
def method_of(options: type) -> Method:
    """A method with its default options; made once, so that it is compiled once."""
    return METHODS[options](options())


class Log:
    """What a driver asked of its caller."""

    def __init__(self, stop_after: int | None = None, save_after: int | None = None) -> None:
        self.stop_after, self.save_after = stop_after, save_after
        self.asked = 0
        self.saved: list[tuple[dict[str, Any], list[np.ndarray]]] = []
        self.told: list[tuple[float, float, float]] = []

    def hooks(self, saved: Any = None) -> Hooks:
        """Hooks that write here."""
        return Hooks(saved, self.save, self.save_is_due, self.stop, self.report)

    def save(self, facts: dict[str, Any], arrays: list[Any]) -> None:
        """Keep a copy, as a file would."""
        self.saved.append((dict(facts), [np.array(array) for array in arrays]))

    def save_is_due(self) -> bool:
        """After a stated number of chunks."""
        return self.save_after is not None and len(self.told) == self.save_after

    def stop(self) -> bool:
        """Whether the run has been asked to stop before this chunk."""
        self.asked += 1
        return self.stop_after is not None and self.asked > self.stop_after

    def report(self, stage: str, done: float, efficiency: float, uniformity: float) -> None:
        """Keep what was told."""
        self.told.append((done, efficiency, uniformity))


@pytest.fixture
def task() -> Problem:
    """Nine spots from a cell of 16 x 16 pixels."""
    return problem_of(load(job(element__pixels=16))[0])


def run(
    task: Problem, method: Method, log: Log, saved: Any = None, *, starts: int = STARTS
) -> Found:
    """The method's best design with seed 1."""
    key = jax.random.key(1)
    orders = random_orders(task, key, starts)
    return solve(task, method, plan_of(task, starts, STEPS), orders, key, log.hooks(saved))


def counting(spoil: Callable[[Any, Any], Any]) -> Method:
    """A method whose state counts its steps, and whose design `spoil` makes of the count."""

    def init(problem: Problem, phase: Any) -> Any:
        return jnp.zeros(problem.shape), jnp.int32(0)

    def step(problem: Problem, state: Any, tick: Any) -> Any:
        return state[0], state[1] + 1

    return Method(init, step, design=lambda state: spoil(*state))


def blaze(phase: Any, order: Any) -> Any:
    """A linear phase that sends all light into one order along x."""
    return phase + 2 * jnp.pi * order * jnp.arange(phase.shape[1])[None] / phase.shape[1]


@cache
def creeping() -> Method:
    """A method whose design turns a little with each step; made once, so compiled once."""
    return counting(lambda phase, count: blaze(phase, 0.01 * count))


def same(one: Found, other: Found) -> None:
    """Assert equal bits of design and trace."""
    assert one.phase.tobytes() == other.phase.tobytes()
    assert (one.start, one.step, one.stopped) == (other.start, other.step, other.stopped)
    for first, second in zip(one.trace, other.trace, strict=True):
        assert first.tobytes() == second.tobytes()


@every_method
def test_a_stopped_run_resumed_equals_the_uninterrupted_one(options, task):
    method = method_of(options)
    whole = run(task, method, Log())
    assert not whole.stopped
    for chunks in (0, 1):
        log = Log(stop_after=chunks)
        assert run(task, method, log).stopped
        assert len(log.saved) == 1
        same(run(task, method, Log(), saved=log.saved[0]), whole)


@every_method
def test_the_same_holds_for_starts_in_several_batches(options, task, monkeypatch):
    monkeypatch.setattr(driver, "PIXELS_AT_ONCE", STARTS * 16 * 16)
    twice = 2 * STARTS
    assert plan_of(task, twice, STEPS).batches == 2
    method = method_of(options)
    whole = run(task, method, Log(), starts=twice)
    for chunks in (1, 2, 3):  # two in each batch
        log = Log(stop_after=chunks)
        assert run(task, method, log, starts=twice).stopped
        same(run(task, method, Log(), saved=log.saved[0], starts=twice), whole)


def test_a_last_batch_with_fewer_starts_is_resumed_too(task, monkeypatch):
    monkeypatch.setattr(driver, "PIXELS_AT_ONCE", 2 * 16 * 16)
    assert plan_of(task, STARTS, STEPS).batches == 2
    method = creeping()
    whole = run(task, method, Log())
    for chunks in (1, 2, 3):
        log = Log(stop_after=chunks)
        run(task, method, log)
        same(run(task, method, Log(), saved=log.saved[0]), whole)


def test_a_resumed_run_may_be_stopped_and_resumed_again(task):
    (options, *_) = METHODS
    method = method_of(options)
    saved = None
    for _ in range(3):
        log = Log(stop_after=1)
        run(task, method, log, saved)
        saved = log.saved[-1] if log.saved else saved
    same(run(task, method, Log(), saved), run(task, method, Log()))


def test_a_checkpoint_on_the_way_serves_as_well_as_one_at_a_stop(task):
    """As after kill -9: the run went on, and what was saved last is all that is left."""
    (options, *_) = METHODS
    method = method_of(options)
    log = Log(save_after=1)
    whole = run(task, method, log)
    assert len(log.saved) == 1
    same(run(task, method, Log(), saved=log.saved[0]), whole)


def test_saving_changes_no_bit(task):
    (options, *_) = METHODS
    method = method_of(options)
    log = Log(save_after=1)
    same(run(task, method, log), run(task, method, Log()))
    assert len(log.saved) == 1


def test_a_checkpoint_survives_its_file(task):
    from doe.store import checkpoint

    (options, *_) = METHODS
    method = method_of(options)
    log = Log(stop_after=1)
    run(task, method, log)
    checkpoint.write(Path(), 0, *log.saved[0])
    same(run(task, method, Log(), saved=checkpoint.read(Path())), run(task, method, Log()))


def test_every_start_has_a_key_of_its_own_whatever_the_batches(task, monkeypatch):
    key = jax.random.key(9)
    together = jax.random.key_data(plan_of(task, 5, 10).keys(key, 0))
    assert len(np.unique(together, axis=0)) == 5
    monkeypatch.setattr(driver, "PIXELS_AT_ONCE", 2 * 16 * 16)
    plan = plan_of(task, 5, 10)
    parts = [jax.random.key_data(plan.keys(key, batch)) for batch in range(plan.batches)]
    np.testing.assert_array_equal(np.concatenate(parts), together)


def test_progress_runs_up_to_the_whole(task, monkeypatch):
    monkeypatch.setattr(driver, "PIXELS_AT_ONCE", 2 * 16 * 16)
    log = Log()
    run(task, creeping(), log)
    done = [told[0] for told in log.told]
    assert done == sorted(done)
    assert len(done) == 4
    assert done[-1] == 1
    assert all(0 < efficiency <= 1 for _, efficiency, _ in log.told)


def test_each_step_is_taken_once_and_looks_come_every_ten(task):
    """The state counts the steps; the look of step 10 k must see the count 10 k."""
    target = {"kind": "orders", "orders": [[0, 1]]}
    task = problem_of(load(job(element__pixels=16, element__levels=0, target=target))[0])
    method = counting(lambda phase, count: blaze(phase, jnp.where(count == 20, 1, 5)))
    found = run(task, method, Log())
    lit = found.trace.efficiency[0] > 0.5
    assert list(np.flatnonzero(lit)) == [1], "only the second look falls on step 20"
    assert found.step == 20
    counts = counting(lambda phase, count: blaze(phase, jnp.where(count == STEPS, 1, 5)))
    assert run(task, counts, Log()).step == STEPS


def test_a_loss_that_is_not_finite_stops_the_run_and_names_the_step(task):
    method = counting(lambda phase, count: jnp.where(count > 62, jnp.nan, 1.0) + phase)
    log = Log()
    with pytest.raises(NumericalError) as caught:
        run(task, method, log)
    assert caught.value.exit_code == 8
    assert "step 70" in str(caught.value)
    assert len(log.saved) == 1


def test_a_start_that_is_not_finite_is_told_too(task):
    method = counting(lambda phase, count: phase + jnp.nan)
    with pytest.raises(NumericalError, match="step 10"):
        run(task, method, Log())


def test_one_bad_start_among_many_is_told(task):
    def init(problem: Problem, phase: Any) -> Any:
        bad = jnp.allclose(phase, first_phase(problem, starts[2]), atol=1e-4)
        return jnp.where(bad, jnp.nan, 0.0) * jnp.ones(problem.shape), jnp.int32(0)

    starts = random_orders(task, jax.random.key(1), STARTS)
    method = counting(lambda phase, count: phase)._replace(init=init)
    with pytest.raises(NumericalError):
        run(task, method, Log())


def test_a_run_that_diverges_exits_with_8_and_keeps_its_best_design(monkeypatch, capsys):
    (options, *_) = METHODS
    bad = counting(lambda phase, count: jnp.where(count > 12, jnp.nan, 0.1) + phase)
    monkeypatch.setitem(solvers.METHODS, options, lambda given: bad)
    path = job(element__pixels=16, solver__methods=["gradient"])
    status, out, err = call(monkeypatch, capsys, "run", path, "--out", "out", "--json")
    assert status == 8, err
    told = json.loads(out)
    assert (told["status"], told["exit"]) == ("error", 8)
    assert "step 20" in told["errors"][0]["problem"]
    assert not Path("out/record.h5").exists()
    from doe.store import read

    kept = read.read(Path("out/stopped.h5"))
    assert np.isfinite(kept.mask.phase).all()
