"""The height picture, read back by another library's reader."""

import io
from pathlib import Path

import numpy as np
import pytest
from helpers import call, job
from PIL import Image

from doe.store import read


@pytest.fixture
def result(monkeypatch, capsys):
    path = job(element__pixels=[16, 32], element__period=["320 um", "640 um"])
    assert call(monkeypatch, capsys, "run", path, "--out", "out", "--quiet")[0] in (0, 1)
    return read.read(Path("out/record.h5"))


def test_heights_come_back_in_metres_with_the_pixel_size(result):
    from doe.export.height import height_tiff

    with Image.open(io.BytesIO(height_tiff(result))) as picture:
        values = np.asarray(picture)
        tags = picture.tag_v2
    assert values.dtype == np.float32
    np.testing.assert_array_equal(values, result.mask.height[::-1], "row 0 is the largest y")
    step = 633e-9 / (8 * 0.5)  # wavelength / (N (n - 1))
    np.testing.assert_allclose(values, result.mask.levels[::-1] * step, rtol=1e-6)
    assert tags[296] == 3, "centimetres"
    assert float(tags[282]) == pytest.approx(1 / 20e-4, rel=1e-6), "20 um along x"
    assert float(tags[283]) == pytest.approx(1 / 20e-4, rel=1e-6)


def test_an_exported_height_evaluates_to_the_records_scores(result, monkeypatch, capsys):
    import json

    call(monkeypatch, capsys, "export", "out/record.h5")
    status, out, err = call(
        monkeypatch, capsys, "evaluate", "job.toml", "out/foundry/height.tif", "--json"
    )
    assert status in (0, 1), err
    scores = json.loads(out)["scores"]
    assert scores["efficiency"] == pytest.approx(result.scores["efficiency"], rel=1e-6)
