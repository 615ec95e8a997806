"""`doe signoff`: does the layout file say what the record meant."""

from pathlib import Path

import click

from doe.cli.common import CONFIG, output_options, print_json, table


@click.command(epilog="Example: doe signoff needle_mill/record.h5 needle_mill/foundry/mask.gds")
@click.argument("record", type=CONFIG)
@click.argument("layout", type=CONFIG)
@click.option("--manifest", type=CONFIG, help="Layer meanings; default: beside the layout.")
@output_options
def signoff(
    record: Path, layout: Path, manifest: Path | None, as_json: bool, quiet: bool, no_color: bool
) -> int:
    """Read LAYOUT back, compute its light independently and compare with RECORD.

    Checks period, orientation, every pixel of every layer, the mask rule, and the power of every
    order. Exit status 1 on any difference.
    """
    from doe.signoff.verdict import AGREE, sign_off
    from doe.store import read
    from doe.units import in_um

    result = read.read(record)
    verdict = sign_off(result, layout, manifest)
    if as_json:
        print_json(
            {
                "status": "missed" if verdict.differences else "met",
                "warnings": list(verdict.warnings),
                "limits": [],
                "differences": [vars(difference) for difference in verdict.differences],
                "worst_order": verdict.worst_order,
                "efficiency": verdict.efficiency,
            }
        )
        return int(bool(verdict.differences))
    if verdict.differences:
        rows = [
            [
                str(one.layer or "-"),
                one.kind,
                "-" if one.x_m is None else f"{in_um(one.x_m):.3f}, {in_um(one.y_m or 0):.3f}",
                "-" if one.loss is None else f"{one.loss:+.4%}",
            ]
            for one in verdict.differences
        ]
        columns = ["layer", "difference", "x, y (um)", "efficiency lost"]
        table("this layout is NOT the record", columns, rows, no_color=no_color)
    else:
        print("signed off: the layout is the record")
    print(
        f"efficiency from the polygons {verdict.efficiency:.4%}; the worst order is off by "
        f"{verdict.worst_order:.1e} of the light (allowed {AGREE:.0e})"
    )
    for note in verdict.warnings:
        print(f"note: {note}")
    return int(bool(verdict.differences))
