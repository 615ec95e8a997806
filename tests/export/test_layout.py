"""The layout read back by other programs is the record, bit for bit and the right way round."""

from dataclasses import replace
from pathlib import Path

import gdstk
import klayout.db as kdb
import numpy as np
import pytest
from helpers import job

from doe.config.load import load
from doe.config.made_part import Errors
from doe.export import layout
from doe.result import Result
from doe.scoring import evaluate


def result_of(**changes: object) -> Result:
    """A random mask under the small job with changes; it has no symmetry."""
    config, text = load(job(**({"element__pixels": 16} | changes)))
    count = config.element.levels
    level = np.random.default_rng(3).integers(0, count, config.element.pixels)
    return evaluate(config, text, level * (2 * np.pi / count), Errors())


def read_back(result: Result) -> gdstk.Library:
    """The layout of a result as another program reads it."""
    Path("mask.gds").write_bytes(layout.layout(result, "gds"))
    return gdstk.read_gds("mask.gds")


def cell_of(library: gdstk.Library, name: str) -> gdstk.Cell:
    """A cell by its name."""
    return next(cell for cell in library.cells if cell.name == name)


def rastered(cell: gdstk.Cell, layer: int, shape: tuple[int, int], period_um: list[float]):
    """Whether each pixel's centre lies in the cell's polygons of a layer; row 0 at smallest y."""
    rows, columns = shape
    polygons = cell.get_polygons(layer=layer, datatype=0)
    points = [
        ((column + 0.5) * period_um[1] / columns, (row + 0.5) * period_um[0] / rows)
        for row in range(rows)
        for column in range(columns)
    ]
    inside = gdstk.inside(points, polygons) if polygons else [False] * len(points)
    return np.array(inside).reshape(shape)


CASES = {
    "square": {},
    "two levels": {"element__levels": 2},
    "sixteen levels": {"element__levels": 16},
    "not square": {"element__pixels": [24, 16], "element__period": ["0.3 mm", "0.64 mm"]},
    "uneven pixels": {"element__pixels": [14, 22], "element__period": ["310.001 um", "0.5 mm"]},
    "one dimension": {"element__pixels": [1, 48], "target__shape": [1, 3]},
}


@pytest.mark.parametrize("name", CASES)
def test_the_layout_read_back_equals_the_layers_bit_for_bit(name):
    result = result_of(**CASES[name])
    library = read_back(result)
    period = [length * 1e6 for length in result.config.element.period]
    cell = cell_of(library, "UNIT_CELL")
    layers = result.mask.layers
    for number in range(len(layers)):
        found = rastered(cell, number + 1, layers[number].shape, period)
        np.testing.assert_array_equal(found, layers[number], err_msg=f"layer {number + 1}")
    drawn = {(polygon.layer, polygon.datatype) for polygon in cell.polygons}
    assert drawn == {(number + 1, 0) for number in range(len(layers))}


@pytest.mark.parametrize("name", CASES)
def test_another_reader_agrees_on_the_area_of_each_layer(name):
    result = result_of(**CASES[name])
    library = read_back(result)
    flat = kdb.Layout()
    flat.read("mask.gds")
    assert flat.dbu == pytest.approx(0.001)  # um
    cell = flat.cell("UNIT_CELL")
    for number in range(1, len(result.mask.layers) + 1):
        region = kdb.Region(cell.shapes(flat.layer(number, 0)))
        area = region.area() * flat.dbu**2
        merged = region.merged().area() * flat.dbu**2
        polygons = cell_of(library, "UNIT_CELL").get_polygons(layer=number, datatype=0)
        assert sum(polygon.area() for polygon in polygons) == pytest.approx(area, rel=1e-9)
        assert area == pytest.approx(merged, rel=1e-12), "rectangles overlap"


def test_the_area_of_a_layer_is_its_pixels():
    result = result_of()
    read_back(result)
    flat = kdb.Layout()
    flat.read("mask.gds")
    for number, layer in enumerate(result.mask.layers, start=1):
        region = kdb.Region(flat.cell("UNIT_CELL").shapes(flat.layer(number, 0)))
        assert region.area() == int(layer.sum()) * 40_000**2  # nm, 640 um / 16


def test_a_shape_that_shrinks_in_gds_would_be_seen():
    """Negative control: with one pixel changed the comparison above fails."""
    result = result_of()
    cell = cell_of(read_back(result), "UNIT_CELL")
    layer = result.mask.layers[0].copy()
    layer[3, 5] ^= True
    assert (rastered(cell, 1, layer.shape, [640.0, 640.0]) != layer).sum() == 1
    assert (rastered(cell, 1, layer.shape, [640.0, 640.0]) != layer[:, ::-1]).any()


