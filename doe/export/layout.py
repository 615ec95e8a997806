"""Mask layers as a GDSII or OASIS layout: the unit cell once, and an array of references to it."""

import datetime
import math
import tempfile
from dataclasses import dataclass
from pathlib import Path
from typing import Literal

import gdstk
import numpy as np
from jaxtyping import Bool, Int

from doe import units
from doe.config import derived
from doe.config.schema import Config
from doe.errors import ConfigError, Fault
from doe.result import Result

ORIENTATION_LAYER = 100  # drawn for the reader of the layout, etched by no mask
MOST_COPIES = 32_767  # GDSII counts rows and columns of an array in 16 bits (from memory)
MARK_STROKE = 20_000  # nm, width of the strokes of the orientation mark
STAMP = datetime.datetime(2000, 1, 1)  # fixed, so that equal designs give equal bytes
Form = Literal["gds", "oas"]
NAMES: dict[Form, str] = {"gds": "mask.gds", "oas": "mask.oas"}


@dataclass(frozen=True)
class Placement:
    """Where the cell lies, in whole nanometres, (y, x) pairs."""

    period: tuple[int, int]
    copies: tuple[int, int]
    origin: tuple[int, int]  # lower left corner of the array


def placement_of(config: Config) -> Placement:
    """Whole cells over the square around the clear aperture, centred on the origin."""
    period = [max(1, units.in_nm(length)) for length in derived.period(config)]
    aperture = units.in_nm(config.element.aperture)
    if config.element.pixels[0] == 1:
        period[0] = aperture  # the lines of a one-dimensional grating run through
    copies = [math.ceil(aperture / length) for length in period]
    origin = [-(n * length) // 2 for n, length in zip(copies, period, strict=True)]
    return Placement((period[0], period[1]), (copies[0], copies[1]), (origin[0], origin[1]))


def drawn_layers(result: Result) -> Bool[np.ndarray, "mask y x"]:
    """What is drawn on each layer: the glass left standing, or what is etched."""
    layers = result.mask.layers
    assert layers is not None
    return ~layers if result.config.process.drawn == "etched" else layers


def layout(result: Result, form: Form) -> bytes:
    """The layout of a record with binary layers; the same record gives the same bytes."""
    place = placement_of(result.config)
    if form == "gds" and max(place.copies) > MOST_COPIES:
        raise ConfigError(
            Fault(
                f"the aperture takes {max(place.copies)} periods in a row",
                f"at most {MOST_COPIES} in a GDSII array",
                "export with --format oas, or use a longer period",
                key="element.period",
            )
        )
    cell = gdstk.Cell("UNIT_CELL")
    for number, layer in enumerate(drawn_layers(result), start=1):
        for box in rectangles(layer, place.period):
            cell.add(gdstk.rectangle(corner(box[:2]), corner(box[2:]), layer=number))
    top = gdstk.Cell("ELEMENT")
    rows, columns = place.copies
    period_y, period_x = (in_um(length) for length in place.period)
    origin = (in_um(place.origin[1]), in_um(place.origin[0]))
    top.add(gdstk.Reference(cell, origin, columns=columns, rows=rows, spacing=(period_x, period_y)))
    top.add(*orientation_mark(place))
    library = gdstk.Library("DOE", unit=units.MICRO, precision=units.NANO)
    library.add(top, cell)
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / NAMES[form]
        if form == "gds":
            library.write_gds(path, timestamp=STAMP)
        else:
            library.write_oas(path)
        return path.read_bytes()


def in_um(nanometres: int) -> float:
    """Nanometres as micrometres, the user unit of the layout."""
    return nanometres / 1000


def corner(point: Int[np.ndarray, " xy"]) -> tuple[float, float]:
    """A corner (x, y) in nm as micrometres."""
    return in_um(int(point[0])), in_um(int(point[1]))


def edges(period: int, pixels: int) -> Int[np.ndarray, " edge"]:
    """Pixel borders of one period, each rounded to the nanometre by itself."""
    borders: Int[np.ndarray, " edge"] = np.rint(np.arange(pixels + 1) * (period / pixels)).astype(
        np.int64
    )
    return borders


def rectangles(layer: Bool[np.ndarray, "y x"], period: tuple[int, int]) -> Int[np.ndarray, "n 4"]:
    """Rectangles (x0, y0, x1, y1) in nm that cover a layer of one cell without overlap.

    Runs along x, equal runs of neighbouring rows joined.
    """
    rows, columns = layer.shape
    padded = np.zeros((rows, columns + 2), np.int8)
    padded[:, 1:-1] = layer
    change = np.diff(padded, axis=1)
    row, start = np.nonzero(change == 1)
    end = np.nonzero(change == -1)[1]
    order = np.lexsort((row, end, start))
    row, start, end = row[order], start[order], end[order]
    goes_on = (start[1:] == start[:-1]) & (end[1:] == end[:-1]) & (row[1:] == row[:-1] + 1)
    first = np.flatnonzero(np.append(True, ~goes_on)) if len(row) else np.zeros(0, int)
    last = np.append(first[1:] - 1, len(row) - 1) if len(row) else first
    x, y = edges(period[1], columns), edges(period[0], rows)
    return np.stack([x[start[first]], y[row[first]], x[end[first]], y[row[last] + 1]], axis=1)


def orientation_mark(place: Placement) -> list[gdstk.Polygon]:
    """A letter F, upright and readable where the layout is neither mirrored nor turned.

    It stands outside the array, beyond its upper right corner.
    """
    s = in_um(MARK_STROKE)
    right = in_um(place.origin[1] + place.copies[1] * place.period[1]) + 2 * s
    top = in_um(place.origin[0] + place.copies[0] * place.period[0]) + 2 * s
    outline = [(0, 0), (1, 0), (1, 2), (2, 2), (2, 3), (1, 3), (1, 4), (3, 4), (3, 5), (0, 5)]
    points = [(right + s * x, top + s * y) for x, y in outline]
    return [gdstk.Polygon(points, layer=ORIENTATION_LAYER)]
