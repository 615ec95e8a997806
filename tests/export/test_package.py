"""What an export leaves: files, hashes, and a manifest that tells their meaning."""

import csv
import hashlib
import io
import json
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from helpers import call, job

from doe.config.load import load
from doe.config.made_part import Errors
from doe.errors import ConfigError
from doe.export.orders import order_csv
from doe.export.package import contents
from doe.result import Result, Trace
from doe.scoring import evaluate
from doe.store import write


def result_of(**changes: object) -> Result:
    """A random mask under the small job with changes."""
    config, text = load(job(**({"element__pixels": 16} | changes)))
    level = np.random.default_rng(3).integers(0, 8, config.element.pixels)
    found = evaluate(config, text, level * (2 * np.pi / 8), Errors())
    course = np.array([0.5, 0.6], np.float32)
    return replace(found, trace=Trace(np.array([10, 20]), course, course, course))


def manifest_of(result: Result) -> dict:
    """The manifest of a result."""
    return json.loads(contents(result, "gds")["manifest.json"])


def test_the_manifest_has_the_hash_of_every_other_file():
    package = contents(result_of(), "gds")
    manifest = json.loads(package.pop("manifest.json"))
    assert manifest["files"] == {
        name: hashlib.sha256(data).hexdigest() for name, data in package.items()
    }
    assert {"mask.gds", "orders.csv"} <= set(package)


def test_the_manifest_tells_layers_sizes_and_orientation():
    manifest = manifest_of(result_of())
    assert [layer["layer"] for layer in manifest["layers"]] == [1, 2, 3]
    assert [layer["etch"] for layer in manifest["layers"]] == [1, 2, 3]
    assert {layer["datatype"] for layer in manifest["layers"]} == {0}
    depths = [layer["depth_m"] for layer in manifest["layers"]]
    assert depths == pytest.approx([633e-9 / 0.5 / 2**m for m in (1, 2, 3)])
    assert {layer["drawn"] for layer in manifest["layers"]} == {"standing"}
    assert manifest["period_m"] == pytest.approx([640e-6, 640e-6])
    assert manifest["pixel_pitch_m"] == pytest.approx([40e-6, 40e-6])
    assert manifest["copies"] == [16, 16]
    assert manifest["row_0"] == "smallest y"


def test_the_polarity_is_told_in_words():
    standing = manifest_of(result_of())["layers"][0]
    etched = manifest_of(result_of(process__drawn="etched"))["layers"][0]
    assert (standing["drawn"], etched["drawn"]) == ("standing", "etched")
    assert standing["meaning"] != etched["meaning"]


def test_a_period_that_is_no_whole_number_of_nanometres_is_reported():
    manifest = manifest_of(result_of(element__period=["640.0004 um", "639.9997 um"]))
    assert manifest["period_m"] == pytest.approx([640e-6, 640e-6], rel=1e-12)
    assert manifest["period_rounding_m"] == pytest.approx([-0.4e-9, 0.3e-9], abs=1e-14)
    exact = manifest_of(result_of())["period_rounding_m"]
    assert exact == pytest.approx([0, 0], abs=1e-15)


def test_a_continuous_profile_has_no_masks_to_export():
    with pytest.raises(ConfigError) as caught:
        contents(result_of(element__levels=0), "gds")
    assert caught.value.faults[0].key == "element.levels"


def test_the_same_result_gives_the_same_package():
    assert contents(result_of(), "gds") == contents(result_of(), "gds")


def rows_of(result: Result) -> list[dict[str, str]]:
    """The order table as another program reads it."""
    return list(csv.DictReader(io.StringIO(order_csv(result).decode())))


def test_the_order_table_holds_every_wanted_order_strongest_first():
    result = result_of()
    rows = rows_of(result)
    powers = [float(row["power"]) for row in rows]
    assert powers == sorted(powers, reverse=True)
    wanted = {(int(r["m_y"]), int(r["m_x"])) for r in rows if float(r["target_share"]) > 0}
    assert wanted == {(y, x) for y in (-1, 0, 1) for x in (-1, 0, 1)}
    for row in rows[:20]:
        y, x = int(row["m_y"]) + 8, int(row["m_x"]) + 8
        assert float(row["power"]) == pytest.approx(result.orders.power[y, x], rel=1e-7)
        assert float(row["s_x"]) == pytest.approx(int(row["m_x"]) * 633e-9 / 640e-6, abs=1e-15)


def test_behind_a_lens_the_table_has_places_in_metres():
    lens = {"kind": "lens", "focal_length": "100 mm", "mapping": "f-tan"}
    for row in rows_of(result_of(plane=lens))[:20]:
        sine = int(row["m_y"]) * 633e-9 / 640e-6
        assert float(row["y_m"]) == pytest.approx(0.1 * np.tan(np.arcsin(sine)), rel=1e-7)


def test_orders_that_do_not_propagate_are_left_out():
    """A period of 3 um takes 633 nm no further than order 4; 16 pixels address 7."""
    target = {"kind": "orders", "orders": [[0, 0], [0, 1]]}
    rows = rows_of(result_of(element__period="3 um", target=target))
    reach = [np.hypot(float(row["s_y"]), float(row["s_x"])) for row in rows]
    assert max(reach) < 1
    assert len(rows) > 10


def test_export_writes_the_package_and_never_over_it(monkeypatch, capsys):
    result = result_of()
    write.write(Path("record.h5"), result)
    status, out, err = call(monkeypatch, capsys, "export", "record.h5", "--out", "foundry")
    assert status == 0, err
    for name, data in contents(result, "gds").items():
        assert Path("foundry", name).read_bytes() == data, name
    manifest = json.loads(Path("foundry/manifest.json").read_text())
    for name, digest in manifest["files"].items():
        assert hashlib.sha256(Path("foundry", name).read_bytes()).hexdigest() == digest
        assert name in out
    before = {path: path.read_bytes() for path in Path("foundry").iterdir()}
    status, _, err = call(monkeypatch, capsys, "export", "record.h5", "--out", "foundry")
    assert status == 5
    assert {path: path.read_bytes() for path in Path("foundry").iterdir()} == before


def test_a_damaged_record_is_not_exported(monkeypatch, capsys):
    write.write(Path("record.h5"), result_of())
    data = bytearray(Path("record.h5").read_bytes())
    data[5000] ^= 1
    Path("record.h5").write_bytes(data)
    status, _, err = call(monkeypatch, capsys, "export", "record.h5", "--out", "foundry")
    assert status == 4
    assert "checksum" in err
    assert not Path("foundry").exists()
