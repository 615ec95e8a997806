"""Records: what is written comes back, and whatever is damaged or hostile is refused."""

import hashlib
import io
import json
import os
import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import h5py
import numpy as np
import pytest
from helpers import job

from doe.config import derived
from doe.config.load import load
from doe.config.made_part import Errors
from doe.errors import FileError
from doe.result import Result, Trace
from doe.scoring import evaluate
from doe.store import read, write
from doe.store.layout import BLOCK

SCORES = {
    "efficiency",
    "efficiency_with_surfaces",
    "uniformity_error",
    "rms_error",
    "zero_order",
    "zero_order_to_mean",
    "worst_stray_to_mean",
    "stray",
    "hottest_to_mean",
    "position_error",
}


def result_of(**changes: object) -> Result:
    """A random mask under the small job with changes, with a trace of three looks."""
    config, text = load(job(**changes))
    generator = np.random.default_rng(7)
    count = config.element.levels
    if count:
        phase = generator.integers(0, count, config.element.pixels) * (2 * np.pi / count)
    else:
        phase = generator.uniform(0, 2 * np.pi, config.element.pixels)
    found = evaluate(config, text, phase, Errors())
    course = [np.array([0.5, 0.4, 0.3], np.float32) * factor for factor in (1, 2, 3)]
    trace = Trace(np.array([10, 20, 25]), *course)
    return replace(found, trace=trace, seconds=1.5, warnings=("mind < the & gap", "zwei"))


@pytest.fixture(scope="module")
def small(tmp_path_factory) -> Result:
    """The result most tests here share."""
    before = os.getcwd()
    os.chdir(tmp_path_factory.mktemp("small"))
    try:
        return result_of(
            limits={"efficiency": ">= 1 %", "zero_order_to_mean": [">= 0.1", "<= 3"]},
            process={"min_feature": "20 um"},
            material={"name": "fused silica"},
        )
    finally:
        os.chdir(before)


def written(result: Result, name: str = "record.h5") -> Path:
    """The path of a record of this result."""
    write.write(Path(name), result)
    return Path(name)


def same_arrays(one: object, other: object) -> None:
    """Assert that two dataclasses hold equal arrays of equal types, phases within float32."""
    for name, value in vars(one).items():
        again = getattr(other, name)
        if value is None:
            assert again is None, name
        elif name in ("phase", "height"):
            np.testing.assert_array_equal(again, value.astype(np.float32), err_msg=name)
        else:
            np.testing.assert_array_equal(again, value, err_msg=name)
            assert again.dtype == value.dtype, name


CASES = {
    "eight levels": {},
    "two levels": {"element__levels": 2},
    "256 levels": {"element__levels": 256},
    "continuous": {"element__levels": 0},
    "one dimension": {"element__pixels": [1, 48], "target__shape": [1, 5]},
    "not square": {"element__pixels": [32, 48], "element__period": ["0.6 mm", "0.7 mm"]},
    "lens": {
        "plane": {"kind": "lens", "focal_length": "100 mm", "mapping": "f-tan"},
        "target__pitch": "100 um",
        "element__period": None,
    },
}


@pytest.mark.parametrize("name", CASES)
def test_a_result_comes_back_from_its_record(name):
    result = result_of(**CASES[name])
    again = read.read(written(result))
    same_arrays(result.mask, again.mask)
    same_arrays(result.orders, again.orders)
    same_arrays(result.trace, again.trace)
    for field in (
        "config",
        "config_text",
        "method",
        "features",
        "scores",
        "bound",
        "limits",
        "warnings",
        "seconds",
        "steps",
        "made_by",
        "status",
    ):
        assert getattr(again, field) == getattr(result, field), field


def test_a_score_that_does_not_apply_comes_back_as_none():
    """Orders have no wanted place, so there is no position error; the JSON says null."""
    result = result_of()
    assert result.scores["position_error"] is None
    assert read.read(written(result)).scores == result.scores


def test_the_same_result_gives_the_same_bytes(small):
    assert write.image(small) == write.image(small)


