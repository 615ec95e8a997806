"""Result to record.h5: the HDF5 image is built in memory, checksummed, and written whole."""

import io
from pathlib import Path
from typing import Any

import h5py
import numpy as np

from doe import files
from doe.config import derived, load
from doe.result import Result
from doe.store.layout import BLOCK, head

SQUEEZE = {"compression": "gzip", "compression_opts": 4, "fletcher32": True}


def write(path: Path, result: Result) -> None:
    """Write a record whole. Error: DiskError, the old file untouched."""
    files.write(path, image(result))


def image(result: Result) -> bytes:
    """The bytes of a record."""
    memory = io.BytesIO()
    with h5py.File(memory, "w", userblock_size=BLOCK, track_order=True) as file:
        mark(file, "NXroot", default="mask")
        write_mask(file, result)
        write_orders(file, result)
        write_scores(file, result)
        write_trace(file, result)
        write_provenance(file, result)
    data = memory.getvalue()
    return head(data) + data[BLOCK:]


def mark(group: h5py.Group, kind: str, **attributes: Any) -> None:
    """NeXus class and plotting attributes, so that a general viewer draws the right thing first."""
    group.attrs["NX_class"] = kind
    for name, value in attributes.items():
        group.attrs[name] = value


def add(group: h5py.Group, name: str, data: Any, units: str) -> None:
    """A dataset with its unit; arrays in checksummed chunks."""
    values = np.asarray(data)
    assert np.all(np.isfinite(values)), f"{name} is not finite"
    dataset = group.create_dataset(name, data=values, **(SQUEEZE if values.ndim else {}))
    dataset.attrs["units"] = units


def write_mask(file: h5py.File, result: Result) -> None:
    """`/mask`: levels, layers, height and design phase, with all a mask shop must know."""
    group = file.create_group("mask", track_order=True)
    config, mask = result.config, result.mask
    signal = "height" if mask.levels is None else "levels"
    mark(group, "NXdata", signal=signal)
    if mask.levels is not None and mask.layers is not None:
        add(group, "levels", mask.levels, "")
        add(group, "layers", mask.layers, "")
        group.attrs["layer_depths"] = np.array(derived.layer_depths(config))
        group.attrs["breaches"] = np.array([f.breaches for f in result.features])
        group.attrs["corner_contacts"] = np.array([f.corner_contacts for f in result.features])
        group.attrs["edge_length"] = np.array([f.edge_length for f in result.features])
    add(group, "height", mask.height.astype(np.float32), "m")
    add(group, "phase", mask.phase.astype(np.float32), "rad")
    group.attrs["pixel_pitch"] = np.array(derived.pixel_pitch(config))
    group.attrs["levels"] = config.element.levels
    group.attrs["wavelength"] = config.beam.wavelength
    group.attrs["index"] = derived.index(config)
    if config.process.min_feature is not None:
        group.attrs["min_feature"] = config.process.min_feature


def write_orders(file: h5py.File, result: Result) -> None:
    """`/orders`: power and target of every addressed order, and `/target`: the wanted ones."""
    table = result.orders
    group = file.create_group("orders", track_order=True)
    mark(group, "NXdata", signal="power", axes=["m_y", "m_x"])
    add(group, "m_y", table.m_y, "")
    add(group, "m_x", table.m_x, "")
    add(group, "power", table.power, "")
    add(group, "target", table.target, "")
    rows, columns = np.nonzero(table.target)
    wanted = file.create_group("target", track_order=True)
    add(wanted, "m_y", table.m_y[rows], "")
    add(wanted, "m_x", table.m_x[columns], "")
    add(wanted, "share", table.target[rows, columns], "")


def write_scores(file: h5py.File, result: Result) -> None:
    """`/scores`: attributes as in the JSON, what does not apply being left out."""
    group = file.create_group("scores", track_order=True)
    for name, value in result.scores.items():
        if value is not None:
            group.attrs[name] = value
    bound = group.create_group("bound", track_order=True)
    bound.attrs["efficiency"] = result.bound.efficiency
    bound.attrs["levels_factor"] = result.bound.levels_factor
    bound.attrs["kind"] = result.bound.kind


def write_trace(file: h5py.File, result: Result) -> None:
    """`/trace`: the course of the start that won."""
    group = file.create_group("trace", track_order=True)
    mark(group, "NXdata", signal="efficiency", axes=["step"])
    for name in ("step", "loss", "efficiency", "uniformity_error"):
        add(group, name, getattr(result.trace, name), "")


def write_provenance(file: h5py.File, result: Result) -> None:
    """`/config` and `/made_by`: all that is needed to make the record again."""
    config = file.create_group("config", track_order=True)
    config.attrs["given"] = result.config_text
    config.attrs["resolved"] = load.resolved_json(result.config)
    made_by = file.create_group("made_by", track_order=True)
    for name, value in result.made_by.items():
        made_by.attrs[name] = value
    made_by.attrs["method"] = result.method
    made_by.attrs["steps"] = result.steps
    made_by.attrs["seconds"] = result.seconds
    made_by.attrs["warnings"] = list(result.warnings)
