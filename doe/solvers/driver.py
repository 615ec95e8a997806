"""The one loop of all methods: starts, chunks, best so far, trace, checkpoints and stopping."""

from collections.abc import Callable
from functools import partial
from typing import Any, NamedTuple

import jax
import jax.numpy as jnp
import numpy as np
from jaxtyping import Array, Float, Int, PRNGKeyArray

from doe.errors import Fault, NumericalError
from doe.problem import Problem
from doe.solvers.method import Method, State, Tick

STRIDE = 10  # steps from one look at the drawn design to the next
LOOKS = 5  # looks in one compiled chunk; between chunks a run can be saved and stopped
PIXELS_AT_ONCE = 2**22  # starts run together up to this many pixels


class Best(NamedTuple):
    """Best makeable design of a start so far."""

    merit: Float[Array, " start"]
    phase: Float[Array, "start y x"]
    step: Int[Array, " start"]


class Look(NamedTuple):
    """What is seen of the drawn design: numbers at one look, arrays of starts and looks."""

    loss: Any
    efficiency: Any
    uniformity_error: Any


class Carry(NamedTuple):
    """All that a batch of starts needs to go on."""

    state: State
    best: Best


class Found(NamedTuple):
    """The best design over all starts, and what was seen on the way (rows: start, look)."""

    phase: Float[np.ndarray, "y x"]
    start: int
    step: int
    trace: Look
    stopped: bool


class Hooks(NamedTuple):
    """What the driver asks of its caller, who alone touches files and the screen."""

    saved: tuple[dict[str, Any], list[np.ndarray[Any, Any]]] | None
    save: Callable[[dict[str, Any], list[np.ndarray[Any, Any]]], None]
    save_is_due: Callable[[], bool]
    stop: Callable[[], bool]
    report: Callable[[int, float, float], None]  # steps done of all, efficiency, uniformity error


class Run(NamedTuple):
    """Where a whole run stands: what a checkpoint holds."""

    batch: int
    look: int
    leader_merit: np.ndarray[Any, Any]
    leader_phase: np.ndarray[Any, Any]
    leader_place: np.ndarray[Any, Any]  # start, step
    trace: Look
    carry: Carry


