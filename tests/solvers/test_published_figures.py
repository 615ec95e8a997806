"""Figures of published methods on arrays of equal spots, by the command line.

The array: 10 x 10 equal spots, 768 x 768 pixels, uniform light, as in Di Leonardo, Ianni and
Ruocco, Opt. Express 15, 1913 (2007): e = sum of the spot powers, u = 1 - (max - min)/(max + min).
Their table (from memory, single runs): random mask e 0.01; superposition 0.29 / 0.01;
Gerchberg-Saxton 0.94 / 0.60; weighted Gerchberg-Saxton 0.93 / 0.99, 30 steps each. Own runs with
four seeds at a spacing of 16 orders (verified): .01; .27 to .30 / below .005; .939 / .59 to .62;
.921 to .926 / .971 to .974. They count samples of a Fourier transform; here pixels are squares, so
e leaves their sinc^2 out again.
"""

import json

import numpy as np
import pytest
from helpers import call, evaluate, job

PIXELS = 768
LINE = list(range(-72, 73, 16))
ARRAY = {
    "element__pixels": PIXELS,
    "element__levels": 0,
    "target": {"kind": "grid", "orders_y": LINE, "orders_x": LINE},
}


def efficiency_and_uniformity(orders: list[dict], pixels: int) -> tuple[float, float]:
    """e without the pixel envelope, and u, of the wanted orders in the JSON of a result."""
    spots = [order for order in orders if order["target"]]
    power = np.array([order["power"] for order in spots])
    places = np.array([(order["m_y"], order["m_x"]) for order in spots])
    envelope = (np.sinc(places / pixels) ** 2).prod(axis=1)
    spread = (power.max() - power.min()) / (power.max() + power.min())
    return (power / envelope).sum(), 1 - spread


def designed(monkeypatch, capsys, method: str, starts: int, steps: int, **changes) -> dict:
    """The JSON of `doe run` with one method."""
    start = "order-phases" if method == "gradient" else "random"  # the loops' own, as published
    solver = {"methods": [method], "starts": starts, "steps": steps, "start": start}
    solver |= {"search.blocks": 40, "search.trials": 50_000}  # a line is small
    status, out, err = call(monkeypatch, capsys, "run", job(solver=solver, **changes), "--json")
    assert status in (0, 1), err
    return json.loads(out)


def waves(line: list[int], pixels: int) -> np.ndarray:
    """exp(2 pi i m x) of each order at the pixel centres."""
    return np.exp(2j * np.pi * np.outer((np.arange(pixels) + 0.5) / pixels, line))


def scored(monkeypatch, capsys, field: np.ndarray) -> tuple[float, float]:
    """e and u of the phase of a field."""
    result = evaluate(monkeypatch, capsys, np.angle(field), **ARRAY)
    return efficiency_and_uniformity(result["orders"], PIXELS)


def test_random_mask_sends_a_hundredth_of_the_light_into_100_spots(monkeypatch, capsys):
    """Every pixel serves one spot at random: e = 1/M + M/n (exact expectation).

    Each of the M = 100 spots has 1/M in amplitude, and noise of power 1/n, n = 768^2 pixels, so
    that the sum has a standard deviation of sqrt(2/n/M) = 2e-4 about 0.0102; 0.0005 is the band.
    """
    generator = np.random.default_rng(1)
    wave = waves(LINE, PIXELS)
    row, column = generator.integers(10, size=(2, PIXELS, PIXELS))
    turn = np.exp(2j * np.pi * generator.random((10, 10)))
    pixel = np.arange(PIXELS)
    field = wave[pixel[:, None], row] * wave[pixel[None, :], column] * turn[row, column]
    efficiency, _ = scored(monkeypatch, capsys, field)
    assert efficiency == pytest.approx(1 / 100 + 100 / PIXELS**2, abs=5e-4)


def test_superposition_of_100_waves_has_the_published_efficiency_and_uniformity(
    monkeypatch, capsys
):
    """All waves with phase 0: published 0.29 / 0.01, own runs .27 to .30 / below .005."""
    wave = waves(LINE, PIXELS).sum(axis=1)
    efficiency, uniformity = scored(monkeypatch, capsys, np.outer(wave, wave))
    assert 0.25 <= efficiency <= 0.32
    assert uniformity <= 0.02


