"""One design on its way: checkpoints, stopping, progress, and the record it leaves."""

import json
import signal
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from types import FrameType
from typing import TYPE_CHECKING, Any

import click

from doe import files
from doe.cli.common import Clock
from doe.errors import Fault, FileError, NumericalError

if TYPE_CHECKING:
    from doe.config.schema import Config
    from doe.result import Result

Job = tuple["Config", str]  # a config and its text as given

CHECKPOINT_SECONDS = 10.0
PROGRESS_SECONDS = 5.0
RECORD = "record.h5"
STOPPED = "stopped.h5"  # best so far of a run that was stopped; gone once the run is finished
TRACE = "trace.jsonl"


class Stop:
    """Whether a signal asked the run to stop, and which."""

    def __init__(self) -> None:
        self.signal = 0

    def __call__(self, number: int, frame: FrameType | None) -> None:
        """Note the signal; the run stops between two chunks."""
        self.signal = number


@contextmanager
def stoppable() -> Iterator[Stop]:
    """Turn Ctrl-C and a polite kill into a request to stop with everything saved."""
    stop = Stop()
    before = {number: signal.signal(number, stop) for number in (signal.SIGINT, signal.SIGTERM)}
    try:
        yield stop
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)


def design_into(
    folder: Path,
    job: Job,
    method: str,
    *,
    resume: bool,
    quiet: bool,
    as_published: bool = False,
) -> "Result":
    """Design by one method into a locked folder and leave record and trace there.

    With `resume`, goes on from the folder's checkpoint where there is one. Exits 130 or 143 when
    stopped, with checkpoint and best design so far saved.
    """
    from doe import pipeline
    from doe.solvers.hooks import Hooks
    from doe.store import checkpoint, write

    config, text = job
    clock, progress = Clock(CHECKPOINT_SECONDS), Clock(PROGRESS_SECONDS)
    facts = checkpoint_facts(config, method, as_published=as_published)
    if not resume:
        refuse_stopped(folder)
    saved = load_checkpoint(folder, facts) if resume else None
    turn = saved[0]["turn"] + 1 if saved else 0

    def save(where: dict[str, Any], arrays: list[Any]) -> None:
        nonlocal turn
        checkpoint.write(folder, turn, facts | where, arrays)
        turn += 1

    def report(stage: str, done: float, efficiency: float, uniformity: float) -> None:
        if not quiet and progress.is_due():
            line = f"{method}, {stage}: {done:4.0%}  efficiency {efficiency:.4f}"
            print(f"{line}  uniformity error {uniformity:.2%}", file=sys.stderr)

    with stoppable() as stop:
        hooks = Hooks(saved, save, clock.is_due, lambda: bool(stop.signal), report)
        try:
            result, stopped = pipeline.design(
                config, text, method, hooks, as_published=as_published
            )
        except NumericalError as error:
            if error.best is not None:
                write.write(folder / STOPPED, error.best)
            raise
    if stopped:
        write.write(folder / STOPPED, result)
        tell_stopped(folder)
        raise click.exceptions.Exit(128 + stop.signal)
    files.write(folder / TRACE, trace_lines(result))
    write.write(folder / RECORD, result)
    (folder / STOPPED).unlink(missing_ok=True)
    checkpoint.remove(folder)
    return result


def refuse_stopped(folder: Path) -> None:
    """Refuse to begin anew where a stopped run waits to be gone on with."""
    from doe.store import checkpoint

    for name in (*checkpoint.NAMES, STOPPED):
        files.refuse_existing(folder / name, "give --resume to go on with it, or another --out")


def finished(record: Path, facts: dict[str, Any]) -> "Result":
    """The record of a finished run. Error: FileError where it is another job's."""
    from doe.store import read

    result = read.read(record)
    same = result.made_by["config_digest"] == facts["config_digest"]
    if not same or result.method != facts["method"]:
        raise another_job(record)
    return result


def checkpoint_facts(
    config: "Config", method: str, *, as_published: bool = False
) -> dict[str, Any]:
    """What a checkpoint must agree with before a run goes on from it."""
    from doe.config import load

    return {"config_digest": load.digest(config), "method": method, "as_published": as_published}


def load_checkpoint(folder: Path, facts: dict[str, Any]) -> Any:
    """The newest checkpoint of this job. Error: FileError where it belongs to another config."""
    from doe.store import checkpoint

    saved = checkpoint.read(folder)
    if saved and {name: saved[0].get(name) for name in facts} != facts:
        raise another_job(folder)
    return saved


def another_job(place: Path) -> FileError:
    """The error of a checkpoint or record that another config, seed or method made."""
    return FileError(
        Fault(
            "what is here belongs to another config, seed or method",
            "the job the run was started with",
            "put the config back, or run without --resume into another --out",
            file=str(place),
        )
    )


def tell_stopped(folder: Path) -> None:
    """Say what is saved and how to go on."""
    print(
        f"stopped: the best design so far is in {folder / STOPPED}; "
        f"the same command with --resume goes on from here",
        file=sys.stderr,
    )


def trace_lines(result: "Result") -> bytes:
    """The trace, one JSON object a line."""
    trace = result.trace
    lines = [
        {
            "step": int(trace.step[i]),
            "loss": float(trace.loss[i]),
            "efficiency": float(trace.efficiency[i]),
            "uniformity_error": float(trace.uniformity_error[i]),
        }
        for i in range(len(trace.step))
    ]
    return "".join(json.dumps(line) + "\n" for line in lines).encode()
