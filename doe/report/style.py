"""Colours and saving of figures."""

import io
from typing import Any

import numpy as np
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

# A palette that stays apart for colour-blind readers: Okabe and Ito (2008) (from memory).
BLUE, ORANGE, GREEN, VERMILION, GREY = "#0072b2", "#e69f00", "#009e73", "#d55e00", "#666666"
CYCLE = (BLUE, ORANGE, GREEN, VERMILION, GREY)
FOOT = 1e-6  # the least share shown on a logarithmic axis


def figure(width: float, height: float, columns: int) -> tuple[Any, Any]:
    """A figure in inches with one row of axes, drawn without any window system."""
    made = Figure(figsize=(width, height), layout="constrained")
    FigureCanvasAgg(made)
    return made, made.subplots(1, columns, squeeze=False)[0]


def percent_on_log(share: Any) -> Any:
    """Shares in per cent, those too small for a logarithmic axis at its foot."""
    return np.maximum(share, FOOT) * 100


def png(made: Any) -> bytes:
    """A figure as PNG; no date inside, so that equal figures have equal bytes."""
    memory = io.BytesIO()
    made.savefig(memory, dpi=110, metadata={"Software": None})
    return memory.getvalue()
