"""Light of a single element on its planes, as HDF5."""

import io

import h5py
import numpy as np

from doe.result import PlaneLight
from doe.store.layout import BLOCK, head
from doe.store.write import add, mark


def image(planes: list[PlaneLight]) -> bytes:
    """The bytes of a file with `/plane`, the plane of the config, and `/planes/N` for each.

    Irradiance per m^2, or per direction cosine squared, for a beam of power 1.
    """
    memory = io.BytesIO()
    with h5py.File(memory, "w", userblock_size=BLOCK, track_order=True) as file:
        mark(file, "NXroot", default="plane")
        nominal = min(planes, key=lambda plane: abs(plane.shift))
        write_plane(file.create_group("plane"), nominal)
        for number, plane in enumerate(planes):
            write_plane(file.create_group(f"planes/{number}"), plane)
    data = memory.getvalue()
    return head(data) + data[BLOCK:]


def write_plane(group: h5py.Group, plane: PlaneLight) -> None:
    """One plane with its axes and how it was reached."""
    unit = "" if plane.kind == "angles" else "m"
    mark(group, "NXdata", signal="irradiance", axes=["y", "x"])
    add(group, "irradiance", plane.irradiance.astype(np.float32), "1/m^2" if unit else "1")
    add(group, "y", plane.y, unit)
    add(group, "x", plane.x, unit)
    group.attrs["kind"] = plane.kind
    group.attrs["shift"] = plane.shift
    group.attrs["method"] = plane.method