def test_names_types_and_attributes_are_those_of_the_contract(small):
    with h5py.File(written(small), "r") as file:
        mask = file["mask"]
        types = {name: (mask[name].dtype, mask[name].ndim) for name in mask}
        assert types == {
            "levels": (np.dtype(np.uint8), 2),
            "layers": (np.dtype(bool), 3),
            "height": (np.dtype(np.float32), 2),
            "phase": (np.dtype(np.float32), 2),
        }
        assert [mask[n].attrs["units"] for n in ("height", "phase")] == ["m", "rad"]
        pitch = 640e-6 / 32
        np.testing.assert_allclose(mask.attrs["pixel_pitch"], [pitch, pitch], rtol=1e-15)
        assert mask.attrs["levels"] == 8
        assert mask.attrs["wavelength"] == 633e-9
        assert mask.attrs["min_feature"] == 20e-6
        index = mask.attrs["index"]
        depths = 633e-9 / (index - 1) / np.array([2, 4, 8])  # wavelength / (2^m (n - 1))
        np.testing.assert_allclose(mask.attrs["layer_depths"], depths, rtol=1e-12)
        assert set(file["orders"]) == {"m_y", "m_x", "power", "target"}
        assert set(file["trace"]) == {"step", "loss", "efficiency", "uniformity_error"}
        assert set(file["scores"].attrs) <= SCORES
        assert {"given", "resolved"} <= set(file["config"].attrs)
        assert "target" in file
        for name in ("doe", "jax", "numpy", "seed", "threads", "instruction_set", "config_digest"):
            assert name in file["made_by"].attrs
        assert file.attrs["NX_class"] == "NXroot"
        assert (file.attrs["default"], mask.attrs["signal"]) == ("mask", "levels")


def test_a_continuous_profile_has_no_levels_and_layers():
    with h5py.File(written(result_of(element__levels=0)), "r") as file:
        assert set(file["mask"]) == {"height", "phase"}
        assert file["mask"].attrs["signal"] == "height"
        assert "layer_depths" not in file["mask"].attrs


def test_layer_0_is_the_pi_etch_and_heights_are_in_metres(small):
    """Level = 4 layer 0 + 2 layer 1 + layer 2, and one level is wavelength / 8 (n - 1) high."""
    with h5py.File(written(small), "r") as file:
        layers, levels = file["mask/layers"][()].astype(int), file["mask/levels"][()]
        np.testing.assert_array_equal(4 * layers[0] + 2 * layers[1] + layers[2], levels)
        step = 633e-9 / 8 / (file["mask"].attrs["index"] - 1)
        np.testing.assert_allclose(file["mask/height"][()], levels * step, rtol=1e-6)


def test_the_orders_add_up_to_less_than_the_light(small):
    with h5py.File(written(small), "r") as file:
        power = file["orders/power"][()]
        zero = power[list(file["orders/m_y"]).index(0), list(file["orders/m_x"]).index(0)]
        assert file["scores"].attrs["zero_order"] == zero
        assert 0.5 < power.sum() < 1
        assert file["orders/target"][()].sum() == pytest.approx(1)


def test_the_block_in_front_tells_size_and_hash_of_the_rest(small):
    data = written(small).read_bytes()
    facts = json.loads(data[:BLOCK].split(b"\n")[0])
    assert facts["bytes"] == len(data) - BLOCK
    assert facts["sha256"] == hashlib.sha256(data[BLOCK:]).hexdigest()
    assert data[BLOCK : BLOCK + 8] == b"\x89HDF\r\n\x1a\n"  # any HDF5 viewer finds it here


def refused(data: bytes) -> None:
    """Assert that these bytes are refused as a record."""
    Path("bad.h5").write_bytes(data)
    with pytest.raises(FileError) as caught:
        read.read(Path("bad.h5"))
    assert caught.value.exit_code == 4
    assert "bad.h5" in str(caught.value)


def test_every_damaged_byte_of_the_block_is_seen(small):
    """The padding too: a file that was touched anywhere is not the file that was written."""
    data = write.image(small)
    generator = np.random.default_rng(1)
    silent = []
    for place in range(BLOCK):
        bad = bytearray(data)
        bad[place] ^= int(generator.integers(1, 256))
        Path("bad.h5").write_bytes(bad)
        try:
            read.read(Path("bad.h5"))
            silent.append(place)
        except FileError:
            pass
    assert silent == []


def test_200_damaged_bytes_are_all_seen(small):
    data = write.image(small)
    generator = np.random.default_rng(2)
    for _ in range(200):
        bad = bytearray(data)
        bad[int(generator.integers(BLOCK, len(data)))] ^= int(generator.integers(1, 256))
        refused(bytes(bad))


