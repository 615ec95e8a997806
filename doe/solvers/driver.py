"""The one loop of all methods: starts, chunks, best so far, trace, checkpoints and stopping."""

from functools import partial
from typing import Any, NamedTuple

import jax
import jax.numpy as jnp
import numpy as np
from jaxtyping import Array, Complex, Float, Int, Key, PRNGKeyArray
from numpy.typing import NDArray

from doe.errors import Fault, FileError, NumericalError
from doe.problem import Problem
from doe.solvers.hooks import Hooks
from doe.solvers.method import Method, State, Tick
from doe.solvers.start import Starts, first_phase

STRIDE = 10  # steps from one look at the drawn design to the next
LOOKS = 5  # looks in one compiled chunk; between chunks a run can be saved and stopped
PIXELS_AT_ONCE = 2**22  # starts run together up to this many pixels


Keys = Key[Array, " start"]


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
    """The best design over all starts, and what was seen on the way (rows: start, look).

    Looks that were not taken are NaN.
    """

    phase: Float[np.ndarray, "y x"]
    start: int
    step: int
    trace: Look
    stopped: bool


class Run(NamedTuple):
    """Where a whole run stands: what a checkpoint holds."""

    batch: int
    look: int
    leader_merit: NDArray[Any]
    leader_phase: NDArray[Any]
    leader_place: NDArray[Any]  # start, step
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

    def rows(self, batch: int) -> slice:
        """The starts of a batch."""
        return slice(batch * self.batch, min((batch + 1) * self.batch, self.starts))

    def keys(self, key: PRNGKeyArray, batch: int) -> Keys:
        """One key for each start of a batch, whatever the size of the batch."""
        rows = self.rows(batch)
        numbers = jnp.arange(rows.start, rows.stop)
        keys: Keys = jax.vmap(partial(jax.random.fold_in, key))(numbers)
        return keys


def plan_of(problem: Problem, starts: int, steps: int) -> Plan:
    """How starts and steps are cut up; the cut depends on the job alone."""
    together = max(1, PIXELS_AT_ONCE // (problem.shape[0] * problem.shape[1]))
    return Plan(starts, steps, min(starts, together), -(-steps // STRIDE))


def solve(
    problem: Problem, method: Method, plan: Plan, starts: Starts, key: PRNGKeyArray, hooks: Hooks
) -> Found:
    """The best makeable design of all starts by the problem's merit.

    starts: amplitudes of the wanted orders, whose sum makes the first phase of each start.
    Error: NumericalError where a loss stops being finite; what was best till then is saved.
    """
    run = resumed(problem, method, plan, starts, hooks)
    while True:
        keys = plan.keys(key, run.batch)
        while run.look < plan.looks:
            if hooks.stop():
                hooks.save(*packed(run))
                return found(lead(run, plan), stopped=True)
            run = advanced(problem, method, plan, keys, run)
            finite_or_stop(run, plan, hooks)
            tell(run, plan, hooks)
            if hooks.save_is_due():
                hooks.save(*packed(run))
        run = lead(run, plan)
        if run.batch + 1 == plan.batches:
            return found(run, stopped=False)
        batch = run.batch + 1
        carry = begin(problem, starts[plan.rows(batch)], method=method)
        run = run._replace(batch=batch, look=0, carry=carry)


def resumed(problem: Problem, method: Method, plan: Plan, starts: Starts, hooks: Hooks) -> Run:
    """The run a checkpoint holds, or a fresh one."""
    batch = int(hooks.saved[0]["batch"]) if hooks.saved else 0
    fresh = Run(
        batch=batch,
        look=0,
        leader_merit=np.array(-np.inf, np.float32),
        leader_phase=np.zeros(problem.shape, np.float32),
        leader_place=np.zeros(2, np.int64),
        trace=Look(*(np.full((plan.starts, plan.looks), np.nan, np.float32) for _ in Look._fields)),
        carry=begin(problem, starts[plan.rows(batch)], method=method),
    )
    if hooks.saved is None:
        return fresh
    _, arrays = hooks.saved
    leaves, shape = jax.tree.flatten(fresh)
    if [np.shape(leaf) for leaf in leaves] != [array.shape for array in arrays]:
        raise FileError(
            Fault(
                "the checkpoint holds other arrays than this version of the method",
                "a checkpoint of this version",
                "run without --resume into another --out",
            )
        )
    kept = [
        type(leaf)(array) if isinstance(leaf, int) else array
        for leaf, array in zip(leaves, arrays, strict=True)
    ]
    run: Run = jax.tree.unflatten(shape, kept)
    return run


def packed(run: Run) -> tuple[dict[str, Any], list[NDArray[Any]]]:
    """A run as facts and arrays for a checkpoint."""
    return {"batch": run.batch, "look": run.look}, [np.asarray(x) for x in jax.tree.leaves(run)]


@partial(jax.jit, static_argnames="method")
def begin(problem: Problem, starts: Starts, *, method: Method) -> Carry:
    """First states of a batch, the starts themselves counting as designs."""

    def one(orders: Complex[Array, "order_y order_x"]) -> Carry:
        state = method.init(problem, first_phase(problem, orders))
        phase = method.design(state)
        judged = problem.judge(phase)
        return Carry(state, Best(judged.merit, phase, jnp.int32(0)))

    carry: Carry = jax.lax.map(one, starts)
    return carry


@partial(jax.jit, static_argnames=("method", "steps", "looks"), donate_argnames="carry")
def advance(
    problem: Problem,
    carry: Carry,
    keys: Keys,
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


def advanced(problem: Problem, method: Method, plan: Plan, keys: Keys, run: Run) -> Run:
    """The run after one more chunk."""
    looks = min(LOOKS, plan.looks - run.look)
    carry, seen = advance(
        problem, run.carry, keys, jnp.int32(run.look), method=method, steps=plan.steps, looks=looks
    )
    rows = plan.rows(run.batch)
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


def finite_or_stop(run: Run, plan: Plan, hooks: Hooks) -> None:
    """Raise where a loss is no longer finite, with what was best till then."""
    seen = run.trace.loss[plan.rows(run.batch), : run.look]
    if np.all(np.isfinite(seen)):
        return
    step = int(np.argmax(~np.isfinite(seen).all(axis=0)) + 1) * STRIDE
    hooks.save(*packed(run))
    error = NumericalError(
        Fault(
            f"the loss stopped being finite by step {step}; the best design till then is saved",
            "a finite loss",
            "a smaller learning_rate",
            key="solver",
        )
    )
    error.best = found(lead(run, plan), stopped=True)
    raise error


def tell(run: Run, plan: Plan, hooks: Hooks) -> None:
    """Report the steps done and the best efficiency and uniformity error of this look."""
    rows = plan.rows(run.batch)
    loss = run.trace.loss[rows, run.look - 1]
    winner = rows.start + int(np.argmin(loss))
    part = run.look / plan.looks * (rows.stop - rows.start)
    hooks.report(
        "shaping the phase",
        (rows.start + part) / plan.starts,
        float(run.trace.efficiency[winner, run.look - 1]),
        float(run.trace.uniformity_error[winner, run.look - 1]),
    )
