"""record.h5 to Result: checksum first, then guarded HDF5, FileError on anything amiss."""

import io
import json
import math
from pathlib import Path
from typing import Any, get_args

import h5py
import numpy as np
from numpy.typing import NDArray

from doe.config import load
from doe.config.derived import mask_count, rule_pixels
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
from doe.store.layout import BLOCK, FORMAT, LARGEST, SCORES, VERSION, head

MOST_VALUES = 400_000_000  # of one dataset; a guard against files that claim impossible sizes
FILTERS = {"gzip", None}


def read(path: Path) -> Result:
    """The result in a record. Error: FileError where the file is damaged or no record."""
    data = read_bytes(path)
    check_head(data, path)
    try:
        with h5py.File(io.BytesIO(data), "r") as file:
            return result_of(file)
    except Exception as error:  # HDF5 and its reader may raise anything on a hostile file
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
    if data[:BLOCK] != head(data):
        raise unfit(path, "the record is damaged or cut short: its size or checksum differs")


def dataset(group: h5py.Group, name: str, kinds: str, ndim: int) -> NDArray[Any]:
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
    values: NDArray[Any] = found[()]
    if kinds == "f" and not np.all(np.isfinite(values)):
        raise ValueError(f"{name} holds numbers that are not finite")
    return values


def result_of(file: h5py.File) -> Result:
    """The result in an open file."""
    config = load.from_record(text_of(file["config"], "resolved"))
    scores = scores_of(file["scores"])
    made_by = dict(file["made_by"].attrs)
    return Result(
        config=config,
        config_text=text_of(file["config"], "given"),
        method=str(made_by.pop("method")),
        mask=mask_of(file["mask"], config),
        features=features_of(file["mask"], config),
        orders=orders_of(file["orders"], config),
        scores=scores,
        bound=bound_of(file["scores/bound"]),
        limits=judge_limits(config.limits, scores),
        trace=trace_of(file["trace"]),
        steps=int(made_by.pop("steps")),
        seconds=finite(made_by.pop("seconds")),
        warnings=tuple(str(text) for text in made_by.pop("warnings")),
        made_by={name: str(value) for name, value in made_by.items()},
    )


def text_of(group: h5py.Group, name: str) -> str:
    """A text attribute."""
    text = group.attrs[name]
    if not isinstance(text, str):
        raise ValueError(f"{name} is no text")
    return text


def finite(number: Any) -> float:
    """A number that is finite."""
    value = float(number)
    if not math.isfinite(value):
        raise ValueError("a number is not finite")
    return value


def scores_of(group: h5py.Group) -> dict[str, float | None]:
    """The scores by name; None for those that do not apply."""
    strange = set(group.attrs) - set(SCORES)
    if strange:
        raise ValueError(f"unknown scores: {', '.join(sorted(strange))}")
    return {name: finite(group.attrs[name]) if name in group.attrs else None for name in SCORES}


def bound_of(group: h5py.Group) -> Bound:
    """The bound, of a known kind and above 0."""
    efficiency, factor = finite(group.attrs["efficiency"]), finite(group.attrs["levels_factor"])
    kind = text_of(group, "kind")
    if efficiency <= 0 or kind not in get_args(Bound.__annotations__["kind"]):
        raise ValueError("the bound is none")
    return Bound(efficiency, factor, kind)  # type: ignore[arg-type]  # looked up in the line above


def trace_of(group: h5py.Group) -> Trace:
    """The trace."""
    return Trace(
        step=dataset(group, "step", "iu", 1),
        loss=dataset(group, "loss", "f", 1),
        efficiency=dataset(group, "efficiency", "f", 1),
        uniformity_error=dataset(group, "uniformity_error", "f", 1),
    )


def mask_of(group: h5py.Group, config: Config) -> Mask:
    """The relief, of the config's shape and levels; a continuous profile has no levels."""
    shape, masks = config.element.pixels, mask_count(config)
    phase = exact(dataset(group, "phase", "f", 2), np.float32, shape)
    height = exact(dataset(group, "height", "f", 2), np.float32, shape)
    if masks == 0:
        return Mask(phase=phase, height=height, levels=None, layers=None)
    levels = exact(dataset(group, "levels", "u", 2), np.uint8, shape)
    layers = exact(dataset(group, "layers", "b", 3), np.bool_, (masks, *shape))
    weights = 2 ** np.arange(masks)[::-1]
    if not np.array_equal(np.tensordot(weights, layers, axes=1), levels):
        raise ValueError("levels and layers are not one relief")
    return Mask(phase=phase, height=height, levels=levels, layers=layers)


def exact(values: NDArray[Any], kind: type, shape: tuple[int, ...]) -> NDArray[Any]:
    """An array of just this type and shape."""
    if values.dtype != kind or values.shape != shape:
        raise ValueError(f"an array is {values.dtype} {list(values.shape)}, not {list(shape)}")
    return values


def features_of(group: h5py.Group, config: Config) -> tuple[FeatureReport, ...]:
    """The rule and what was measured of each layer."""
    feature, gap = rule_pixels(config)
    names = ("breaches", "corner_contacts", "edge_length")
    columns = [group.attrs.get(name, []) for name in names]
    return tuple(
        FeatureReport(feature, gap, *(int(value) for value in row))
        for row in zip(*columns, strict=True)
    )


def orders_of(group: h5py.Group, config: Config) -> OrderTable:
    """The order table, of the config's shape."""
    rows, columns = shape = config.element.pixels
    return OrderTable(
        m_y=exact(dataset(group, "m_y", "i", 1), np.int64, (rows,)),
        m_x=exact(dataset(group, "m_x", "i", 1), np.int64, (columns,)),
        power=exact(dataset(group, "power", "f", 2), np.float64, shape),
        target=exact(dataset(group, "target", "f", 2), np.float64, shape),
    )