@pytest.mark.parametrize("aperture", ["10 mm", "10.24 mm", "0.5 mm", "7.3214567 mm"])
def test_the_array_of_cells_covers_the_aperture_and_is_centred(aperture):
    result = result_of(element__aperture=aperture, beam__diameter="0.3 mm")
    library = read_back(result)
    (reference,) = cell_of(library, "ELEMENT").references
    repetition = reference.repetition
    assert reference.cell_name == "UNIT_CELL"
    assert (reference.rotation, reference.magnification, reference.x_reflection) == (0, 1, False)
    wanted = result.config.element.aperture * 1e6  # um
    steps = (repetition.columns, repetition.rows), repetition.spacing, reference.origin
    for count, spacing, origin in zip(*steps, strict=True):
        assert spacing == pytest.approx(640)
        assert count * spacing >= wanted - 1e-3
        assert (count - 1) * spacing < wanted, "more cells than it takes"
        assert origin + count * spacing / 2 == pytest.approx(0, abs=1e-3)


def test_an_array_of_very_many_cells_is_read_back_whole():
    """GDSII counts rows and columns of an array in 16 bits: 32767 at most."""
    changes = {"element__pixels": [1, 512], "element__period": "0.2 mm", "target__shape": [1, 3]}
    result = result_of(**changes, element__aperture="16 mm")
    read_back(result)
    flat = kdb.Layout()
    flat.read("mask.gds")
    box = flat.top_cell().dbbox(flat.layer(1, 0))
    assert box.height() >= 15_990  # um; the outermost pixels may stand empty
    assert box.width() >= 15_800
    for cell in gdstk.read_gds("mask.gds").cells:
        for reference in cell.references:
            repetition = reference.repetition
            assert 0 <= (repetition.rows or 1) <= 32767
            assert 0 <= (repetition.columns or 1) <= 32767


def test_the_mark_reads_as_an_f_and_its_mirror_image_does_not():
    library = read_back(result_of())
    (mark,) = [p for p in cell_of(library, "ELEMENT").polygons if p.layer == 100]
    (left, bottom), (right, top) = mark.bounding_box()
    points = [
        (left + (column + 0.5) * (right - left) / 3, bottom + (row + 0.5) * (top - bottom) / 5)
        for row in range(4, -1, -1)
        for column in range(3)
    ]
    inside = np.array(gdstk.inside(points, [mark])).reshape(5, 3)
    picture = ["".join("#" if pixel else "." for pixel in line) for line in inside]
    assert picture == ["###", "#..", "##.", "#..", "#.."]
    for other in (inside[::-1], inside[:, ::-1], inside[::-1, ::-1]):
        assert (other != inside).any()


def test_the_mark_stands_outside_the_array_and_is_on_no_mask():
    library = read_back(result_of())
    element = cell_of(library, "ELEMENT")
    (mark,) = element.polygons
    (left, bottom), _ = mark.bounding_box()
    half = 16 * 640 / 2  # um: 16 cells cover 10 mm
    assert left > half
    assert bottom > half
    assert mark.layer not in {p.layer for p in cell_of(library, "UNIT_CELL").polygons}


def test_the_same_record_gives_the_same_bytes():
    assert layout.layout(result_of(), "gds") == layout.layout(result_of(), "gds")


def test_what_is_drawn_as_etched_is_the_complement():
    standing = result_of()
    etched = result_of(process__drawn="etched")
    one, two = read_back(standing), read_back(etched)
    for number, layer in enumerate(standing.mask.layers, start=1):
        glass = rastered(cell_of(one, "UNIT_CELL"), number, layer.shape, [640.0, 640.0])
        holes = rastered(cell_of(two, "UNIT_CELL"), number, layer.shape, [640.0, 640.0])
        np.testing.assert_array_equal(holes, ~glass)
        np.testing.assert_array_equal(glass, layer)


@pytest.mark.parametrize("value", [True, False])
def test_a_full_or_empty_layer_is_written_too(value):
    result = result_of(element__levels=2)
    mask = replace(result.mask, layers=np.full((1, 16, 16), value))
    cell = cell_of(read_back(replace(result, mask=mask)), "UNIT_CELL")
    assert (rastered(cell, 1, (16, 16), [640.0, 640.0]) == value).all()
    assert len(cell.polygons) == int(value)


def test_neighbouring_pixels_share_their_edges_to_the_nanometre():
    """A period of 22 pixels of 22727.27 nm: no slit and no overlap anywhere."""
    edges = layout.edges(500_000, 22)
    assert (edges[0], edges[-1]) == (0, 500_000)
    assert np.abs(edges - np.arange(23) * 500_000 / 22).max() <= 0.5
