"""Masks from elsewhere: levels, heights and phases, and files that are no mask."""

import struct
from pathlib import Path

import h5py
import numpy as np
import pytest
from helpers import call, evaluate, job
from PIL import Image

from doe.config.load import load
from doe.errors import DoeError, FileError
from doe.store.mask import read_phase

SHAPE = (32, 32)
LEVELS = np.random.default_rng(5).integers(0, 8, SHAPE).astype(np.uint8)
STEP = 2 * np.pi / 8
HEIGHT = 633e-9 / (1.5 - 1)  # of a whole turn in air


def phase_of(name: str, kind: str | None = None, **changes: object) -> np.ndarray:
    """The phase the program reads from a file."""
    return read_phase(Path(name), kind, load(job(**changes))[0])


def test_bytes_are_levels():
    np.save("mask.npy", LEVELS)
    np.testing.assert_allclose(phase_of("mask.npy"), LEVELS * STEP, rtol=1e-15)


def test_floats_are_phases_and_are_not_rounded():
    phase = np.random.default_rng(6).uniform(-10, 10, SHAPE)
    np.save("mask.npy", phase)
    np.testing.assert_array_equal(phase_of("mask.npy"), phase)


def test_heights_are_turned_into_phases():
    np.save("mask.npy", LEVELS * (HEIGHT / 8))
    np.testing.assert_allclose(phase_of("mask.npy", "height"), LEVELS * STEP, rtol=1e-12)


def test_whole_numbers_of_any_type_may_be_levels():
    np.save("mask.npy", LEVELS.astype(np.int64))
    np.testing.assert_allclose(phase_of("mask.npy", "levels"), LEVELS * STEP, rtol=1e-15)


def test_a_tiff_holds_heights_with_the_largest_y_on_top():
    heights = (LEVELS * (HEIGHT / 8)).astype(np.float32)
    Image.fromarray(heights[::-1]).save("mask.tif")
    np.testing.assert_allclose(phase_of("mask.tif"), LEVELS * STEP, rtol=1e-6)


def test_no_file_is_the_bare_aperture():
    assert not read_phase(None, None, load(job())[0]).any()


def test_all_three_ways_of_giving_a_mask_score_the_same(monkeypatch, capsys):
    by_levels = evaluate(monkeypatch, capsys, LEVELS)["scores"]
    by_phase = evaluate(monkeypatch, capsys, LEVELS * STEP)["scores"]
    by_height = evaluate(monkeypatch, capsys, LEVELS * (HEIGHT / 8), "--as", "height")["scores"]
    for name, value in by_levels.items():
        if value is None:
            assert (by_phase[name], by_height[name]) == (None, None)
        else:
            assert (by_phase[name], by_height[name]) == pytest.approx((value, value), rel=1e-9)


def test_a_mask_off_the_levels_is_scored_as_it_is_with_a_warning(monkeypatch, capsys):
    """All pixels at 1 rad: no light leaves the zero order, whatever the phase."""
    result = evaluate(monkeypatch, capsys, np.full(SHAPE, 1.0))
    assert any("off the levels" in text for text in result["warnings"])
    assert result["scores"]["zero_order"] == pytest.approx(1, abs=1e-12)


def tiff(width: int, height: int) -> bytes:
    """The head of a float32 TIFF of this size, with hardly any pixels behind it."""
    tags = [(256, 4, width), (257, 4, height), (258, 3, 32), (259, 3, 1), (262, 3, 1)]
    tags += [(273, 4, 200), (277, 3, 1), (278, 4, height), (279, 4, 4 * 16), (339, 3, 3)]
    entries = b"".join(struct.pack("<HHII", tag, kind, 1, value) for tag, kind, value in tags)
    return b"II*\0" + struct.pack("<IH", 8, len(tags)) + entries + bytes(104)


def npy(header: str) -> bytes:
    """A `.npy` file with this header and no data."""
    text = header.encode("latin1")
    return b"\x93NUMPY\x01\x00" + struct.pack("<H", len(text)) + text


NPY = "{'descr': '<f8', 'fortran_order': False, 'shape': (%s)}\n"
UNREADABLE = {
    "empty.npy": b"",
    "text.npy": b"levels",
    "zip.npy": b"PK\x03\x04" + b"junk" * 10,
    "huge.npy": npy(NPY % "1048576, 1048576"),
    "negative.npy": npy(NPY % "-1, 32"),
    "nonsense.npy": npy('{"a": (((("""\n  '),
    "deep.npy": npy("(" * 9000),
    "cut.npy": npy(NPY % "32, 32") + bytes(100),
    "pickle.npy": npy("{'descr': '|O', 'fortran_order': False, 'shape': (1,)}\n")
    + b"cos\nsystem\n",
    "empty.tif": b"",
    "text.tif": b"levels",
    "cut.tif": tiff(32, 32),
    "cut_head.tif": tiff(32, 32)[:60],
    "bomb.tif": tiff(60_000, 60_000),
    "large.tif": tiff(12_000, 12_000),
    "text.h5": b"levels",
    "mask.png": b"\x89PNG\r\n\x1a\n" + b"junk" * 10,
    "mask": b"junk",
}


@pytest.mark.parametrize("name", UNREADABLE)
def test_a_file_that_is_no_mask_is_refused(name, monkeypatch, capsys):
    config = job()
    Path(name).write_bytes(UNREADABLE[name])
    status, out, err = call(monkeypatch, capsys, "evaluate", config, name)
    assert status in ((4, 7) if name in ("bomb.tif", "huge.npy") else (4,)), err
    assert (out, "Traceback" in err) == ("", False)
    assert f"error: {name}: " in err


@pytest.mark.parametrize(
    ("values", "kind", "words"),
    [
        (np.zeros((32, 31)), None, "[32, 31]"),
        (np.zeros((2, 32, 32)), None, "[2, 32, 32]"),
        (np.full(SHAPE, np.nan), None, "finite"),
        (np.full(SHAPE, np.inf), None, "finite"),
        (np.zeros(SHAPE, complex), None, "real numbers"),
        (np.zeros(SHAPE, "U3"), None, "real numbers"),
        (np.full(SHAPE, 8, np.uint8), None, "8 to 8"),
        (np.full(SHAPE, -1), "levels", "-1 to -1"),
        (np.zeros(SHAPE, [("a", "f8")]), None, "real numbers"),
    ],
)
def test_an_array_that_is_no_mask_of_this_config_is_refused(values, kind, words):
    np.save("mask.npy", values)
    with pytest.raises(FileError) as caught:
        phase_of("mask.npy", kind)
    assert words in str(caught.value)


def test_levels_for_a_continuous_profile_are_refused():
    np.save("mask.npy", LEVELS)
    with pytest.raises(FileError):
        phase_of("mask.npy", element__levels=0)


def test_a_half_level_is_taken_as_it_is():
    np.save("mask.npy", np.full(SHAPE, 2.5))
    np.testing.assert_allclose(phase_of("mask.npy", "levels"), 2.5 * STEP, rtol=1e-15)


def test_a_missing_mask_is_refused(monkeypatch, capsys):
    for name in ("none.npy", "none.tif", "none.h5"):
        status, _, err = call(monkeypatch, capsys, "evaluate", job(), name)
        assert status == 4
        assert name in err


def test_a_plain_hdf5_file_is_no_record():
    with h5py.File("plain.h5", "w") as file:
        file["mask/levels"] = LEVELS
    with pytest.raises(DoeError, match="no record"):
        phase_of("plain.h5")
