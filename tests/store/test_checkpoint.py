"""Checkpoints: the newest whole one is read, a damaged one never."""

import errno
import json
import os
from pathlib import Path

import numpy as np
import pytest
from helpers import call, job

from doe.config.load import load
from doe.errors import DiskError, FileError
from doe.store import checkpoint

HERE = Path()
ARRAYS = [
    np.arange(6, dtype=np.float32).reshape(2, 3),
    np.array([1 + 2j, np.inf], np.complex64),
    np.array(7, np.int32),
    np.zeros((0, 4)),
]


def written(*turns: int) -> None:
    """Checkpoints of these turns, each with its number as one more array."""
    for turn in turns:
        checkpoint.write(HERE, turn, {"look": turn}, [*ARRAYS, np.array(turn)])


def damaged(path: Path, place: int = -5) -> None:
    """One byte of a file changed."""
    data = bytearray(path.read_bytes())
    data[place] ^= 0x10
    path.write_bytes(data)


def test_facts_and_arrays_come_back_bit_for_bit():
    written(0)
    facts, arrays = checkpoint.read(HERE)
    assert (facts["look"], facts["turn"]) == (0, 0)
    for one, other in zip(ARRAYS, arrays[:-1], strict=True):
        assert one.dtype == other.dtype
        assert one.shape == other.shape
        assert one.tobytes() == other.tobytes()


def test_without_a_checkpoint_there_is_none():
    assert checkpoint.read(HERE) is None


def test_the_last_two_are_kept_and_the_newest_is_read():
    written(*range(11))
    assert len(os.listdir()) == 2
    assert checkpoint.read(HERE)[0]["look"] == 10
    assert int(checkpoint.read(HERE)[1][-1]) == 10


@pytest.mark.parametrize("place", [0, 5, 20, 60, 100, 300, -5])
def test_an_older_one_is_used_where_the_newest_is_damaged(place):
    written(3, 4)
    damaged(HERE / checkpoint.NAMES[0], place)
    facts, arrays = checkpoint.read(HERE)
    assert facts["look"] == 3
    assert int(arrays[-1]) == 3


@pytest.mark.parametrize("length", [0, 1, 17, 50, 90, 400])
def test_one_cut_short_is_damaged_too(length):
    written(3, 4)
    path = HERE / checkpoint.NAMES[0]
    path.write_bytes(path.read_bytes()[:length])
    assert checkpoint.read(HERE)[0]["look"] == 3


def test_all_damaged_is_an_error():
    written(3, 4)
    for name in checkpoint.NAMES:
        damaged(HERE / name)
    with pytest.raises(FileError) as caught:
        checkpoint.read(HERE)
    assert caught.value.exit_code == 4
    assert "damaged" in str(caught.value)
    assert "--resume" in str(caught.value)


def test_50_damaged_bytes_are_all_seen():
    written(0)
    path = HERE / checkpoint.NAMES[0]
    data = path.read_bytes()
    generator = np.random.default_rng(3)
    for place in generator.integers(0, len(data), 50):
        path.write_bytes(data)
        damaged(path, int(place))
        with pytest.raises(FileError):
            checkpoint.read(HERE)


def test_a_full_disk_leaves_both_checkpoints(monkeypatch):
    def full(descriptor: int) -> None:
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    written(0, 1)
    with monkeypatch.context() as patch:
        patch.setattr(os, "fsync", full)
        with pytest.raises(DiskError):
            written(2)
    assert sorted(os.listdir()) == sorted(checkpoint.NAMES)
    assert checkpoint.read(HERE)[0]["look"] == 1


def test_a_finished_run_leaves_none():
    written(0, 1)
    checkpoint.remove(HERE)
    assert os.listdir() == []
    checkpoint.remove(HERE)


def test_a_checkpoint_of_another_config_is_refused(monkeypatch, capsys):
    os.mkdir("out")
    facts = {"config_digest": "0" * 64, "method": "gradient", "batch": 0, "look": 1}
    checkpoint.write(Path("out"), 0, facts, ARRAYS)
    status, out, err = call(monkeypatch, capsys, "run", job(), "--out", "out", "--resume", "--json")
    assert status == 4, err
    (fault,) = json.loads(out)["errors"]
    assert "another config" in fault["problem"]
    assert fault["file"] == "out"


def test_a_checkpoint_of_another_method_is_refused(monkeypatch, capsys):
    from doe.cli.session import checkpoint_facts

    os.mkdir("out")
    path = job()
    config, _ = load(path)
    facts = checkpoint_facts(config, "weighted") | {"batch": 0, "look": 1}
    checkpoint.write(Path("out"), 0, facts, ARRAYS)
    status, _, _ = call(monkeypatch, capsys, "run", path, "--out", "out", "--resume")
    assert status == 4


def test_a_checkpoint_with_other_arrays_is_refused(monkeypatch, capsys):
    """As an older version of the program with another optimiser would leave it."""
    from doe.cli.session import checkpoint_facts

    os.mkdir("out")
    path = job()
    config, _ = load(path)
    facts = checkpoint_facts(config, "gradient") | {"batch": 0, "look": 1}
    checkpoint.write(Path("out"), 0, facts, ARRAYS)
    status, _, err = call(monkeypatch, capsys, "run", path, "--out", "out", "--resume")
    assert status == 4
    assert "Traceback" not in err


def test_all_damaged_checkpoints_stop_a_resume(monkeypatch, capsys):
    os.mkdir("out")
    for name in checkpoint.NAMES:
        Path("out", name).write_bytes(b"junk")
    status, _, err = call(monkeypatch, capsys, "run", job(), "--out", "out", "--resume")
    assert status == 4
    assert "out/checkpoint" in err


def test_a_run_without_resume_does_not_lose_a_checkpoint_silently(monkeypatch, capsys):
    """Hours of work may lie in it: the user has to say what becomes of it."""
    os.mkdir("out")
    checkpoint.write(Path("out"), 0, {"config_digest": "0" * 64}, ARRAYS)
    status, _, err = call(
        monkeypatch, capsys, "run", job(solver__starts=1, solver__steps=1), "--out", "out"
    )
    assert status == 5, err
    assert "--resume" in err
