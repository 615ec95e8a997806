"""A layout against its record: every difference, where it is and how much light it costs."""

from dataclasses import dataclass
from pathlib import Path

import numpy as np
from jaxtyping import Bool, Float
from scipy import ndimage

from doe.config import derived
from doe.errors import Fault, FileError
from doe.files import sha256
from doe.result import Result
from doe.signoff.drawing import Drawing, read_drawing, read_manifest, unfit
from doe.signoff.light import order_powers
from doe.units import NANO

AGREE = 1e-5  # of the whole light, in every order
HALF, ROUND_OFF = 0.5, 1e-6  # nm: a period is drawn as the nearest whole number of them
MOST_LISTED = 20  # differing places named one by one
MOST_ORDERS = 512  # along an axis; wider tables are compared around the wanted orders

# Corners of a letter F in units of its stroke, seen upright.
LETTER_F = frozenset(
    [(0, 0), (1, 0), (1, 2), (2, 2), (2, 3), (1, 3), (1, 4), (3, 4), (3, 5), (0, 5)]
)


@dataclass(frozen=True)
class Difference:
    """One way in which the layout is not the record; `loss` is efficiency lost by the layout."""

    layer: int | None
    kind: str
    x_m: float | None
    y_m: float | None
    loss: float | None


@dataclass(frozen=True)
class Verdict:
    """All differences, how far the worst order is off, and what deserves a note."""

    differences: tuple[Difference, ...]
    worst_order: float
    efficiency: float
    warnings: tuple[str, ...]


def sign_off(result: Result, layout: Path, manifest_path: Path | None) -> Verdict:
    """The verdict on a layout file. Error: FileError where it cannot be judged at all."""
    if result.mask.layers is None:
        raise FileError(
            Fault(
                "the record holds no binary layers",
                "a record with levels",
                "design with 2, 4, 8 or 16 levels",
            )
        )
    manifest = read_manifest(manifest_path or layout.parent / "manifest.json")
    if len(manifest["layers"]) != len(result.mask.layers):
        names = f"{len(manifest['layers'])} layers, the record {len(result.mask.layers)}"
        raise unfit(layout, f"the manifest names {names}", "the manifest of this record")
    drawing = read_drawing(layout, manifest)
    powers, wanted, off = compare_light(result, drawing)
    loss = float((result.orders.power * (result.orders.target > 0)).sum() - powers[wanted].sum())
    found = [
        *array_differences(result, drawing),
        *orientation_differences(drawing),
        *layer_differences(result, drawing, loss),
        *rule_differences(result, drawing),
    ]
    if off > AGREE:
        found.append(Difference(None, f"an order's power differs by {off:.2g}", None, None, loss))
    recorded = manifest["files"].get(layout.name)
    is_changed = recorded != sha256(layout.read_bytes())
    notes = ("the layout is not, byte for byte, the one exported",) if is_changed else ()
    return Verdict(tuple(found), off, float(powers[wanted].sum()), notes)


def compare_light(
    result: Result, drawing: Drawing
) -> tuple[Float[np.ndarray, "y x"], Bool[np.ndarray, "y x"], float]:
    """Order powers of the drawing, where they are wanted, and the largest departure."""
    table = result.orders
    is_wanted = table.target > 0
    rows = window(np.asarray(is_wanted.any(axis=1)))
    columns = window(np.asarray(is_wanted.any(axis=0)))
    powers = order_powers(drawing, table.m_y[rows], table.m_x[columns])
    off = np.abs(powers - table.power[rows, columns])
    return powers, table.target[rows, columns] > 0, float(off.max())


