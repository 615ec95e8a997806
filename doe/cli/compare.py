"""`doe compare`: every method of a job under the same rules, side by side."""

import csv
import io
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from doe.cli.common import CONFIG, default_out, output_options, print_json, table

if TYPE_CHECKING:
    from doe.result import Result

COLUMNS = ("name", "refined", "efficiency", "uniformity_error", "seconds", "steps")


@click.command(epilog="Example: doe compare configs/needle_mill.toml --out comparison")
@click.argument("config", type=CONFIG)
@click.option("--out", type=CONFIG, help="Output folder; default: beside the config, same name.")
@click.option("--resume", is_flag=True, help="Go on with a stopped comparison.")
@output_options
def compare(
    config: Path, out: Path | None, resume: bool, as_json: bool, quiet: bool, no_color: bool
) -> int:
    """Design the job in CONFIG by every method it lists.

    All get the same levels, mask rule, number of starts and steps. Each method is shown twice: as
    published, from its own random starts and without the exact search; and refined, from the shared
    starts and with it. Leaves records in OUT/METHOD (refined) and OUT/METHOD-as-published,
    comparison.csv and comparison.png. The exit status is that of the best record.
    """
    from doe import files
    from doe.config.load import check_designable, load
    from doe.report.comparison import draw

    job, text = load(config)
    check_designable(job, config)
    folder = out or default_out(config)
    with files.output_folder(folder):
        if not resume:
            files.refuse_existing(folder / "comparison.csv", "give --resume, or another --out")
        ways = [False, True] if job.solver.refine else [False]
        results = {
            (method, refined): one_method(
                folder, (job, text), method, refined=refined, resume=resume, quiet=quiet
            )
            for refined in ways
            for method in job.solver.methods
        }
        rows = [row_of(result, refined) for (_, refined), result in results.items()]
        files.write(folder / "comparison.csv", csv_of(rows))
        files.write(folder / "comparison.png", draw(results))
    leader = max(results, key=lambda way: rank(results[way]))
    best, place = results[leader], folder_of(folder, *leader)
    if as_json:
        print_json(
            {
                "status": best.status,
                "warnings": list(best.warnings),
                "limits": [vars(limit) for limit in best.limits],
                "methods": rows,
                "record": str(place / "record.h5"),
            }
        )
    else:
        show(rows, job.title, no_color=no_color)
        print(f"best: {place / 'record.h5'} ({best.status})")
    return int(best.status == "missed")


def folder_of(folder: Path, method: str, refined: bool) -> Path:
    """Where the record of a method lies."""
    return folder / (method if refined else f"{method}-as-published")


def one_method(
    folder: Path, job: Any, method: str, *, refined: bool, resume: bool, quiet: bool
) -> "Result":
    """The record of one method, designed unless it is there already."""
    from doe import files
    from doe.cli.session import RECORD, checkpoint_facts, design_into, finished

    with files.output_folder(folder_of(folder, method, refined)) as place:
        record = place / RECORD
        if resume and record.exists():
            return finished(record, checkpoint_facts(job[0], method))
        files.refuse_existing(record, "give --resume, or another --out")
        return design_into(place, job, method, resume=resume, quiet=quiet, as_published=not refined)


def rank(result: "Result") -> tuple[bool, float, float]:
    """Order of merit: limits met, then their misses, then efficiency."""
    missed = [
        limit.value is not None and not limit.met
        for limit in result.limits
        if limit.met is not None
    ]
    return (result.status == "met", -float(sum(missed)), result.scores["efficiency"] or 0.0)


def row_of(result: "Result", refined: bool) -> dict[str, Any]:
    """One line of the comparison."""
    return {
        "name": result.method,
        "refined": refined,
        "efficiency": result.scores["efficiency"],
        "uniformity_error": result.scores["uniformity_error"],
        "seconds": result.seconds,
        "steps": result.steps,
    }


def csv_of(rows: list[dict[str, Any]]) -> bytes:
    """The comparison as CSV; fractions, seconds with their unit in the head."""
    text = io.StringIO()
    writer = csv.DictWriter(text, COLUMNS)
    writer.writerow({name: "seconds_s" if name == "seconds" else name for name in COLUMNS})
    writer.writerows(rows)
    return text.getvalue().encode()


def show(rows: list[dict[str, Any]], title: str, *, no_color: bool) -> None:
    """The comparison as a table."""
    lines = [
        [
            row["name"],
            "refined" if row["refined"] else "as published",
            f"{row['efficiency']:.2%}",
            f"{row['uniformity_error']:.2%}",
            f"{row['seconds']:.1f} s",
            str(row["steps"]),
        ]
        for row in rows
    ]
    columns = ["method", "way", "efficiency", "uniformity error", "time", "steps"]
    table(f"{title}: the drawn masks", columns, lines, no_color=no_color)
