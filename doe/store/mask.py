"""A mask from elsewhere: levels, height or phase in a file, as a phase."""

import warnings
from pathlib import Path
from typing import Any

import numpy as np
from jaxtyping import Float
from numpy.typing import NDArray
from PIL import Image

from doe.config import derived
from doe.config.schema import Config
from doe.errors import Fault, FileError
from doe.store import read

MOST_PIXELS = 2**28


def read_phase(path: Path | None, kind: str | None, config: Config) -> Float[np.ndarray, "y x"]:
    """Phase [rad] of the mask in a file, as given; 0 everywhere without a file.

    kind: "levels", "height" (m) or "phase" (rad); None = by the file: a record and uint8 hold
    levels, `.tif` height, other `.npy` phase. Error: FileError.
    """
    if path is None:
        return np.zeros(config.element.pixels)
    if path.suffix == ".h5":
        mask = read.read(path).mask
        values: Any = mask.phase if mask.levels is None else mask.levels
    else:
        values = read_array(path)
    if values.shape != config.element.pixels:
        shape = list(config.element.pixels)
        raise unfit(path, f"the mask has shape {list(values.shape)}", f"[y, x] = {shape}")
    if kind is None:
        is_height = path.suffix in (".tif", ".tiff")
        kind = "levels" if values.dtype == np.uint8 else "height" if is_height else "phase"
    return phase_of(values, kind, config, path)


def phase_of(values: Any, kind: str, config: Config, path: Path) -> Float[np.ndarray, "y x"]:
    """Phase [rad] of levels, heights [m] or phases."""
    if values.dtype.kind not in "uif" or not np.all(np.isfinite(values)):
        raise unfit(path, "the mask holds something else than finite numbers", "real numbers")
    if kind == "levels":
        count = config.element.levels
        if count == 0 or values.min() < 0 or values.max() >= count:
            raise unfit(
                path, f"the levels run from {values.min()} to {values.max()}", f"0 to {count - 1}"
            )
        scale = 2 * np.pi / count
    else:
        scale = 1 / derived.phase_height(config) if kind == "height" else 1.0
    phase: Float[np.ndarray, "y x"] = values.astype(float) * scale
    return phase


def read_array(path: Path) -> NDArray[Any]:
    """The values of a `.npy` or TIFF file, row 0 at the smallest y. Error: FileError."""
    return tiff(path) if path.suffix in (".tif", ".tiff") else array(path)


def array(path: Path) -> NDArray[Any]:
    """The array of a `.npy` file, its size looked at before it is read."""
    try:
        values = np.lib.format.open_memmap(path, mode="r")  # reads no pickle, and the head only
        if values.size > MOST_PIXELS:
            raise ValueError("it holds more pixels than this tool takes")
        return np.array(values)
    except Exception as error:  # a reader may raise anything on a file that is none
        raise unfit(path, f"cannot be read: {error}", "a .npy, .tif or .h5 file") from None


def tiff(path: Path) -> NDArray[Any]:
    """The heights of a TIFF file, its size looked at before it is decoded."""
    try:
        with warnings.catch_warnings(action="error"), Image.open(path) as image:
            if image.width * image.height > MOST_PIXELS:
                raise ValueError(f"it has {image.width} x {image.height} pixels")
            return np.flipud(np.asarray(image))  # picture row 0 is the largest y
    except Exception as error:  # as above; a warning of a broken file counts too
        raise unfit(path, f"cannot be read: {error}", "a float32 TIFF of heights in m") from None


def unfit(path: Path, problem: str, allowed: str) -> FileError:
    """The error of a file that is no mask for this config."""
    return FileError(Fault(problem, allowed, "check file and config", file=str(path)))
