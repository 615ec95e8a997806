"""record.h5 to Result: checksum first, then guarded HDF5, FileError on anything amiss."""

import hashlib
import io
import json
from pathlib import Path
from typing import Any

import h5py
import numpy as np

from doe.config import load
from doe.config.derived import rule_pixels
from doe.config.schema import Config
from doe.errors import Fault, FileError
from doe.result import (
    Bound,
    FeatureReport,
    Mask,
    OrderTable,
    Result,
    Trace,
    judge_limits,
)
from doe.store.layout import BLOCK, FORMAT, LARGEST, VERSION

MOST_VALUES = 400_000_000  # of one dataset; a guard against files that claim impossible sizes
FILTERS = {"gzip", None}


def read(path: Path) -> Result:
    """The result in a record. Error: FileError where the file is damaged or no record."""
    data = read_bytes(path)
    check_head(data, path)
    try:
        with h5py.File(io.BytesIO(data), "r") as file:
            return result_of(file)
    except (OSError, RuntimeError, KeyError, ValueError, TypeError, AssertionError) as error:
        raise unfit(path, f"the record does not hold what it should: {error}") from None


def read_bytes(path: Path) -> bytes:
    """All bytes of a regular file of bearable size."""
    try:
        if not path.is_file():
            raise unfit(path, "there is no such file, or it is no regular file")
        if path.stat().st_size > LARGEST:
            raise unfit(path, f"the file is larger than {LARGEST} bytes")
        return path.read_bytes()
    except (OSError, ValueError) as error:
        raise unfit(path, f"cannot be read: {error}") from None


def unfit(path: Path, problem: str) -> FileError:
    """The error of a file that is no whole record."""
    return FileError(
        Fault(
            problem,
            f"a record of this tool, format version {VERSION}",
            "run the design again, or fetch the file again",
            file=str(path),
        )
    )


def check_head(data: bytes, path: Path) -> None:
    """Prove format, version, size and SHA-256 before HDF5 sees a byte."""
    try:
        facts = json.loads(data[:BLOCK].split(b"\n", 1)[0])
        known = facts["format"] == FORMAT
    except (ValueError, KeyError, TypeError, RecursionError):
        known = False
    if not known:
        raise unfit(path, "this is no record of this tool")
    if facts.get("version") != VERSION:
        raise unfit(path, f"this record has format version {facts.get('version')!r:.20}")
    rest = data[BLOCK:]
    if facts.get("bytes") != len(rest):
        raise unfit(path, f"the record is cut short or too long: {len(rest)} bytes")
    if facts.get("sha256") != hashlib.sha256(rest).hexdigest():
        raise unfit(path, "the record is damaged: its checksum differs")


def dataset(group: h5py.Group, name: str, kinds: str, ndim: int) -> np.ndarray[Any, Any]:
    """An array read only after its link, type, shape, size and filters have been looked at."""
    if not isinstance(group.get(name, getlink=True), h5py.HardLink):
        raise ValueError(f"{name} is missing or points elsewhere")
    found = group[name]
    if not isinstance(found, h5py.Dataset) or found.is_virtual or found.external:
        raise ValueError(f"{name} is no plain dataset")
    if found.dtype.kind not in kinds or found.ndim != ndim or found.size > MOST_VALUES:
        raise ValueError(f"{name} has an unfitting type or shape")
    if found.compression not in FILTERS:
        raise ValueError(f"{name} uses an unknown filter")
    values: np.ndarray[Any, Any] = found[()]
    if kinds == "f" and not np.all(np.isfinite(values)):
        raise ValueError(f"{name} holds numbers that are not finite")
    return values


def result_of(file: h5py.File) -> Result:
    """The result in an open file."""
    config = load.from_record(str(file["config"].attrs["resolved"]))
    scores = {name: float(value) for name, value in file["scores"].attrs.items()}
    made_by = dict(file["made_by"].attrs)
    bound = file["scores/bound"].attrs
    return Result(
        config=config,
        config_text=str(file["config"].attrs["given"]),
        method=str(made_by.pop("method")),
        mask=mask_of(file["mask"]),
        features=features_of(file["mask"], config),
        orders=orders_of(file["orders"]),
        scores=dict(scores),
        bound=Bound(bound["efficiency"], bound["levels_factor"], bound["kind"]),
        limits=judge_limits(config.limits, dict(scores)),
        trace=Trace(
            step=dataset(file["trace"], "step", "iu", 1),
            loss=dataset(file["trace"], "loss", "f", 1),
            efficiency=dataset(file["trace"], "efficiency", "f", 1),
            uniformity_error=dataset(file["trace"], "uniformity_error", "f", 1),
        ),
        steps=int(made_by.pop("steps")),
        seconds=float(made_by.pop("seconds")),
        warnings=tuple(str(text) for text in made_by.pop("warnings")),
        made_by={name: str(value) for name, value in made_by.items()},
    )


def mask_of(group: h5py.Group) -> Mask:
    """The relief; a continuous profile has no levels and layers."""
    has_levels = "levels" in group
    return Mask(
        phase=dataset(group, "phase", "f", 2),
        height=dataset(group, "height", "f", 2),
        levels=dataset(group, "levels", "u", 2) if has_levels else None,
        layers=dataset(group, "layers", "b", 3) if has_levels else None,
    )


def features_of(group: h5py.Group, config: Config) -> tuple[FeatureReport, ...]:
    """The rule and what was measured of each layer."""
    feature, gap = rule_pixels(config)
    names = ("breaches", "corner_contacts", "edge_length")
    columns = [group.attrs.get(name, []) for name in names]
    return tuple(
        FeatureReport(feature, gap, *(int(value) for value in row))
        for row in zip(*columns, strict=True)
    )


def orders_of(group: h5py.Group) -> OrderTable:
    """The order table."""
    return OrderTable(
        m_y=dataset(group, "m_y", "iu", 1),
        m_x=dataset(group, "m_x", "iu", 1),
        power=dataset(group, "power", "f", 2),
        target=dataset(group, "target", "f", 2),
    )
