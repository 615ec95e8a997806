"""A layout file as the drawing of one period: where glass stands on each mask layer."""

import json
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import gdstk
import numpy as np
from jaxtyping import Bool, Int

from doe.errors import Fault, FileError
from doe.units import NANO, in_nm

LARGEST = 2_000_000_000  # bytes of a layout this tool opens
ON_GRID = 1e-3  # nm; a corner further from a whole nanometre is off the grid

Corners = Int[np.ndarray, "_ 2"]


@dataclass(frozen=True)
class Drawing:
    """One period: borders of the rectangles of constant glass, and the layers on them."""

    x: Int[np.ndarray, " column_border"]  # nm, from 0 to the period
    y: Int[np.ndarray, " row_border"]
    standing: Bool[np.ndarray, "mask y x"]
    spacing: tuple[int, int]  # nm, of the array (y, x)
    copies: tuple[int, int]
    mark: Corners  # corners of the orientation mark, nm


def unfit(path: Path, problem: str, allowed: str) -> FileError:
    """The error of a layout or manifest that cannot be signed off at all."""
    fix = "export the record again, or give the manifest that belongs to the layout"
    return FileError(Fault(problem, allowed, fix, file=str(path)))


def read_manifest(path: Path) -> dict[str, Any]:
    """The manifest, with the keys this room needs. Error: FileError."""
    allowed = "the manifest.json of an export"
    try:
        found = json.loads(path.read_bytes())
        layers = [
            (int(entry["layer"]), int(entry["datatype"]), int(entry["etch"]), str(entry["drawn"]))
            for entry in found["layers"]
        ]
        mark = int(found["orientation"]["layer"])
        period = [float(length) for length in found["period_m"]]
        copies = [int(number) for number in found["copies"]]
    except (OSError, ValueError, KeyError, TypeError, RecursionError) as error:
        raise unfit(path, f"the manifest cannot be read: {error}", allowed) from None
    if len(period) != 2 or len(copies) != 2:
        raise unfit(path, "the manifest's pairs are not pairs", allowed)
    if sorted(etch for _, _, etch, _ in layers) != list(range(1, len(layers) + 1)):
        raise unfit(path, "the manifest does not name each etch once", "etches 1 to M")
    return {
        "layers": sorted(layers, key=lambda entry: entry[2]),
        "mark": mark,
        "period_m": period,
        "copies": copies,
        "files": found.get("files", {}),
    }


def read_library(path: Path) -> gdstk.Library:
    """The library in a GDSII or OASIS file. Error: FileError where it is none."""
    allowed = "a whole GDSII (.gds) or OASIS (.oas) file"
    reader = {".gds": gdstk.read_gds, ".oas": gdstk.read_oas}.get(path.suffix.lower())
    if reader is None or not path.is_file():
        raise unfit(path, "there is no such layout file", allowed)
    if path.stat().st_size > LARGEST:
        raise unfit(path, "the file is too large to open", f"at most {LARGEST} bytes")
    check_ending(path, allowed)
    try:
        library = reader(path)
    except (OSError, RuntimeError, ValueError, MemoryError) as error:
        raise unfit(path, f"the layout cannot be read: {error}", allowed) from None
    if not library.cells:
        raise unfit(path, "the layout is empty", allowed)
    return library


def check_ending(path: Path, allowed: str) -> None:
    """Refuse a file that is cut short before the reader meets it: it ends without its end record.

    Source: record ENDLIB (04 00) of GDSII; magic string of OASIS (SEMI P39) (from memory).
    """
    data = path.read_bytes()
    if path.suffix.lower() == ".gds":
        whole = data[2:4] == b"\x00\x02" and data.rstrip(b"\0").endswith(b"\x00\x04\x04")
    else:
        whole = data.startswith(b"%SEMI-OASIS\r\n") and len(data) > 256
    if not whole:
        raise unfit(path, "the file is empty, cut short or no layout", allowed)


