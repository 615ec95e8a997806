"""Sign-off of a layout: nothing wrong is signed, and each planted fault is named."""

import json
import shutil

import gdstk
import pytest
from helpers import call, job

from doe.store import read


@pytest.fixture(scope="module")
def exported(tmp_path_factory):
    """A small design with its export, made once."""
    from click.testing import CliRunner

    from doe.cli import doe

    folder = tmp_path_factory.mktemp("signoff")
    import os

    before = os.getcwd()
    os.chdir(folder)
    try:
        config = job(
            limits={"uniformity_error": "<= 20 %"},
            solver={"methods": ["weighted"], "starts": 2, "steps": 20, "refine": False, "hops": 0},
        )
        runner = CliRunner()
        for words in (
            ["run", str(config), "--quiet"],
            ["export", "job/record.h5"],
            ["export", "job/record.h5", "--format", "oas", "--out", "job/oasis"],
        ):
            done = runner.invoke(doe, words, standalone_mode=False)
            assert done.exception is None, done.exception
    finally:
        os.chdir(before)
    return folder / "job"


@pytest.fixture
def here(exported, tmp_path):
    """A copy of the export that a test may spoil."""
    shutil.copytree(exported, tmp_path / "job")
    return tmp_path / "job"


def verdict(monkeypatch, capsys, here, layout="foundry/mask.gds", *options):
    status, out, err = call(
        monkeypatch, capsys, "signoff", here / "record.h5", here / layout, "--json", *options
    )
    return status, json.loads(out), err


def edit(here, change):
    """Rewrite the layout with a change to its library."""
    path = here / "foundry" / "mask.gds"
    library = gdstk.read_gds(path)
    cells = {cell.name: cell for cell in library.cells}
    change(cells["ELEMENT"], cells["UNIT_CELL"])
    library.write_gds(path)


@pytest.mark.parametrize("layout", ["foundry/mask.gds", "oasis/mask.oas"])
def test_an_export_is_signed_and_agrees_in_every_order(monkeypatch, capsys, here, layout):
    status, found, _ = verdict(monkeypatch, capsys, here, layout)
    assert found["differences"] == []
    assert found["worst_order"] < 1e-5
    assert found["warnings"] == []
    assert status == 0
    record = read.read(here / "record.h5")
    assert found["efficiency"] == pytest.approx(record.scores["efficiency"], abs=1e-4)


def test_one_flipped_pixel_is_found_with_its_place(monkeypatch, capsys, here):
    pitch = 640 / 32
    layers = read.read(here / "record.h5").mask.layers
    row, column = next((y, x) for y in range(32) for x in range(32) if not layers[1, y, x])

    def change(top, cell):
        corner = column * pitch, row * pitch
        cell.add(gdstk.rectangle(corner, (corner[0] + pitch, corner[1] + pitch), layer=2))

    edit(here, change)
    status, found, _ = verdict(monkeypatch, capsys, here)
    assert status == 1
    place = [d for d in found["differences"] if d["kind"] == "a pixel differs"]
    assert len(place) == 1
    assert place[0]["layer"] == 2
    assert place[0]["x_m"] == pytest.approx(column * pitch * 1e-6)
    assert place[0]["y_m"] == pytest.approx(row * pitch * 1e-6)
    assert found["warnings"], "an edited file is told"


def test_a_mirrored_layer_is_found(monkeypatch, capsys, here):
    def change(top, cell):
        for polygon in cell.polygons:
            if polygon.layer == 1:
                polygon.mirror((320, 0), (320, 640))

    edit(here, change)
    status, found, _ = verdict(monkeypatch, capsys, here)
    assert status == 1
    assert {d["layer"] for d in found["differences"] if "pixel" in d["kind"]} == {1}


def test_two_swapped_layers_are_found(monkeypatch, capsys, here):
    def change(top, cell):
        for polygon in cell.polygons:
            polygon.layer = {1: 2, 2: 1, 3: 3}[polygon.layer]

    edit(here, change)
    status, found, _ = verdict(monkeypatch, capsys, here)
    assert status == 1
    assert {d["layer"] for d in found["differences"] if "pixel" in d["kind"]} == {1, 2}


def test_a_reversed_polarity_is_found(monkeypatch, capsys, here):
    path = here / "foundry" / "manifest.json"
    manifest = json.loads(path.read_text())
    manifest["layers"][0]["drawn"] = "etched"
    path.write_text(json.dumps(manifest))
    status, found, _ = verdict(monkeypatch, capsys, here)
    assert status == 1
    assert any("100" in d["kind"] and d["layer"] == 1 for d in found["differences"])


def test_a_period_off_by_a_nanometre_is_found(monkeypatch, capsys, here):
    def change(top, cell):
        grid = top.references[0].repetition
        top.references[0].repetition = gdstk.Repetition(
            columns=grid.columns, rows=grid.rows, spacing=(grid.spacing[0] + 0.001, grid.spacing[1])
        )

    edit(here, change)
    status, found, _ = verdict(monkeypatch, capsys, here)
    assert status == 1
    assert any("period along x" in d["kind"] for d in found["differences"])


