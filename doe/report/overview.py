"""One picture of a design: mask, orders, and how the search went."""

from typing import Any

import matplotlib
import numpy as np
from matplotlib.colors import ListedColormap

from doe import units
from doe.config import derived
from doe.report.style import BLUE, GREY, VERMILION, figure, percent_on_log, png
from doe.result import Result


def draw(result: Result) -> bytes:
    """The picture as PNG."""
    made, (mask, orders, trace) = figure(15, 4.8, 3)
    draw_mask(made, mask, result)
    draw_orders(made, orders, result)
    draw_trace(trace, result)
    made.suptitle(result.config.title, parse_math=False)
    return png(made)


def draw_mask(made: Any, axes: Any, result: Result) -> None:
    """One period of the relief, y up."""
    config, mask = result.config, result.mask
    period_y, period_x = (units.in_um(length) for length in derived.period(config))
    extent = (0, period_x, 0, period_y)
    aspect = "equal" if config.element.pixels[0] > 1 else "auto"
    options = {"origin": "lower", "extent": extent, "aspect": aspect, "interpolation": "nearest"}
    if mask.levels is None:
        shown = axes.imshow(mask.height / units.NANO, cmap="cividis", **options)
        made.colorbar(shown, ax=axes, label="height (nm)")
    else:
        count = config.element.levels
        shades = ListedColormap(colours(count))
        limits = {"vmin": -0.5, "vmax": count - 0.5}
        shown = axes.imshow(mask.levels, cmap=shades, **limits, **options)
        ticks = range(0, count, max(1, count // 8))
        made.colorbar(shown, ax=axes, label="level (0 = deepest)", ticks=ticks)
    axes.set(title="mask, one period", xlabel="x (µm)", ylabel="y (µm)")


def colours(count: int) -> Any:
    """One shade for each level, from dark to light."""
    return matplotlib.colormaps["cividis"](np.linspace(0, 1, count))


def draw_orders(made: Any, axes: Any, result: Result) -> None:
    """Powers of the orders around the wanted ones, in dB, or as bars in one dimension."""
    table = result.orders
    window = [near(table.target, axis) for axis in (0, 1)]
    power = np.maximum(table.power[np.ix_(*window)], 1e-9)
    m_y, m_x = table.m_y[window[0]], table.m_x[window[1]]
    if len(m_y) == 1:
        is_wanted = table.target[0, window[1]] > 0
        axes.bar(m_x, power[0] * 100, color=np.where(is_wanted, BLUE, GREY))
        axes.set(title="power of each order", xlabel="order m_x", ylabel="power (% of the light)")
        return
    extent = (m_x[0] - 0.5, m_x[-1] + 0.5, m_y[0] - 0.5, m_y[-1] + 0.5)
    decibel = 10 * np.log10(power)
    shown = axes.imshow(
        decibel, origin="lower", extent=extent, cmap="magma", vmin=decibel.max() - 40
    )
    made.colorbar(shown, ax=axes, label="power (dB of the light)")
    axes.set(title="power of each order", xlabel="order m_x", ylabel="order m_y")


def near(target: Any, axis: int) -> Any:
    """Indices along an axis around the wanted orders, with as much again outside them."""
    there = np.flatnonzero(target.any(axis=1 - axis))
    margin = max(3, (there[-1] - there[0]) // 2)
    first, last = max(0, there[0] - margin), min(target.shape[axis], there[-1] + margin + 1)
    return np.arange(first, last)


def draw_trace(axes: Any, result: Result) -> None:
    """Efficiency and uniformity error of the drawn design against the step."""
    trace = result.trace
    axes.plot(trace.step, trace.efficiency * 100, color=BLUE, label="efficiency")
    axes.set(title="the drawn design on the way", xlabel="step", ylabel="efficiency (%)")
    other = axes.twinx()
    other.semilogy(trace.step, percent_on_log(trace.uniformity_error), color=VERMILION)
    other.set_ylabel("uniformity error (%)", color=VERMILION)
    axes.yaxis.label.set_color(BLUE)
    if len(trace.step) and trace.step[-1] > result.steps:
        axes.axvline(result.steps, color=GREY, linestyle=":")
        place = (result.steps, 0.5)
        text = "levels searched from here "
        axes.annotate(
            text, place, xycoords=("data", "axes fraction"), rotation=90, ha="right", va="center"
        )
