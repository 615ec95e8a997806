"""Options and printing that the commands share."""

import json
import sys
import time
from collections.abc import Callable, Iterator
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

if TYPE_CHECKING:
    from doe.result import LimitVerdict, Result

Command = Callable[..., Any]
CONFIG = click.Path(path_type=Path)
SHOWN_POWER = 1e-4  # orders with less are left out of the JSON, not of the record


def output_options(command: Command) -> Command:
    """`--json`, `--quiet` and `--no-color`, on every command."""
    for option in (
        click.option("--no-color", is_flag=True, help="Print without colours."),
        click.option("--quiet", is_flag=True, help="No progress messages."),
        click.option("--json", "as_json", is_flag=True, help="One JSON object on stdout."),
    ):
        command = option(command)
    return command


def default_out(config: Path) -> Path:
    """The folder beside a config, named after it."""
    return config.with_suffix("")


def print_json(data: dict[str, Any]) -> None:
    """One JSON object on stdout; what is not finite would be a fault of the program."""
    print(json.dumps(data, allow_nan=False))


def table(title: str, columns: list[str], rows: list[list[str]], *, no_color: bool) -> None:
    """A table on stdout."""
    from rich.box import SIMPLE_HEAD
    from rich.markup import escape
    from rich.table import Table

    grid = Table(title=escape(title), box=SIMPLE_HEAD, title_justify="left", pad_edge=False)
    for number, column in enumerate(columns):
        grid.add_column(column, justify="left" if number == 0 else "right")
    for row in rows:
        grid.add_row(*row)
    say(grid, no_color=no_color)


def say(content: Any, *, no_color: bool) -> None:
    """Text with marks, or a table, on stdout; as wide as a page where stdout is no terminal."""
    from rich.console import Console

    width = None if sys.stdout.isatty() else 100
    screen = Console(no_color=no_color or None, width=width, highlight=False, soft_wrap=True)
    # Written by ourselves: the library ends the process by its own rules when a reader has gone.
    with screen.capture() as captured:
        screen.print(content)
    sys.stdout.write(captured.get())


def verdict_word(met: bool | None) -> str:
    """How a limit came out, in a word that needs no colour to be read."""
    words = {True: "[green]met[/]", False: "[red]MISSED[/]", None: "[dim]for the forecast[/]"}
    return words[met]


def readable(name: str, value: float | None) -> str:
    """A score as text: shares in per cent, ratios as they are, positions as lengths."""
    from doe import units

    if value is None:
        return "-"
    if name.endswith("_to_mean"):
        return f"{value:.3f}"
    if name == "position_error":
        return units.length(value) if value else "0"
    return units.percent(value, 3)


def readable_limit(verdict: "LimitVerdict") -> str:
    """A limit as the user would write it."""
    sense, number = verdict.limit.split()
    return f"{sense} {readable(verdict.name.removeprefix('made.'), float(number))}"


def result_json(result: "Result", record: Path | None) -> dict[str, Any]:
    """The JSON of `run` and `evaluate`."""
    orders = result.orders
    shown = (orders.power > SHOWN_POWER) | (orders.target > 0)
    return {
        "status": result.status,
        "record": str(record) if record else None,
        "seconds": result.seconds,
        "seed": result.config.run.seed,
        "method": result.method,
        "warnings": list(result.warnings),
        "limits": [vars(limit) for limit in result.limits],
        "scores": result.scores,
        "bound": vars(result.bound) | {"fraction_reached": fraction_reached(result)},
        "features": [vars(report) for report in result.features],
        "orders": [
            {
                "m_y": int(orders.m_y[row]),
                "m_x": int(orders.m_x[column]),
                "power": float(orders.power[row, column]),
                "target": float(orders.target[row, column]) or None,
            }
            for row, column in zip(*shown.nonzero(), strict=True)
        ],
    }


def fraction_reached(result: "Result") -> float | None:
    """Efficiency over the bound at continuous phase."""
    efficiency = result.scores["efficiency"]
    return None if efficiency is None else efficiency / result.bound.efficiency


def print_result(result: "Result", *, no_color: bool) -> None:
    """Verdict, scores, mask and warnings of one design for a tired reader."""
    from rich.markup import escape

    rows = [
        [v.name, readable_limit(v), readable(v.name, v.value), verdict_word(v.met)]
        for v in result.limits
    ]
    if rows:
        title = f"{result.config.title}: limits"
        table(title, ["limit", "asked", "drawn mask", "verdict"], rows, no_color=no_color)
    rows = [[name, readable(name, value)] for name, value in result.scores.items()]
    table("all scores of the drawn mask", ["score", "value"], rows, no_color=no_color)
    bound, reached = result.bound, fraction_reached(result)
    tell = partial(say, no_color=no_color)
    tell(
        f"bound at continuous phase ({bound.kind}): {bound.efficiency:.4f}, of which "
        f"{reached:.1%} is reached; {result.config.element.levels or 'continuous'} levels "
        f"usually leave {bound.levels_factor:.3f}"
    )
    for line in layer_lines(result):
        tell(line)
    for text in result.warnings:
        tell(f"[yellow]note[/]: {escape(text)}")


def layer_lines(result: "Result") -> Iterator[str]:
    """Depth, rule and edges of each mask layer."""
    from doe import units
    from doe.config import derived

    depths = derived.layer_depths(result.config)
    for number, (depth, found) in enumerate(zip(depths, result.features, strict=False), start=1):
        yield (
            f"mask {number}: etch {depth / units.NANO:.1f} nm; rule of {pair(found.rule)} pixels "
            f"for features and {pair(found.gap_rule)} for gaps: {found.breaches} breaches, "
            f"{found.corner_contacts} corner contacts, {found.edge_length} edges"
        )


def pair(sizes: tuple[int, int]) -> str:
    """A pair (y, x) in words."""
    return f"{sizes[0]} x {sizes[1]}"


class Clock:
    """Tells when a time has passed since it last told so."""

    def __init__(self, seconds: float) -> None:
        self.seconds, self.last = seconds, time.monotonic()

    def is_due(self) -> bool:
        """True once every `seconds`."""
        if time.monotonic() - self.last < self.seconds:
            return False
        self.last = time.monotonic()
        return True