# The array's orders are 8 times odd numbers, so its mask is 8 x 8 equal cells of 96 x 96 pixels:
# one of them is the same problem, pixel envelope included, in a 64th of the work.
CELL = {
    "element__pixels": 96,
    "element__levels": 0,
    "target": {
        "kind": "grid",
        "orders_y": list(range(-9, 10, 2)),
        "orders_x": list(range(-9, 10, 2)),
    },
}
SIZES = [
    pytest.param(CELL, 96, id="one cell"),
    pytest.param(ARRAY, PIXELS, id="whole array", marks=pytest.mark.slow),
]


@pytest.mark.parametrize(("target", "pixels"), SIZES)
def test_gerchberg_saxton_has_its_published_efficiency_and_uniformity(
    monkeypatch, capsys, target, pixels
):
    """30 steps: published 0.94 / 0.60, four own runs .939 +- .003 / .59 to .62."""
    result = designed(monkeypatch, capsys, "gerchberg-saxton", 1, 30, **target)
    efficiency, uniformity = efficiency_and_uniformity(result["orders"], pixels)
    assert 0.925 <= efficiency <= 0.95
    assert 0.50 <= uniformity <= 0.70


@pytest.mark.parametrize(("target", "pixels"), SIZES)
def test_weighted_gerchberg_saxton_has_its_published_efficiency_and_uniformity(
    monkeypatch, capsys, target, pixels
):
    """30 steps: published 0.93 / 0.99, four own runs .921 to .926 / .971 to .974."""
    result = designed(monkeypatch, capsys, "weighted", 1, 30, **target)
    efficiency, uniformity = efficiency_and_uniformity(result["orders"], pixels)
    assert 0.91 <= efficiency <= 0.95
    assert uniformity >= 0.95


@pytest.mark.slow
def test_gradient_reaches_weighted_gerchberg_saxton_on_the_array(monkeypatch, capsys):
    """The mark set by the published weighted loop: e of 0.92 at u of 0.98 or better."""
    result = designed(monkeypatch, capsys, "gradient", 1, 300, **CELL)
    efficiency, uniformity = efficiency_and_uniformity(result["orders"], 96)
    assert efficiency >= 0.92
    assert uniformity >= 0.98


def line_job(count: int, pixels: int, levels: int, limit: str) -> dict:
    """Equal consecutive orders along x, with a limit on the uniformity error."""
    return {
        "element__pixels": [1, pixels],
        "element__levels": levels,
        "target": {"kind": "orders", "orders": [[0, m - count // 2] for m in range(count)]},
        "limits": {"uniformity_error": limit},
    }


@pytest.mark.parametrize(
    ("count", "best", "limit"), [(3, 0.925562, 0.938125), (5, 0.921244, 0.96283)]
)
def test_gradient_finds_the_best_known_continuous_splitter(monkeypatch, capsys, count, best, limit):
    """At least 98.5 % of the best known design, and no more than the free-phase bound.

    Own searches that agree with Romero and Dickey, J. Opt. Soc. Am. A 24, 2280 (2007), and bounds
    of Krackhardt, Mait and Streibl, Appl. Opt. 31, 27 (1992) (both from memory). Both times the
    mean pixel envelope; orders that may differ by 1 % can gain 1e-3 on the bound of equal ones.
    """
    result = designed(
        monkeypatch, capsys, "gradient", 16, 200, **line_job(count, 256, 0, "<= 0.99 %")
    )
    orders = np.arange(count) - count // 2
    envelope = np.mean(np.sinc(orders / 256) ** 2)
    assert result["scores"]["uniformity_error"] < 1e-2
    assert result["scores"]["efficiency"] >= 0.985 * best * envelope
    assert result["scores"]["efficiency"] <= limit * envelope + 1e-3


@pytest.mark.parametrize(("count", "pixels", "best"), [(5, 128, 0.77388), (7, 256, 0.78628)])
def test_gradient_finds_the_best_known_binary_splitter(monkeypatch, capsys, count, pixels, best):
    """At least 97 % of the best known 0/pi grating, with a uniformity error below 2 %.

    Own searches over the flips; the recalled points of Zhou and Liu, Appl. Opt. 34, 5961 (1995)
    give 0.77377 for 5. On these pixels, plain flipping of pixels finds 0.7733 and 0.7849 (own
    search), so that the pixels do not stand in the way. Best found is not proved best: 1 % more
    would be a find to look into.
    """
    result = designed(
        monkeypatch, capsys, "gradient", 16, 600, **line_job(count, pixels, 2, "<= 1.9 %")
    )
    assert result["scores"]["uniformity_error"] < 0.02
    assert 0.97 * best <= result["scores"]["efficiency"] <= 1.01 * best