def read_drawing(path: Path, manifest: dict[str, Any]) -> Drawing:
    """One period of the layout under the manifest's layer meanings. Error: FileError."""
    library = read_library(path)
    top = the_top(library, path)
    known = {(layer, datatype) for layer, datatype, _, _ in manifest["layers"]}
    strange = {pair for pair in library.layers_and_datatypes() if pair not in known}
    strange -= {(manifest["mark"], 0)}
    if strange:
        names = ", ".join(f"{layer}/{datatype}" for layer, datatype in sorted(strange))
        raise unfit(path, f"layers the manifest does not name: {names}", "the manifest's layers")
    array = the_array(top, path)
    period = [in_nm(length) for length in manifest["period_m"]]
    scale = library.unit / NANO
    shapes = [
        [corners(p, scale, path) for p in array.cell.get_polygons(layer=layer, datatype=datatype)]
        for layer, datatype, _, _ in manifest["layers"]
    ]
    x, y, drawn = raster(shapes, (period[0], period[1]), path)
    polarity = [drawn_as == "standing" for _, _, _, drawn_as in manifest["layers"]]
    standing = np.stack([d if p else ~d for d, p in zip(drawn, polarity, strict=True)])
    marks = top.get_polygons(layer=manifest["mark"], datatype=0)
    mark = corners(marks[0], scale, path) if len(marks) == 1 else np.zeros((0, 2), np.int64)
    grid = array.repetition
    assert grid.spacing is not None  # by the_array
    step_x, step_y = grid.spacing
    return Drawing(
        x=x,
        y=y,
        standing=standing,
        spacing=(round(step_y * scale), round(step_x * scale)),
        copies=(grid.rows or 0, grid.columns or 0),
        mark=mark,
    )


def the_top(library: gdstk.Library, path: Path) -> gdstk.Cell:
    """The one cell that no other cell refers to."""
    tops = library.top_level()
    if len(tops) != 1:
        raise unfit(path, f"{len(tops)} cells stand at the top", "one top cell")
    if not isinstance(tops[0], gdstk.Cell):
        raise unfit(path, "the top cell is no plain cell", "a plain cell")
    return tops[0]


def the_array(top: gdstk.Cell, path: Path) -> gdstk.Reference:
    """The one array of references to the unit cell, neither turned, scaled nor mirrored."""
    allowed = "one plain array of the unit cell in the top cell"
    arrays = top.references
    if len(arrays) != 1 or arrays[0].repetition.columns is None:
        raise unfit(path, f"{len(arrays)} references and not one array", allowed)
    array: gdstk.Reference = arrays[0]
    if array.rotation or array.x_reflection or array.magnification != 1:
        raise unfit(path, "the array is turned, mirrored or scaled", allowed)
    if array.cell.references:
        raise unfit(path, "the unit cell refers to other cells", allowed)
    return array


def corners(polygon: gdstk.Polygon, scale: float, path: Path) -> Corners:
    """Corners of a polygon in whole nanometres."""
    exact = np.asarray(polygon.points) * scale
    rounded = np.rint(exact)
    if np.abs(exact - rounded).max() > ON_GRID:
        raise unfit(path, "a corner lies off the nanometre grid", "corners on whole nanometres")
    found: Corners = rounded.astype(np.int64)
    return found


def raster(
    shapes: list[list[Corners]], period: tuple[int, int], path: Path
) -> tuple[Int[np.ndarray, " x"], Int[np.ndarray, " y"], Bool[np.ndarray, "mask row column"]]:
    """Borders (nm) of the rectangles between all edges, and which are inside each layer's polygons.

    Exact for polygons with upright edges: every edge lies on a border, and the winding number is
    summed over the edges to the left. Source: winding rule.
    """
    points = np.concatenate([p for layer in shapes for p in layer] or [np.zeros((0, 2), int)])
    for axis, size in ((0, period[1]), (1, period[0])):
        if len(points) and (points[:, axis].min() < 0 or points[:, axis].max() > size):
            raise unfit(path, "a polygon reaches out of the unit cell", f"0 to {size} nm")
    x = np.unique(np.append(points[:, 0], [0, period[1]]))
    y = np.unique(np.append(points[:, 1], [0, period[0]]))
    inside = np.zeros((len(shapes), len(y) - 1, len(x) - 1), bool)
    for number, layer in enumerate(shapes):
        winding = np.zeros((len(y), len(x)), np.int32)
        for start, end in edge_pairs(layer, path):
            column = np.searchsorted(x, start[:, 0])
            np.add.at(winding, (np.searchsorted(y, start[:, 1]), column), 1)
            np.add.at(winding, (np.searchsorted(y, end[:, 1]), column), -1)
        total = winding.cumsum(axis=0).cumsum(axis=1)
        inside[number] = total[:-1, :-1] != 0
    return x, y, inside


def edge_pairs(layer: list[Corners], path: Path) -> list[tuple[Corners, Corners]]:
    """Start and end corners of all upright edges of a layer."""
    found = []
    for polygon in layer:
        end = np.roll(polygon, -1, axis=0)
        upright = polygon[:, 0] == end[:, 0]
        level = polygon[:, 1] == end[:, 1]
        if not np.all(upright | level):
            raise unfit(path, "a polygon has a slanted edge", "edges along x and y")
        found.append((polygon[upright], end[upright]))
    if not found:
        return []
    return [(np.concatenate([a for a, _ in found]), np.concatenate([b for _, b in found]))]
