"""Checkpoints of an unfinished run: arrays and a few facts, whole and checksummed."""

import hashlib
import io
import json
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from doe import files
from doe.errors import Fault, FileError

MAGIC = b"doe checkpoint 1\n"
NAMES = ("checkpoint.0", "checkpoint.1")  # written by turns, so that the last but one survives


def write(folder: Path, turn: int, facts: dict[str, Any], arrays: list[NDArray[Any]]) -> None:
    """Write the checkpoint of this turn whole, the one before it untouched."""
    memory = io.BytesIO()
    text = np.frombuffer(json.dumps(facts | {"turn": turn}).encode(), np.uint8)
    leaves: dict[str, Any] = {f"leaf_{i}": array for i, array in enumerate(arrays)}
    np.savez(memory, facts=text, **leaves)
    body = memory.getvalue()
    digest = hashlib.sha256(body).hexdigest().encode()
    files.write(folder / NAMES[turn % 2], MAGIC + digest + b"\n" + body)


def read(folder: Path) -> tuple[dict[str, Any], list[NDArray[Any]]] | None:
    """Facts and arrays of the newest whole checkpoint; None where there is none.

    Error: FileError where checkpoints are there and none is whole.
    """
    there = [folder / name for name in NAMES if (folder / name).is_file()]
    whole = [found for path in there if (found := load(path)) is not None]
    if there and not whole:
        raise FileError(
            Fault(
                "every checkpoint here is damaged",
                "a whole checkpoint",
                "run without --resume into another --out",
                file=str(there[0]),
            )
        )
    return max(whole, key=lambda found: found[0]["turn"], default=None)


def load(path: Path) -> tuple[dict[str, Any], list[NDArray[Any]]] | None:
    """Facts and arrays of a checkpoint, None where it is damaged."""
    data = path.read_bytes()
    digest, _, body = data[len(MAGIC) :].partition(b"\n")
    if not data.startswith(MAGIC) or hashlib.sha256(body).hexdigest().encode() != digest:
        return None
    with np.load(io.BytesIO(body), allow_pickle=False) as archive:
        facts: dict[str, Any] = json.loads(archive["facts"].tobytes())
        return facts, [archive[f"leaf_{i}"] for i in range(len(archive.files) - 1)]


def remove(folder: Path) -> None:
    """Take the checkpoints of a finished run away."""
    for name in NAMES:
        (folder / name).unlink(missing_ok=True)
