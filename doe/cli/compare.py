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

    All get the same levels and mask rule, number of starts and steps. Leaves one record a method in
    OUT/METHOD, comparison.csv and comparison.png. The exit status is that of the best record.
    """
    from doe import files
    from doe.config.load import load
    from doe.report.comparison import draw

    job, text = load(config)
    folder = out or default_out(config)
    with files.output_folder(folder):
        if not resume:
            files.refuse_existing(folder / "comparison.csv", "give --resume, or another --out")
        results = [
            one_method(folder / method, job, text, method, resume=resume, quiet=quiet)
            for method in job.solver.methods
        ]
        rows = [row_of(result) for result in results]
        files.write(folder / "comparison.csv", csv_of(rows))
        files.write(folder / "comparison.png", draw(results))
    best = max(results, key=rank)
    if as_json:
        print_json(
            {
                "status": best.status,
                "warnings": list(best.warnings),
                "limits": [vars(limit) for limit in best.limits],
                "methods": rows,
                "record": str(folder / best.method / "record.h5"),
            }
        )
    else:
        show(rows, job.title, no_color=no_color)
        print(f"best: {best.method} ({best.status}); records in {folder}")
    return int(best.status == "missed")


def one_method(
    folder: Path, job: Any, text: str, method: str, *, resume: bool, quiet: bool
) -> "Result":
    """The record of one method, designed unless it is there already."""
    from doe import files
    from doe.cli.session import RECORD, design_into
    from doe.store import read

    with files.output_folder(folder):
        record = folder / RECORD
        if resume and record.exists():
            return read.read(record)
        files.refuse_existing(record, "give --resume, or another --out")
        return design_into(folder, job, text, method, resume=resume, quiet=quiet)


def rank(result: "Result") -> tuple[bool, float, float]:
    """Order of merit: limits met, then their misses, then efficiency."""
    missed = [
        limit.value is not None and not limit.met
        for limit in result.limits
        if limit.met is not None
    ]
    return (result.status == "met", -float(sum(missed)), result.scores["efficiency"] or 0.0)


def row_of(result: "Result") -> dict[str, Any]:
    """One line of the comparison."""
    return {
        "name": result.method,
        "refined": False,
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
            f"{row['efficiency']:.2%}",
            f"{row['uniformity_error']:.2%}",
            f"{row['seconds']:.1f} s",
            str(row["steps"]),
        ]
        for row in rows
    ]
    columns = ["method", "efficiency", "uniformity error", "time", "steps"]
    table(f"{title}: drawn masks as each method leaves them", columns, lines, no_color=no_color)
