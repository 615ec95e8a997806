"""`doe export`: the files a foundry works from."""

from pathlib import Path
from typing import TYPE_CHECKING

import click

from doe.cli.common import CONFIG, output_options, print_json

if TYPE_CHECKING:
    from doe.export.layout import Form


@click.command(epilog="Example: doe export needle_mill/record.h5 --out needle_mill/foundry")
@click.argument("record", type=CONFIG)
@click.option("--out", type=CONFIG, help="Output folder; default: `foundry` beside the record.")
@click.option(
    "--format",
    "form",
    type=click.Choice(["gds", "oas"]),
    default="gds",
    help="Layout format: GDSII (usual) or OASIS.",
)
@output_options
def export(
    record: Path, out: Path | None, form: "Form", as_json: bool, quiet: bool, no_color: bool
) -> int:
    """Write mask layout, heights, order table and manifest of RECORD."""
    from doe import files
    from doe.export.package import contents
    from doe.store import read

    result = read.read(record)
    folder = out or record.parent / "foundry"
    package = contents(result, form)
    with files.output_folder(folder):
        for name in package:
            files.refuse_existing(folder / name, "give another --out")
        for name, data in package.items():
            files.write(folder / name, data)
    if as_json:
        written = [str(folder / name) for name in package]
        warnings = list(result.warnings)
        print_json({"status": "met", "warnings": warnings, "limits": [], "files": written})
    else:
        for name, data in package.items():
            print(f"{folder / name}  {len(data)} bytes")
    return 0
