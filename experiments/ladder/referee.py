"""Figures of a saved mask by plain NumPy, its rule by SciPy and klayout: no code of the tool."""

from pathlib import Path

import h5py
import klayout.db as kdb
import numpy as np
from scipy import ndimage


def read(record: Path) -> dict:
    """What the referee needs of a record."""
    with h5py.File(record) as file:
        mask = file["mask"]
        is_levels = "levels" in mask
        target = file["target"]
        return {
            "phase": (
                2 * np.pi * mask["levels"][:] / mask.attrs["levels"]
                if is_levels
                else mask["phase"][:].astype(float)
            ),
            "layers": mask["layers"][:] if is_levels else None,
            "m_y": target["m_y"][:],
            "m_x": target["m_x"][:],
            "share": target["share"][:],
            "seconds": float(file["made_by"].attrs["seconds"]),
        }


def light(found: dict) -> tuple[float, float]:
    """Efficiency and uniformity error, by the Fourier integral of square pixels in float64."""
    near = np.exp(1j * found["phase"])
    rows, columns = near.shape
    power = []
    for m_y, m_x in zip(found["m_y"], found["m_x"], strict=True):
        wave_y = np.exp(-2j * np.pi * m_y * (np.arange(rows) + 0.5) / rows) / rows
        wave_x = np.exp(-2j * np.pi * m_x * (np.arange(columns) + 0.5) / columns) / columns
        envelope = np.sinc(m_y / rows) * np.sinc(m_x / columns)
        power.append(abs(envelope * (wave_y @ near @ wave_x)) ** 2)
    relative = np.array(power) / found["share"]
    low, high = relative.min(), relative.max()
    return float(sum(power)), float((high - low) / (high + low))


def scipy_breaches(layers: np.ndarray, size: int) -> int:
    """Pixels that opening or closing by a square of `size` pixels would change, over the seam."""
    square = np.ones((size, size), bool)
    total = 0
    for layer in layers:
        rows, columns = layer.shape
        tiled = np.tile(layer, (3, 3))
        middle = np.s_[rows : 2 * rows, columns : 2 * columns]
        opened = ndimage.binary_opening(tiled, square)[middle]
        closed = ndimage.binary_closing(tiled, square)[middle]
        total += int((opened != layer).sum() + (closed != layer).sum())
    return total


def klayout_breaches(layout: Path, masks: int, width: int) -> int:
    """Area in nm^2 that opening or closing by a square of `width` nm would change.

    Opening as undersize and oversize by half the width, on 3 x 3 cells, judged on the middle one.
    """
    drawing = kdb.Layout()
    drawing.read(str(layout))
    cell = drawing.cell("UNIT_CELL")
    period = [round(length) for length in periods(drawing)]
    middle = kdb.Box(period[0], period[1], 2 * period[0], 2 * period[1])
    field = kdb.Region(kdb.Box(0, 0, 3 * period[0], 3 * period[1]))
    half = width // 2 - 2  # 2 nm less: every edge is rounded to the nanometre
    total = 0
    for layer in range(1, masks + 1):
        one = kdb.Region(cell.begin_shapes_rec(drawing.layer(layer, 0)))
        tiled = kdb.Region()
        for row in range(3):
            for column in range(3):
                tiled += one.moved(column * period[0], row * period[1])
        tiled.merge()
        for shape in (tiled, field - tiled):
            opened = shape.sized(-half).sized(half)
            total += ((shape - opened) & kdb.Region(middle)).area()
    return total


def periods(drawing: kdb.Layout) -> tuple[float, float]:
    """Spacing of the array along x and y in nm."""
    array = next(iter(drawing.cell("ELEMENT").each_inst()))
    return array.a.x or array.b.x, array.b.y or array.a.y
