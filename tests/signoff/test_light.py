"""Order powers from polygons against closed forms."""

import json
from pathlib import Path

import gdstk
import numpy as np
import pytest

from doe.signoff.drawing import read_drawing, read_manifest
from doe.signoff.light import order_powers

PERIOD = 1_000_000  # nm
HIGH = 1000


def drawing_of(masks: list[list[tuple[float, float]]], suffix: str = ".gds"):
    """A one-dimensional grating whose masks stand on intervals given as parts of the period."""
    cell = gdstk.Cell("CELL")
    for number, intervals in enumerate(masks, start=1):
        for start, end in intervals:
            box = (start * PERIOD / 1000, 0), (end * PERIOD / 1000, HIGH / 1000)
            cell.add(gdstk.rectangle(*box, layer=number))
    top = gdstk.Cell("TOP")
    spacing = (PERIOD / 1000, HIGH / 1000)
    top.add(gdstk.Reference(cell, (0, 0), columns=3, rows=4, spacing=spacing))
    library = gdstk.Library()
    library.add(cell, top)
    path = Path(f"grating{suffix}")
    library.write_gds(path) if suffix == ".gds" else library.write_oas(path)
    manifest = {
        "layers": [
            {"layer": k, "datatype": 0, "etch": k, "drawn": "standing"}
            for k in range(1, len(masks) + 1)
        ],
        "orientation": {"layer": 100},
        "period_m": [HIGH * 1e-9, PERIOD * 1e-9],
        "copies": [4, 3],
    }
    Path("manifest.json").write_text(json.dumps(manifest))
    return read_drawing(path, read_manifest(Path("manifest.json")))


def powers(drawing, orders):
    return order_powers(drawing, np.array([0]), np.asarray(orders))[0]


@pytest.mark.parametrize("suffix", [".gds", ".oas"])
@pytest.mark.parametrize("duty", [0.5, 0.45, 0.25, 0.123])
def test_a_drawn_duty_cycle_has_its_closed_form(duty, suffix):
    """eta_0 = 1 - 4 D (1 - D), eta_m = (2 sin(pi m D) / (m pi))^2 for a pi step.

    Source: Fourier series of a rectangle, check values 3c; exact edges, so 1e-12.
    """
    found = powers(drawing_of([[(0, duty)]], suffix), np.arange(6))
    m = np.arange(1, 6)
    assert found[0] == pytest.approx(1 - 4 * duty * (1 - duty), abs=1e-12)
    np.testing.assert_allclose(
        found[1:], (2 * np.sin(np.pi * m * duty) / (np.pi * m)) ** 2, atol=1e-12
    )


@pytest.mark.parametrize(
    ("flips", "orders", "efficiency"),
    [
        ([0, 0.73526], [-1, 0, 1], 0.66416),
        ([0, 0.03863, 0.39084, 0.65552], [-2, -1, 0, 1, 2], 0.77377),
        ([0, 0.22057, 0.44563, 0.5, 0.72057, 0.94563], [-3, -1, 1, 3], 0.70632),
    ],
)
def test_drawn_dammann_gratings_have_their_published_powers(flips, orders, efficiency):
    """Zhou and Liu, Appl. Opt. 34, 5961 (1995) (from memory, recomputed), to the printed digits.

    The value flips at each transition; points are rounded to 1e-5 of the period in print, which
    leaves U below 1e-4.
    """
    ends = [*flips, 1.0]
    standing = [(ends[i], ends[i + 1]) for i in range(0, len(flips), 2)]
    found = powers(drawing_of([standing]), orders)
    assert found.sum() == pytest.approx(efficiency, abs=1e-5)
    assert (found.max() - found.min()) / (found.max() + found.min()) < 1e-4


@pytest.mark.parametrize("levels", [2, 4, 8, 16])
def test_a_drawn_staircase_sends_sinc_squared_into_its_order(levels):
    """sinc^2(1/N), Dammann, Optik 31, 95 (1970) (from memory), and nothing into the zero order.

    A level's phase is proportional to its layers' weights: layer 1 is the pi etch.
    """
    masks = []
    for k in range(levels.bit_length() - 1):
        weight = levels >> (k + 1)
        steps = [level for level in range(levels) if level & weight]
        masks.append([(level / levels, (level + 1) / levels) for level in steps])
    found = powers(drawing_of(masks), [1, 0])
    assert found[0] == pytest.approx(np.sinc(1 / levels) ** 2, abs=1e-9)
    assert found[1] == pytest.approx(0, abs=1e-9)


def test_the_powers_of_all_orders_add_up_to_1():
    """Parseval: the tail beyond order M of a few steps falls as 1 / M."""
    drawing = drawing_of([[(0.1, 0.33)], [(0.2, 0.5), (0.7, 0.9)]])
    found = powers(drawing, np.arange(-20_000, 20_001))
    assert found.sum() == pytest.approx(1, abs=1e-4)