def test_a_mirrored_mark_is_found(monkeypatch, capsys, here):
    def change(top, cell):
        (mark,) = top.polygons
        mark.mirror((0, 0), (0, 1))

    edit(here, change)
    status, found, _ = verdict(monkeypatch, capsys, here)
    assert status == 1
    assert any("mirrored" in d["kind"] for d in found["differences"])


def test_a_sliver_that_breaks_the_rule_is_found(monkeypatch, capsys, here):
    """The record's config is given a rule of two pixels: single pixels then break it."""
    record = read.read(here / "record.h5")
    from dataclasses import replace

    from doe.signoff.verdict import sign_off

    process = record.config.process.model_copy(update={"min_feature": 4e-5, "min_gap": 4e-5})
    strict = replace(record, config=record.config.model_copy(update={"process": process}))
    found = sign_off(strict, here / "foundry" / "mask.gds", None)
    kinds = {difference.kind.split(",")[0] for difference in found.differences}
    assert kinds <= {"narrower than the minimum feature", "narrower than the minimum gap"}
    assert kinds


def cut(path):
    path.write_bytes(path.read_bytes()[:-40])


def emptied(path):
    path.write_bytes(b"")


def no_cells(path):
    gdstk.Library().write_gds(path)


def strange_layer(path):
    library = gdstk.read_gds(path)
    cell = next(c for c in library.cells if c.name == "UNIT_CELL")
    cell.add(gdstk.rectangle((0, 0), (1, 1), layer=77))
    library.write_gds(path)


def turned(path):
    library = gdstk.read_gds(path)
    top = next(c for c in library.cells if c.name == "ELEMENT")
    top.references[0].rotation = 1.5707963267948966
    library.write_gds(path)


def slanted(path):
    library = gdstk.read_gds(path)
    cell = next(c for c in library.cells if c.name == "UNIT_CELL")
    cell.add(gdstk.Polygon([(0, 0), (1, 0), (1, 1)], layer=1))
    library.write_gds(path)


def missing(path):
    path.unlink()


@pytest.mark.parametrize(
    ("spoil", "words"),
    [
        (cut, "cut short"),
        (emptied, "empty"),
        (no_cells, "empty"),
        (strange_layer, "77/0"),
        (turned, "turned"),
        (slanted, "slanted"),
        (missing, "no such layout"),
    ],
)
def test_a_layout_that_cannot_be_judged_is_refused_by_name(monkeypatch, capsys, here, spoil, words):
    spoil(here / "foundry" / "mask.gds")
    status, found, _ = verdict(monkeypatch, capsys, here)
    assert status == 4
    assert found["status"] == "error"
    assert words in found["errors"][0]["problem"]
    assert found["errors"][0]["file"].endswith("mask.gds")


def test_a_missing_manifest_is_refused_and_another_can_be_given(monkeypatch, capsys, here):
    manifest = here / "foundry" / "manifest.json"
    manifest.rename(here / "kept.json")
    assert verdict(monkeypatch, capsys, here)[0] == 4
    assert (
        verdict(monkeypatch, capsys, here, "foundry/mask.gds", "--manifest", here / "kept.json")[0]
        == 0
    )


def test_sign_off_shares_no_code_with_designer_or_exporter():
    import ast

    from helpers import ROOT

    for path in (ROOT / "doe" / "signoff").glob("*.py"):
        for node in ast.walk(ast.parse(path.read_text())):
            if isinstance(node, ast.ImportFrom):
                room = (node.module or "").split(".")[1:2]
                assert room not in (["optics"], ["export"], ["fabrication"]), path


def test_known_patterns_break_the_rule_where_they_should():
    """Patterns of common practice under a rule of 4 pixels, judged by hand."""
    import numpy as np

    from doe.signoff.verdict import corner_only, thin

    def on(*boxes):
        field = np.zeros((24, 24), bool)
        for top, left, bottom, right in boxes:
            field[top:bottom, left:right] = True
        return field

    bar_3 = on((4, 4, 7, 20))
    bar_4 = on((4, 4, 8, 20))
    corners = on((2, 2, 8, 8), (8, 8, 14, 14))
    notch = on((2, 2, 14, 20)) & ~on((2, 10, 8, 12))
    hole = on((2, 2, 20, 20)) & ~on((8, 8, 10, 10))
    seam = on((0, 4, 2, 20), (22, 4, 24, 20))
    four = (4, 4)
    assert thin(bar_3, four).sum() == 3 * 16
    assert not thin(bar_4, four).any()
    assert corner_only(corners).sum() == 1
    assert not corner_only(bar_4).any()
    assert thin(~notch, four).sum() == 6 * 2
    assert not thin(notch, four).any()
    assert thin(~hole, four).sum() == 4
    assert not thin(seam, four).any(), "two and two rows across the seam make four"
