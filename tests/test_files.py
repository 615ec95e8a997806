"""Writes are whole or not there at all; an output folder belongs to one run."""

import contextlib
import errno
import hashlib
import os
import subprocess
import sys
from pathlib import Path

import pytest
from helpers import call, job

from doe import files
from doe.errors import ConfigError, DiskError, OutputError


def failing(number: int):
    """A stand-in for a system call that fails."""

    def fail(*given: object, **named: object) -> None:
        raise OSError(number, os.strerror(number))

    return fail


@pytest.mark.parametrize("number", [errno.ENOSPC, errno.EIO, errno.EDQUOT, errno.EROFS])
@pytest.mark.parametrize("operation", ["replace", "fsync", "open", "write"])
def test_a_failed_write_leaves_the_old_file_and_nothing_else(operation, number, monkeypatch):
    Path("data.bin").write_bytes(b"old")
    name, fault = {
        "replace": ("os.replace", failing(number)),
        "fsync": ("os.fsync", failing(number)),
        "open": ("builtins.open", failing(number)),
        "write": ("builtins.open", opened_on_a_full_disk(number)),
    }[operation]
    with monkeypatch.context() as patch:
        patch.setattr(name, fault)
        with pytest.raises(DiskError) as caught:
            files.write(Path("data.bin"), b"new data")
    assert Path("data.bin").read_bytes() == b"old"
    assert os.listdir() == ["data.bin"]
    assert caught.value.exit_code == 6
    assert os.strerror(number) in str(caught.value)
    assert "data.bin" in str(caught.value)