def window(is_wanted: Bool[np.ndarray, " order"]) -> slice:
    """All orders of an axis, or those around the wanted ones where there are too many."""
    if len(is_wanted) <= MOST_ORDERS:
        return slice(None)
    there = np.flatnonzero(is_wanted)
    middle = int(there[0] + there[-1]) // 2
    half = max(MOST_ORDERS // 2, int(there[-1] - there[0]) // 2 + 1)
    return slice(max(0, middle - half), middle + half)


def array_differences(result: Result, drawing: Drawing) -> list[Difference]:
    """Period and extent of the array."""
    found = []
    size = (int(drawing.y[-1]), int(drawing.x[-1]))
    for axis, spacing, cell, wanted, count in zip(
        "yx",
        drawing.spacing,
        size,
        derived.period(result.config),
        result.config.element.pixels,
        strict=True,
    ):
        exact = wanted / NANO if count > 1 else spacing  # a line grating may have any height
        if spacing != cell or abs(spacing - exact) > HALF + ROUND_OFF:
            kind = f"period along {axis}: cells every {spacing} nm, not {exact:.1f} nm"
            found.append(Difference(None, kind, None, None, None))
    aperture = result.config.element.aperture / NANO
    for axis, spacing, copies in zip("yx", drawing.spacing, drawing.copies, strict=True):
        if spacing * copies < aperture - 1:
            kind = f"the array leaves part of the aperture empty along {axis}"
            found.append(Difference(None, kind, None, None, None))
    return found


def orientation_differences(drawing: Drawing) -> list[Difference]:
    """Whether the letter F reads upright."""
    if len(drawing.mark) == 0:
        return [Difference(None, "the orientation mark is missing", None, None, None)]
    low = drawing.mark.min(axis=0)
    stroke = (drawing.mark.max(axis=0) - low).max() / 5
    seen = {(round(x), round(y)) for x, y in (drawing.mark - low) / stroke}
    if seen == LETTER_F:
        return []
    x_m, y_m = (float(c) * NANO for c in low)
    kind = "the layout is mirrored or turned: the F does not read"
    return [Difference(None, kind, x_m, y_m, None)]


def layer_differences(result: Result, drawing: Drawing, loss: float) -> list[Difference]:
    """Pixels in which a layer is not the record's."""
    assert result.mask.layers is not None
    seen = at_pixel_centres(result, drawing)
    pitch_y, pitch_x = derived.pixel_pitch(result.config)
    found = []
    for number, (ours, theirs) in enumerate(zip(result.mask.layers, seen, strict=True), start=1):
        rows, columns = np.nonzero(ours != theirs)
        if len(rows) > MOST_LISTED:
            share = len(rows) / ours.size
            kind = f"{len(rows)} pixels differ, {share:.1%} of the layer"
            place = float(columns[0] * pitch_x), float(rows[0] * pitch_y)
            found.append(Difference(number, kind, *place, loss))
            continue
        found += [
            Difference(number, "a pixel differs", float(x * pitch_x), float(y * pitch_y), loss)
            for y, x in zip(rows, columns, strict=True)
        ]
    return found


def at_pixel_centres(result: Result, drawing: Drawing) -> Bool[np.ndarray, "mask y x"]:
    """The drawn layers as seen at the centre of each pixel."""
    rows, columns = result.config.element.pixels
    y = np.searchsorted(drawing.y, (np.arange(rows) + 0.5) * drawing.y[-1] / rows) - 1
    x = np.searchsorted(drawing.x, (np.arange(columns) + 0.5) * drawing.x[-1] / columns) - 1
    seen: Bool[np.ndarray, "mask y x"] = drawing.standing[:, y[:, None], x[None, :]]
    return seen


def rule_differences(result: Result, drawing: Drawing) -> list[Difference]:
    """Places where a drawn layer breaks the minimum feature, the gap or the corner rule."""
    feature, gap = derived.rule_pixels(result.config)
    pitch_y, pitch_x = derived.pixel_pitch(result.config)
    found = []
    for number, layer in enumerate(at_pixel_centres(result, drawing), start=1):
        broken = {
            "narrower than the minimum feature": thin(layer, feature),
            "narrower than the minimum gap": thin(~layer, gap),
        }
        if result.config.process.corner_contacts == "forbid":
            broken["glass or gaps that touch at a corner only"] = corner_only(layer)
        for kind, places in broken.items():
            rows, columns = np.nonzero(places)
            if len(rows):
                where = float(columns[0] * pitch_x), float(rows[0] * pitch_y)
                found.append(Difference(number, f"{kind}, {len(rows)} pixels", *where, None))
    return found


def thin(layer: Bool[np.ndarray, "y x"], size: tuple[int, int]) -> Bool[np.ndarray, "y x"]:
    """Pixels of a periodic layer that no rectangle of `size` pixels (y, x) inside it covers."""
    tiled = np.tile(layer, (3, 3))
    opened = ndimage.binary_opening(tiled, structure=np.ones(size, bool))
    rows, columns = layer.shape
    lost: Bool[np.ndarray, "y x"] = layer & ~opened[rows : 2 * rows, columns : 2 * columns]
    return lost


def corner_only(layer: Bool[np.ndarray, "y x"]) -> Bool[np.ndarray, "y x"]:
    """Corners at which two pixels of one sort meet across, the other two being of the other."""
    a, b = layer, np.roll(layer, -1, 1)
    c, d = np.roll(layer, -1, 0), np.roll(layer, (-1, -1), (0, 1))
    found: Bool[np.ndarray, "y x"] = (a & d & ~b & ~c) | (b & c & ~a & ~d)
    return found
