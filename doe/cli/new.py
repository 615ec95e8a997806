"""`doe new`: a commented starter config."""

from pathlib import Path

import click

from doe.cli.common import CONFIG, output_options, print_json

KINDS = ("grid", "orders", "angles")


@click.command(epilog="Example: doe new grid -o job.toml")
@click.argument("kind", type=click.Choice(KINDS))
@click.option("-o", "--output", type=CONFIG, help="File to write; default: stdout.")
@output_options
def new(kind: str, output: Path | None, as_json: bool, quiet: bool, no_color: bool) -> int:
    """Write a commented starter config for a KIND of target."""
    from importlib.resources import files as packaged

    from doe import files

    text = (packaged("doe.cli") / "starter" / f"{kind}.toml").read_text(encoding="utf-8")
    if output is not None:
        files.refuse_existing(output, "give another name")
        files.write(output, text.encode())
    if as_json:
        written = str(output) if output else None
        print_json({"status": "met", "warnings": [], "limits": [], "file": written, "text": text})
    elif output is None:
        print(text, end="")
    else:
        print(f"{output} is ready: edit it, then `doe check {output}`")
    return 0
