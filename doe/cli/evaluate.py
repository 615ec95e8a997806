"""`doe evaluate`: scores of a mask from elsewhere, as drawn or as made with an error."""

from pathlib import Path

import click

from doe.cli.common import CONFIG, output_options, print_json, print_result, result_json


@click.command(
    epilog="Example: doe evaluate configs/needle_mill.toml mask.npy --error depth=3% --json"
)
@click.argument("config", type=CONFIG)
@click.argument("mask", type=CONFIG, required=False)
@click.option(
    "--as",
    "kind",
    type=click.Choice(["levels", "height", "phase"]),
    help="What the file holds; default: uint8 levels, .tif height in m, float .npy phase in rad.",
)
@click.option(
    "--error",
    "errors",
    multiple=True,
    metavar="KEY=VALUE",
    help="A made-part error: depth=3% (all etches deeper), depth_1=-2% (the pi etch shallower).",
)
@output_options
def evaluate(
    config: Path,
    mask: Path | None,
    kind: str | None,
    errors: tuple[str, ...],
    as_json: bool,
    quiet: bool,
    no_color: bool,
) -> int:
    """Score MASK (.npy, .tif or a record) under CONFIG; without MASK the bare aperture.

    The mask is taken as it is, never rounded to levels.
    """
    from doe.config.load import load
    from doe.config.made_part import parse_errors
    from doe.scoring import evaluate as score
    from doe.store.mask import read_phase

    job, text = load(config)
    made = parse_errors(errors, job)
    result = score(job, text, read_phase(mask, kind, job), made)
    if as_json:
        print_json(result_json(result, None))
    else:
        print_result(result, no_color=no_color)
    return int(result.status == "missed")
