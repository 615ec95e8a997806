"""Files the tool leaves: a locked output folder, and writes that are whole or not there at all."""

import fcntl
import hashlib
import os
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path

from doe.errors import ConfigError, DiskError, DoeError, Fault, OutputError

LONGEST_NAME = 255  # bytes, of common file systems
LONGEST_PATH = 4000


@contextmanager
def output_folder(path: Path) -> Iterator[Path]:
    """The folder, made where it is missing, locked against other runs and proved writable.

    Error: ConfigError for a path that cannot be a folder, OutputError where another run holds it,
    DiskError where the disk refuses.
    """
    check_path(path)
    try:
        path.mkdir(parents=True, exist_ok=True)
        descriptor = os.open(path, os.O_RDONLY | os.O_DIRECTORY)
    except OSError as error:
        raise disk_error(path, error) from None
    try:
        lock(descriptor, path)
        for left_over in path.glob(".*.part"):
            left_over.unlink(missing_ok=True)
        probe(path)
        yield path
    finally:
        os.close(descriptor)


def check_path(path: Path) -> None:
    """Refuse an output path that is no folder and cannot become one."""
    text = str(path)
    problem = None
    if len(os.fsencode(path)) > LONGEST_PATH:
        problem = f"the path is longer than {LONGEST_PATH} bytes"
    elif "\0" in text or not text.isprintable():
        problem = "the path holds characters that cannot be printed"
    elif any(len(os.fsencode(part)) > LONGEST_NAME for part in path.parts):
        problem = f"a name in the path is longer than {LONGEST_NAME} bytes"
    elif any(not p.is_dir() for p in (path, *path.parents) if p.exists() or p.is_symlink()):
        problem = "this, or a folder above it, is a file and not a folder"
    if problem:
        allowed = "the path of a folder, there already or not"
        raise ConfigError(Fault(problem, allowed, "give another --out", file=ascii(text)[1:200]))


def lock(descriptor: int, path: Path) -> None:
    """Lock the folder for this process; the lock ends with it, however it ends."""
    try:
        fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except BlockingIOError:
        raise OutputError(
            Fault(
                "another run is writing here",
                "one run in a folder at a time",
                "wait for it, or give another --out",
                file=str(path),
            )
        ) from None
    except OSError as error:  # some network file systems have no locks
        raise disk_error(path, error) from None


def probe(path: Path) -> None:
    """Prove that a file can be made here, before hours of work rely on it."""
    write(path / ".probe", b"")
    (path / ".probe").unlink()


def refuse_existing(path: Path, fix: str) -> None:
    """Refuse to write over a file that is there."""
    if os.path.lexists(path):
        raise OutputError(
            Fault("this file is already there", "nothing is overwritten", fix, file=str(path))
        )


def write(path: Path, data: bytes) -> None:
    """Write a file whole: aside, synced, renamed, the folder synced; the old one stays till then.

    Error: DiskError, the old file untouched and nothing left over.
    """
    part = path.with_name(f".{path.name}.{os.getpid()}.part")
    try:
        try:
            with open(part, "xb") as file:
                file.write(data)
                file.flush()
                os.fsync(file.fileno())
            os.replace(part, path)
        except BaseException:
            with suppress(OSError):  # the first refusal is the one to tell
                part.unlink(missing_ok=True)
            raise
        sync_folder(path.parent)
    except OSError as error:
        raise disk_error(path, error) from None


def sync_folder(path: Path) -> None:
    """Make a rename last through a power loss."""
    descriptor = os.open(path, os.O_RDONLY | os.O_DIRECTORY)
    try:
        os.fsync(descriptor)
    finally:
        os.close(descriptor)


def disk_error(path: Path, error: OSError) -> DoeError:
    """An operating-system refusal in the four parts of a message."""
    return DiskError(
        Fault(
            f"the disk refuses: {error.strerror}",
            "a folder this user may write to, with space left",
            "free some space or give another --out",
            file=str(path),
        )
    )


def sha256(data: bytes) -> str:
    """SHA-256 in hexadecimal."""
    return hashlib.sha256(data).hexdigest()