class Plan(NamedTuple):
    """Starts in batches, and looks in chunks."""

    starts: int
    steps: int
    batch: int  # starts run together
    looks: int  # looks at each start

    @property
    def batches(self) -> int:
        """Number of batches."""
        return -(-self.starts // self.batch)

    def keys(self, key: PRNGKeyArray, batch: int) -> PRNGKeyArray:
        """One key for each start of a batch, whatever the size of the batch."""
        numbers = jnp.arange(batch * self.batch, min((batch + 1) * self.batch, self.starts))
        keys: PRNGKeyArray = jax.vmap(partial(jax.random.fold_in, key))(numbers)
        return keys


def plan_of(problem: Problem, starts: int, steps: int) -> Plan:
    """How starts and steps are cut up; the cut depends on the job alone."""
    together = max(1, PIXELS_AT_ONCE // (problem.shape[0] * problem.shape[1]))
    return Plan(starts, steps, min(starts, together), -(-steps // STRIDE))


def solve(problem: Problem, method: Method, plan: Plan, key: PRNGKeyArray, hooks: Hooks) -> Found:
    """The best makeable design of all starts by the problem's merit.

    Error: NumericalError where a loss stops being finite; what was best till then is saved.
    """
    run = resumed(problem, method, plan, key, hooks)
    while True:
        keys = plan.keys(key, run.batch)
        while run.look < plan.looks:
            if hooks.stop():
                hooks.save(*packed(run))
                return found(lead(run, plan), stopped=True)
            run = advanced(problem, method, plan, keys, run)
            finite_or_stop(run, hooks)
            tell(run, plan, hooks)
            if hooks.save_is_due():
                hooks.save(*packed(run))
        run = lead(run, plan)
        if run.batch + 1 == plan.batches:
            return found(run, stopped=False)
        next_keys = plan.keys(key, run.batch + 1)
        run = run._replace(
            batch=run.batch + 1, look=0, carry=begin(problem, next_keys, method=method)
        )


def resumed(problem: Problem, method: Method, plan: Plan, key: PRNGKeyArray, hooks: Hooks) -> Run:
    """The run a checkpoint holds, or a fresh one."""
    batch = int(hooks.saved[0]["batch"]) if hooks.saved else 0
    fresh = Run(
        batch=batch,
        look=0,
        leader_merit=np.array(-np.inf, np.float32),
        leader_phase=np.zeros(problem.shape, np.float32),
        leader_place=np.zeros(2, np.int64),
        trace=Look(*(np.zeros((plan.starts, plan.looks), np.float32) for _ in Look._fields)),
        carry=begin(problem, plan.keys(key, batch), method=method),
    )
    if hooks.saved is None:
        return fresh
    _, arrays = hooks.saved
    leaves, shape = jax.tree.flatten(fresh)
    kept = [
        type(leaf)(array) if isinstance(leaf, int) else array
        for leaf, array in zip(leaves, arrays, strict=True)
    ]
    run: Run = jax.tree.unflatten(shape, kept)
    return run


def packed(run: Run) -> tuple[dict[str, Any], list[np.ndarray[Any, Any]]]:
    """A run as facts and arrays for a checkpoint."""
    return {"batch": run.batch, "look": run.look}, [np.asarray(x) for x in jax.tree.leaves(run)]


@partial(jax.jit, static_argnames="method")
def begin(problem: Problem, keys: PRNGKeyArray, *, method: Method) -> Carry:
    """First states of a batch, the starts themselves counting as designs."""

    def one(key: PRNGKeyArray) -> Carry:
        state = method.init(problem, method.start(problem, key))
        phase = method.design(state)
        judged = problem.judge(phase)
        return Carry(state, Best(judged.merit, phase, jnp.int32(0)))

    carry: Carry = jax.lax.map(one, keys)
    return carry


@partial(jax.jit, static_argnames=("method", "steps", "looks"), donate_argnames="carry")
def advance(
    problem: Problem,
    carry: Carry,
    keys: PRNGKeyArray,
    first: Int[Array, ""],
    *,
    method: Method,
    steps: int,
    looks: int,
) -> tuple[Carry, Look]:
    """A batch of starts moved on by `looks` looks from look number `first`."""

    def one(carry: Carry, key: PRNGKeyArray) -> tuple[Carry, Look]:
        return jax.lax.scan(partial(look, key), carry, first + jnp.arange(looks))

    def look(key: PRNGKeyArray, carry: Carry, number: Int[Array, ""]) -> tuple[Carry, Look]:
        def step(index: Int[Array, ""], state: State) -> State:
            tick = Tick(index, index / steps, jax.random.fold_in(key, index))
            return method.step(problem, state, tick)

        end = jnp.minimum((number + 1) * STRIDE, steps)
        state = jax.lax.fori_loop(number * STRIDE, end, step, carry.state)
        phase = method.design(state)
        judged = problem.judge(phase)
        better = judged.merit > carry.best.merit
        best = jax.tree.map(partial(jnp.where, better), Best(judged.merit, phase, end), carry.best)
        loss = problem.loss(problem.drawn(phase), jnp.float32(1))
        seen = Look(loss, judged.scores.efficiency, judged.scores.uniformity_error)
        return Carry(state, best), seen

    return jax.vmap(one)(carry, keys)


def advanced(problem: Problem, method: Method, plan: Plan, keys: PRNGKeyArray, run: Run) -> Run:
    """The run after one more chunk."""
    looks = min(LOOKS, plan.looks - run.look)
    carry, seen = advance(
        problem, run.carry, keys, jnp.int32(run.look), method=method, steps=plan.steps, looks=looks
    )
    rows = slice(run.batch * plan.batch, run.batch * plan.batch + len(keys))
    columns = slice(run.look, run.look + looks)
    for kept, new in zip(run.trace, seen, strict=True):
        kept[rows, columns] = np.asarray(new)
    return run._replace(look=run.look + looks, carry=carry)


def lead(run: Run, plan: Plan) -> Run:
    """The run with its leader brought up to date from the batch at hand."""
    best = run.carry.best
    winner = int(np.argmax(best.merit))
    if not float(best.merit[winner]) > float(run.leader_merit):
        return run
    return run._replace(
        leader_merit=np.asarray(best.merit[winner]),
        leader_phase=np.asarray(best.phase[winner]),
        leader_place=np.array([run.batch * plan.batch + winner, int(best.step[winner])]),
    )


def found(run: Run, *, stopped: bool) -> Found:
    """What a run has found."""
    start, step = (int(number) for number in run.leader_place)
    return Found(run.leader_phase, start, step, run.trace, stopped)


def finite_or_stop(run: Run, hooks: Hooks) -> None:
    """Raise where a loss is no longer finite, after saving what was best till then."""
    last = run.trace.loss[:, : run.look]
    if np.all(np.isfinite(last)):
        return
    step = int(np.argmax(~np.isfinite(last).all(axis=0)) + 1) * STRIDE
    hooks.save(*packed(run))
    raise NumericalError(
        Fault(
            f"the loss stopped being finite by step {step}; the best design till then is saved",
            "a finite loss",
            "a smaller learning_rate",
            key="solver",
        )
    )


def tell(run: Run, plan: Plan, hooks: Hooks) -> None:
    """Report the steps done and the best efficiency and uniformity error of this look."""
    rows = slice(run.batch * plan.batch, min((run.batch + 1) * plan.batch, plan.starts))
    loss = run.trace.loss[rows, run.look - 1]
    winner = rows.start + int(np.argmin(loss))
    done = rows.start * plan.steps + min(run.look * STRIDE, plan.steps) * (rows.stop - rows.start)
    hooks.report(
        done,
        float(run.trace.efficiency[winner, run.look - 1]),
        float(run.trace.uniformity_error[winner, run.look - 1]),
    )
