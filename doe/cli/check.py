"""`doe check`: is the job well posed, and what is reachable."""

from pathlib import Path

import click

from doe.cli.common import CONFIG, output_options, print_json, say, table


@click.command(epilog="Example: doe check configs/needle_mill.toml")
@click.argument("config", type=CONFIG)
@output_options
def check(config: Path, as_json: bool, quiet: bool, no_color: bool) -> int:
    """Say in a second what CONFIG asks for and whether it can be had.

    Exit status 1 when a limit is beyond a proved bound.
    """
    from doe.config.load import load
    from doe.feasibility import assess

    job, _ = load(config)
    found = assess(job)
    if as_json:
        print_json(
            {
                "status": "met" if found.feasible else "missed",
                "feasible": found.feasible,
                "warnings": list(found.warnings),
                "limits": [vars(limit) for limit in found.limits],
                "bound": vars(found.bound) if found.bound else None,
                "facts": {fact.name: fact.value for fact in found.facts},
            }
        )
        return int(not found.feasible)
    rows = [[fact.label, fact.text] for fact in found.facts]
    table(f"{job.title}: what this job means", ["quantity", "value"], rows, no_color=no_color)
    for note in found.verdicts:
        say(note, no_color=no_color)
    for text in found.warnings:
        say(f"[yellow]note[/]: {text}", no_color=no_color)
    return int(not found.feasible)
