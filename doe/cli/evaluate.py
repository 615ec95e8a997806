"""`doe evaluate`: scores of a mask from elsewhere, as drawn or as made with an error."""

from pathlib import Path
from typing import TYPE_CHECKING, Any, NamedTuple

import click

from doe.cli.common import CONFIG, output_options, print_json, print_result, result_json, say, table

if TYPE_CHECKING:
    from doe.config.schema import Config
    from doe.result import PlaneLight


class Wishes(NamedTuple):
    """What is asked for beside the planes: a folder, a number of referee's points, places."""

    out: Path | None
    points: int | None
    at: tuple[str, ...]


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
@click.option(
    "--out", type=CONFIG, help="Folder for light.h5 and light.png of a single element's planes."
)
@click.option(
    "--referee",
    "points",
    type=click.IntRange(1, 10_000),
    metavar="N",
    help="Also compute N points of a single element's first plane by direct summation.",
)
@click.option(
    "--at",
    "at",
    multiple=True,
    metavar="'Z, Y, X'",
    help="Also the light of a single element at this point, by both Rayleigh-Sommerfeld kinds.",
)
@output_options
def evaluate(
    config: Path,
    mask: Path | None,
    kind: str | None,
    errors: tuple[str, ...],
    out: Path | None,
    points: int | None,
    at: tuple[str, ...],
    as_json: bool,
    quiet: bool,
    no_color: bool,
) -> int:
    """Score MASK (.npy, .tif or a record) under CONFIG; without MASK the bare aperture.

    The mask is taken as it is, never rounded to levels. A single element's light is computed on
    every plane of the config, by the propagator that serves there.
    """
    from doe.config.load import load
    from doe.config.made_part import parse_errors
    from doe.scoring import evaluate as score
    from doe.store.mask import read_phase

    job, text = load(config)
    made = parse_errors(errors, job)
    if job.element.kind == "single":
        phase = read_phase(mask, kind, job) * (1 + made.depth)
        wishes = Wishes(out, points, at)
        return show_planes((job, config), phase, wishes, as_json=as_json, no_color=no_color)
    result = score(job, text, read_phase(mask, kind, job), made)
    if as_json:
        print_json(result_json(result, None))
    else:
        print_result(result, no_color=no_color)
    return int(result.status == "missed")


def show_planes(
    job: tuple["Config", Path],
    phase: Any,
    wishes: Wishes,
    *,
    as_json: bool,
    no_color: bool,
) -> int:
    """Compute, print and, with a folder, keep the light of a single element on its planes."""
    from doe.config.advice import warnings
    from doe.planes import light_on_planes, smeared

    config, path = job
    lit = light_on_planes(config, phase, path.parent)
    planes = [smeared(plane, config) for plane in lit.planes]
    worst = departure(job, phase, lit.planes[0], wishes.points) if wishes.points else None
    seen = light_at(job, phase, wishes.at) if wishes.at else []
    if wishes.out is not None:
        keep(config, planes, wishes.out)
    notes = warnings(config)
    if as_json:
        print_json(
            {
                "status": "not judged",
                "warnings": notes,
                "limits": [],
                "cut_by_aperture": lit.cut,
                "addressed_power": lit.addressed,
                "referee": worst,
                "points": seen,
                "planes": [plane_json(plane) for plane in planes],
            }
        )
        return 0
    rows = [plane_row(plane) for plane in planes]
    columns = ["plane", "in window", "width y", "width x", "peak", "method", "serves from", "to"]
    table(f"{config.title}: light behind the element", columns, rows, no_color=no_color)
    say(
        f"cut by the aperture: {lit.cut:.4%} of the beam; in the field that the pixels address: "
        f"{lit.addressed:.4%}, the rest goes into replicas beyond it",
        no_color=no_color,
    )
    if worst is not None:
        say(f"direct summation: off by at most {worst:.1e} of the peak", no_color=no_color)
    for point in seen:
        say(point_line(point), no_color=no_color)
    for why in dict.fromkeys(plane.why for plane in planes):
        say(f"propagation: {why}", no_color=no_color)
    for text in notes:
        say(f"[yellow]note[/]: {text}", no_color=no_color)
    return 0


def light_at(
    job: tuple["Config", Path], phase: Any, texts: tuple[str, ...]
) -> list[dict[str, float]]:
    """Light at points told as text."""
    import numpy as np

    from doe.config.made_part import parse_point
    from doe.referee import at_points

    config, path = job
    points = np.array([parse_point(text) for text in texts])
    return [point._asdict() for point in at_points(config, phase, path.parent, points)]


def point_line(point: dict[str, float]) -> str:
    """One point for a reader, with the spread of the two kinds."""
    from doe import units

    place = ", ".join(f"{name} {units.length(point[name + '_m'])}" for name in "zyx")
    first, second = point["first_kind"], point["second_kind"]
    return f"at {place}: {first:.4g} /m^2 by the first kind, {second:.4g} /m^2 by the second"


def departure(job: tuple["Config", Path], phase: Any, plane: "PlaneLight", points: int) -> float:
    """Largest difference from the direct sum, over the peak."""
    from doe.referee import worst_departure

    config, path = job
    return worst_departure(config, phase, path.parent, plane, points)


def keep(config: "Config", planes: list["PlaneLight"], out: Path) -> None:
    """Write light.h5 and light.png into a folder."""
    from doe import files
    from doe.report.planes import draw
    from doe.store.light import image

    with files.output_folder(out):
        for name in ("light.h5", "light.png"):
            files.refuse_existing(out / name, "give another --out")
        files.write(out / "light.h5", image(planes))
        files.write(out / "light.png", draw(config, planes))


def plane_json(plane: "PlaneLight") -> dict[str, Any]:
    """Figures of one plane; SI, direction cosines for angles; an endless range is null."""
    shortest, longest = plane.range
    return {
        "kind": plane.kind,
        "shift_m": plane.shift,
        "method": plane.method,
        "why": plane.why,
        "shortest_m": shortest,
        "longest_m": None if longest == float("inf") else longest,
        "power_in_window": plane.power,
        "peak_irradiance": float(plane.irradiance.max()),
        "centroid": list(plane.centroid),
        "width": list(plane.width),
    }


def plane_row(plane: "PlaneLight") -> list[str]:
    """One plane for a reader."""
    from doe import units

    def size(value: float) -> str:
        return f"{value:.4g}" if plane.kind == "angles" else units.length(value)

    def end(value: float) -> str:
        return "any" if value == float("inf") else units.length(value) if value else "0"

    unit = "" if plane.kind == "angles" else " /m^2"
    return [
        plane.kind if not plane.shift else f"{plane.kind} {units.length(plane.shift)}",
        f"{plane.power:.2%}",
        *(size(width) for width in plane.width),
        f"{plane.irradiance.max():.4g}{unit}",
        plane.method,
        *(end(value) for value in plane.range),
    ]