def opened_on_a_full_disk(number: int):
    """A stand-in for `open` whose files take half of what is written and then fail."""
    plain = open

    def opened(path: Path, mode: str) -> object:
        file = plain(path, mode, buffering=0)

        class Full:
            def __enter__(self) -> "Full":
                return self

            def __exit__(self, *error: object) -> None:
                file.close()

            def write(self, data: bytes) -> None:
                file.write(data[: len(data) // 2])
                raise OSError(number, os.strerror(number))

        return Full()

    return opened


def test_a_quota_that_the_system_enforces_leaves_the_old_file():
    code = "import resource; from pathlib import Path; from doe import errors, files\n"
    code += "resource.setrlimit(resource.RLIMIT_FSIZE, (1000, 1000))\n"
    code += "files.write(Path('data.bin'), bytes(900))\n"
    code += "try: files.write(Path('data.bin'), bytes(5000))\n"
    code += "except errors.DiskError as error: print(error)"
    run = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert os.strerror(errno.EFBIG) in run.stdout
    assert os.listdir() == ["data.bin"]
    assert Path("data.bin").read_bytes() == bytes(900)


def test_the_folder_is_synced_after_the_rename(monkeypatch):
    """A rename outlasts a power loss only once the folder itself is on the disk."""
    order = []
    plain_replace, plain_fsync = os.replace, os.fsync

    def replace(*given: object) -> None:
        order.append("replace")
        plain_replace(*given)

    def fsync(descriptor: int) -> None:
        kind = "folder" if os.path.isdir(f"/proc/self/fd/{descriptor}") else "file"
        order.append(kind)
        plain_fsync(descriptor)

    monkeypatch.setattr(os, "replace", replace)
    monkeypatch.setattr(os, "fsync", fsync)
    files.write(Path("data.bin"), b"new")
    assert order == ["file", "replace", "folder"]


def test_an_interrupt_while_writing_leaves_nothing_over(monkeypatch):
    def stop(descriptor: int) -> None:
        raise KeyboardInterrupt

    Path("data.bin").write_bytes(b"old")
    monkeypatch.setattr(os, "fsync", stop)
    with pytest.raises(KeyboardInterrupt):
        files.write(Path("data.bin"), b"new")
    assert os.listdir() == ["data.bin"]
    assert Path("data.bin").read_bytes() == b"old"


def test_a_link_is_replaced_and_its_target_stays():
    Path("target.bin").write_bytes(b"precious")
    Path("data.bin").symlink_to("target.bin")
    files.write(Path("data.bin"), b"new")
    assert Path("target.bin").read_bytes() == b"precious"
    assert Path("data.bin").read_bytes() == b"new"


def test_the_lock_refuses_a_second_run_and_ends_with_the_first():
    with files.output_folder(Path("out")):
        with pytest.raises(OutputError, match="another run") as caught:
            files.output_folder(Path("out")).__enter__()
        assert caught.value.exit_code == 5
    with files.output_folder(Path("out")):
        assert os.listdir("out") == []


def test_the_lock_refuses_a_second_process_and_leaves_its_files():
    code = "import sys; from pathlib import Path; from doe import files\n"
    code += "with files.output_folder(Path('out')):\n"
    code += "    Path('out/.big.1.part').touch(); print('held', flush=True); sys.stdin.read()"
    with subprocess.Popen(
        [sys.executable, "-c", code], stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True
    ) as other:
        assert other.stdout.readline() == "held\n"
        with pytest.raises(OutputError):
            files.output_folder(Path("out")).__enter__()
        assert Path("out/.big.1.part").exists(), "a running process lost its file"
        other.kill()
    with files.output_folder(Path("out")):
        assert os.listdir("out") == [], "left-overs of a killed process stay"


@pytest.mark.parametrize("kind", ["file", "below a file", "device", "dangling link", "NUL"])
def test_a_path_that_is_no_folder_is_refused(kind):
    Path("file").write_text("precious")
    Path("dangling").symlink_to("nowhere")
    path = {
        "file": "file",
        "below a file": "file/deeper/out",
        "device": "/dev/null",
        "dangling link": "dangling",
        "NUL": "out\0put",
    }[kind]
    with pytest.raises(ConfigError) as caught, files.output_folder(Path(path)):
        pass
    assert caught.value.exit_code == 3
    assert "--out" in str(caught.value)
    assert "\0" not in str(caught.value)
    assert Path("file").read_text() == "precious"
    assert not Path("nowhere").exists()


@pytest.mark.parametrize(
    "path", ["a" * 256, "x/" + "é" * 128, "out\x1b[31m", "out\nput", "out\u202eput"]
)
def test_a_name_that_no_folder_can_bear_is_refused(path):
    with pytest.raises(ConfigError) as caught, files.output_folder(Path(path)):
        pass
    assert str(caught.value).isprintable()
    assert os.listdir() == []


def test_a_path_longer_than_the_system_allows_is_refused(monkeypatch, capsys):
    status, _, err = call(monkeypatch, capsys, "run", job(), "--out", "abc/" * 2000)
    assert status in (3, 6)
    assert "Traceback" not in err


def test_a_read_only_folder_is_told():
    os.mkdir("out", 0o555)
    if os.access("out", os.W_OK):
        pytest.skip("this user may write everywhere")
    with pytest.raises(DiskError) as caught, files.output_folder(Path("out")):
        pass
    assert caught.value.exit_code == 6


def test_a_folder_that_cannot_be_written_is_told_before_the_run(monkeypatch, capsys):
    """The probe stands in for a read-only folder, which does not hold back every user."""
    config = job()
    monkeypatch.setattr(os, "fsync", failing(errno.EROFS))
    status, _, err = call(monkeypatch, capsys, "run", config, "--out", "out")
    assert status == 6
    assert os.strerror(errno.EROFS) in err
    assert os.listdir("out") == []


def test_an_existing_record_is_refused_and_stays(monkeypatch, capsys):
    os.mkdir("out")
    Path("out/record.h5").write_bytes(b"precious")
    status, out, err = call(monkeypatch, capsys, "run", job(), "--out", "out")
    assert (status, out) == (5, "")
    assert "out/record.h5" in err
    assert "--resume" in err
    assert Path("out/record.h5").read_bytes() == b"precious"
    assert os.listdir("out") == ["record.h5"]


def test_an_existing_config_is_not_overwritten(monkeypatch, capsys):
    Path("mine.toml").write_text("precious")
    status, _, err = call(monkeypatch, capsys, "new", "grid", "-o", "mine.toml")
    assert status == 5
    assert "mine.toml" in err
    assert Path("mine.toml").read_text() == "precious"


@pytest.mark.parametrize("name", ["nowhere/mine.toml", "a" * 300 + ".toml"])
def test_a_config_that_cannot_be_written_is_told_without_a_traceback(name, monkeypatch, capsys):
    status, _, err = call(monkeypatch, capsys, "new", "grid", "-o", name)
    assert status in (3, 6)
    assert "error: " in err
    assert "; try: " in err


def test_the_hash_is_that_of_the_standard():
    """FIPS 180-2's example "abc"."""
    expected = "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
    assert files.sha256(b"abc") == expected
    assert files.sha256(b"") == hashlib.sha256().hexdigest()


def test_every_descriptor_is_closed():
    before = len(os.listdir("/proc/self/fd"))
    for _ in range(5):
        with files.output_folder(Path("out")) as folder:
            files.write(folder / "data.bin", b"x")
        with contextlib.suppress(ConfigError), files.output_folder(Path("out/data.bin")):
            pass
    assert len(os.listdir("/proc/self/fd")) == before
