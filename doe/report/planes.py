"""Light of a single element: its plane, or a stack of planes with the cut along the axis."""

from typing import Any

import numpy as np

from doe import units
from doe.config.schema import Config
from doe.report.style import BLUE, VERMILION, figure, png
from doe.result import PlaneLight

FEWEST_FOR_MAP = 3  # planes from which the cut along the axis is drawn


def draw(config: Config, planes: list[PlaneLight]) -> bytes:
    """The plane nearest to the config's own, its cuts, and the x-z map of a stack, as PNG."""
    is_stack = len(planes) >= FEWEST_FOR_MAP
    made, axes = figure(15 if is_stack else 10.5, 4.6, 3 if is_stack else 2)
    nominal = min(planes, key=lambda plane: abs(plane.shift))
    draw_plane(made, axes[0], nominal)
    draw_cuts(axes[1], nominal)
    if is_stack:
        draw_map(made, axes[2], planes)
    made.suptitle(config.title, parse_math=False)
    return png(made)


def scale_of(plane: PlaneLight) -> tuple[float, str]:
    """Factor and label of the plane's axes."""
    return (1.0, "direction cosine") if plane.kind == "angles" else (units.in_um(1.0), "µm")


def draw_plane(made: Any, axes: Any, plane: PlaneLight) -> None:
    """Irradiance over its peak."""
    scale, label = scale_of(plane)
    extent = [scale * v for v in (plane.x[0], plane.x[-1], plane.y[0], plane.y[-1])]
    shown = axes.imshow(
        plane.irradiance / plane.irradiance.max(), origin="lower", extent=extent, cmap="cividis"
    )
    made.colorbar(shown, ax=axes, label="irradiance / peak")
    axes.set(title=f"{plane.kind}, {plane.method}", xlabel=f"x ({label})", ylabel=f"y ({label})")


def draw_cuts(axes: Any, plane: PlaneLight) -> None:
    """Cuts through the brightest point along x and y."""
    scale, label = scale_of(plane)
    peak = plane.irradiance.max()
    row, column = np.unravel_index(int(plane.irradiance.argmax()), plane.irradiance.shape)
    axes.plot(plane.x * scale, plane.irradiance[row] / peak, color=BLUE, label="along x")
    along_y = plane.irradiance[:, column] / peak
    axes.plot(plane.y * scale, along_y, "--", color=VERMILION, label="along y")
    axes.set(title="cuts through the peak", xlabel=label, ylabel="irradiance / peak")
    axes.legend()


def draw_map(made: Any, axes: Any, planes: list[PlaneLight]) -> None:
    """Irradiance along x through the axis against the shift of the plane."""
    ordered = sorted(planes, key=lambda plane: plane.shift)
    x = ordered[0].x
    rows = [np.interp(x, p.x, p.irradiance[len(p.y) // 2]) for p in ordered]
    scale, label = scale_of(ordered[0])
    shifts = [plane.shift / units.LENGTH["mm"] for plane in ordered]
    shown = axes.pcolormesh(shifts, x * scale, np.array(rows).T, cmap="cividis", shading="nearest")
    made.colorbar(shown, ax=axes, label="irradiance (1/m²)")
    axes.set(title="along the axis", xlabel="shift of the plane (mm)", ylabel=f"x ({label})")