def test_a_record_cut_short_or_made_longer_is_refused(small):
    data = write.image(small)
    for length in (0, 1, 8, 100, BLOCK - 1, BLOCK, BLOCK + 8, len(data) // 2, len(data) - 1):
        refused(data[:length])
    refused(data + b"\0")
    refused(data[BLOCK:])


@pytest.mark.parametrize(
    "line",
    [
        b"",
        b"[]",
        b"{}",
        b"null",
        b'{"format": "doe record"}',
        b'{"format": 3}',
        b'{"format": "doe record", "version": [[1]]}',
        b"[" * 400,
        b"\xff\xfe{}",
        b"9" * 400,
    ],
)
def test_a_strange_block_is_refused(line, small):
    refused((line + b"\n").ljust(BLOCK, b"\0") + write.image(small)[BLOCK:])


def test_a_newer_version_is_named(small):
    data = write.image(small)
    facts = json.loads(data[:BLOCK].split(b"\n")[0]) | {"version": 99}
    Path("newer.h5").write_bytes((json.dumps(facts) + "\n").encode().ljust(BLOCK, b"\0"))
    with pytest.raises(FileError, match="version 99"):
        read.read(Path("newer.h5"))


@pytest.mark.parametrize("kind", ["missing", "folder", "fifo", "device", "text"])
def test_what_is_no_record_at_all_is_refused(kind):
    path = Path("odd.h5")
    if kind == "folder":
        path.mkdir()
    elif kind == "fifo":
        os.mkfifo(path)
    elif kind == "text":
        path.write_text("no record")
    with pytest.raises(FileError):
        read.read(Path("/dev/zero") if kind == "device" else path)


def forged(small: Result, change, name: str) -> None:
    """A record changed by hand, its checksum set right again."""
    memory = io.BytesIO(write.image(small))
    with h5py.File(memory, "r+") as file:
        change(file)
    rest = memory.getvalue()[BLOCK:]
    facts = {"format": "doe record", "version": 1, "bytes": len(rest)}
    facts["sha256"] = hashlib.sha256(rest).hexdigest()
    Path(name).write_bytes((json.dumps(facts) + "\n").encode().ljust(BLOCK, b"\0") + rest)


def put(name: str, data: object, **options: object):
    """A change that replaces a dataset."""

    def change(file: h5py.File) -> None:
        del file[name]
        file.create_dataset(name, data=data, **options)

    return change


def link(name: str, target: object):
    """A change that replaces an object by a link."""

    def change(file: h5py.File) -> None:
        del file[name]
        file[name] = target

    return change


def attribute(group: str, name: str, value: object):
    """A change that replaces an attribute."""

    def change(file: h5py.File) -> None:
        file[group].attrs[name] = value

    return change


def without(name: str):
    """A change that removes an object."""

    def change(file: h5py.File) -> None:
        del file[name]

    return change


def without_attribute(group: str, name: str):
    """A change that removes an attribute."""

    def change(file: h5py.File) -> None:
        del file[group].attrs[name]

    return change


def huge(file: h5py.File) -> None:
    """2^20 x 2^20 levels declared in a file of a few kilobytes."""
    del file["mask/levels"]
    file.create_dataset("mask/levels", (2**20, 2**20), np.uint8, chunks=(64, 64))


def raw(file: h5py.File) -> None:
    """A phase whose bytes would come out of another file."""
    del file["mask/phase"]
    file.create_dataset(
        "mask/phase", (32, 32), np.float32, external=[("other.bin", 0, h5py.h5f.UNLIMITED)]
    )


def virtual(file: h5py.File) -> None:
    """A phase that is read from another file."""
    del file["mask/phase"]
    layout = h5py.VirtualLayout((32, 32), np.float32)
    layout[:] = h5py.VirtualSource("other.h5", "phase", (32, 32))
    file.create_virtual_dataset("mask/phase", layout)


def loop(file: h5py.File) -> None:
    """A group that contains itself in the mask's place."""
    del file["mask"]
    file["mask"] = h5py.SoftLink("/mask")


PHASE = np.zeros((32, 32), np.float32)
NAN = np.full((32, 32), np.nan, np.float32)
LEVELS = np.zeros((32, 32), np.uint8)
HOSTILE = {
    "external link to a dataset": link("mask/phase", h5py.ExternalLink("other.h5", "/phase")),
    "external link to a pipe": link("mask/phase", h5py.ExternalLink("pipe", "/phase")),
    "external link to a group": link("mask", h5py.ExternalLink("other.h5", "/mask")),
    "external link of a group to a pipe": link("mask", h5py.ExternalLink("pipe", "/mask")),
    "external link for the config": link("config", h5py.ExternalLink("other.h5", "/config")),
    "soft link to a dataset": link("mask/phase", h5py.SoftLink("/mask/height")),
    "dangling link": link("mask/phase", h5py.SoftLink("/nowhere")),
    "link to itself": loop,
    "raw external storage": raw,
    "virtual dataset": virtual,
    "huge declared shape": huge,
    "group for a dataset": link("mask/phase", h5py.SoftLink("/orders")),
    "dataset for a group": put("mask", PHASE),
    "dataset for the scores": put("scores", PHASE),
    "text for numbers": put("mask/phase", "text"),
    "complex": put("mask/phase", PHASE.astype(complex)),
    "float levels": put("mask/levels", PHASE),
    "16-bit levels": put("mask/levels", LEVELS.astype(np.uint16)),
    "half precision": put("mask/phase", PHASE.astype(np.float16)),
    "three axes": put("mask/phase", PHASE[None]),
    "not finite": put("mask/phase", NAN),
    "powers not finite": put("orders/power", NAN.astype(float)),
    "empty": put("mask/phase", h5py.Empty("f")),
    "another shape of the phase": put("mask/phase", PHASE[:8]),
    "another shape of all": lambda file: [
        change(file)
        for change in (
            put("mask/phase", PHASE[:8, :8]),
            put("mask/height", PHASE[:8, :8]),
            put("mask/levels", LEVELS[:8, :8]),
            put("mask/layers", np.zeros((3, 8, 8), bool)),
        )
    ],
    "another shape of the orders": put("orders/m_x", np.arange(5)),
    "levels beyond the config": put("mask/levels", LEVELS + 200),
    "layers of other levels": put("mask/layers", np.zeros((3, 32, 32), bool)),
    "a layer too many": put("mask/layers", np.zeros((4, 32, 32), bool)),
    "levels left out": without("mask/levels"),
    "mask left out": without("mask"),
    "config left out": without("config"),
    "bound left out": without("scores/bound"),
    "steps left out": without_attribute("made_by", "steps"),
    "config is no JSON": attribute("config", "resolved", "{"),
    "config is another thing": attribute("config", "resolved", "[1, 2]"),
    "config nested without end": attribute("config", "resolved", "[" * 30_000),
    "a score that is text": attribute("scores", "efficiency", "much"),
    "a score that is NaN": attribute("scores", "efficiency", np.nan),
    "a score that is no score": attribute("scores", "<script>", 1.0),
    "seconds NaN": attribute("made_by", "seconds", np.nan),
    "bound NaN": attribute("scores/bound", "efficiency", np.nan),
    "bound 0": attribute("scores/bound", "efficiency", 0.0),
    "bound text": attribute("scores/bound", "efficiency", "all"),
    "bound of a new kind": attribute("scores/bound", "kind", "guessed"),
    "warnings that are a number": attribute("made_by", "warnings", 3),
}

READER = """
import sys
from pathlib import Path
from doe.errors import FileError
from doe.store.read import read
for path in sys.argv[1:]:
    try:
        read(Path(path))
        print(path, "accepted", sep="\\t", flush=True)
    except FileError:
        print(path, "refused", sep="\\t", flush=True)
    except BaseException as error:
        print(path, repr(error)[:200], sep="\\t", flush=True)
"""


def outcomes(names: list[str]) -> dict[str, str]:
    """How a fresh process, without the type checks of the tests, takes each file."""
    command = [sys.executable, "-c", READER, *names]
    try:
        run = subprocess.run(command, capture_output=True, text=True, timeout=20, check=False)
        text = run.stdout
    except subprocess.TimeoutExpired as error:
        text = (error.stdout or b"").decode()
    return dict(line.split("\t", 1) for line in text.splitlines())


@pytest.fixture(scope="module")
def taken(small, tmp_path_factory) -> dict[str, str]:
    """The outcome of every hostile record, a pipe and a whole record lying beside them."""
    before = os.getcwd()
    os.chdir(tmp_path_factory.mktemp("hostile"))
    try:
        os.mkfifo("pipe")
        Path("other.bin").write_bytes(bytes(4096))
        written(small, "other.h5")
        with h5py.File("other.h5", "r+") as file:
            file["phase"] = PHASE
        for number, change in enumerate(HOSTILE.values()):
            forged(small, change, f"{number}.h5")
        forged(small, lambda file: None, "whole.h5")
        quick = [f"{i}.h5" for i, name in enumerate(HOSTILE) if "pipe" not in name]
        found = outcomes([*quick, "whole.h5"])
        for number, name in enumerate(HOSTILE):
            if "pipe" in name:
                found |= outcomes([f"{number}.h5"])
        return found
    finally:
        os.chdir(before)


def test_a_forged_record_with_nothing_changed_is_accepted(taken):
    """Else the refusals below would say nothing."""
    assert taken["whole.h5"] == "accepted"


@pytest.mark.parametrize("name", HOSTILE)
def test_a_hostile_record_with_a_right_checksum_is_refused(name, taken):
    number = list(HOSTILE).index(name)
    assert taken.get(f"{number}.h5", "it hangs or dies") == "refused"


def test_an_unchanged_record_is_not_written_to_by_reading(small):
    path = written(small)
    before = path.read_bytes()
    read.read(path)
    assert path.read_bytes() == before


def test_the_rule_of_the_record_is_that_of_the_config(small):
    again = read.read(written(small))
    feature, gap = derived.rule_pixels(small.config)
    assert {(f.rule, f.gap_rule) for f in again.features} == {(feature, gap)}
