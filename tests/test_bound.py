"""The bound told before any design, against known designs, bounds and closed forms."""

import json

import numpy as np
import pytest
from helpers import call, job
from scipy.special import ellipe

from doe.bound import bound, free_phase_bound

# Orders, efficiency of the best known design, bound by the free field. Own searches, several of
# which agree; Krackhardt, Mait and Streibl, Appl. Opt. 31, 27 (1992), Romero and Dickey, J. Opt.
# Soc. Am. A 24, 2280 (2007) (both from memory).
LINES = [
    (2, 0.810569, 0.81057),
    (3, 0.925562, 0.938125),
    (4, 0.91902, 0.92693),
    (5, 0.921244, 0.96283),
    (6, 0.8906, 0.91460),
]
# Squares of 7 x 7 and 9 x 9 as the products of two lines (verified).
SQUARES = [(7, 0.93785), (9, 0.98564)]


def line(count: int) -> np.ndarray:
    return np.arange(count) - count // 2


def equal(count: int) -> np.ndarray:
    return np.full(count, 1 / count)


def along_x(count: int, pixels: int = 256):
    orders = line(count)
    return bound(0 * orders, orders, equal(count), (1, pixels), 0)


@pytest.mark.parametrize(("count", "best", "_limit"), LINES)
def test_bound_of_a_line_is_the_best_known_design_times_the_pixel_envelope(count, best, _limit):
    """2e-5: the digits to which the best designs are known."""
    found = along_x(count)
    envelope = np.mean(np.sinc(line(count) / 256) ** 2)
    assert found.kind == "best known"
    assert found.efficiency / envelope == pytest.approx(best, abs=2e-5)


@pytest.mark.parametrize(("count", "squared"), SQUARES)
def test_bound_of_7_and_9_orders_is_the_root_of_the_separable_square(count, squared):
    """1e-4: what the four digits of the one-dimensional values leave in their squares."""
    envelope = np.mean(np.sinc(line(count) / 256) ** 2)
    assert (along_x(count).efficiency / envelope) ** 2 == pytest.approx(squared, abs=1.1e-4)


def test_bound_is_the_same_along_either_axis():
    orders = line(5)
    upright = bound(orders, 0 * orders, equal(5), (256, 8), 0)
    assert upright.kind == "best known"
    assert upright.efficiency == pytest.approx(along_x(5).efficiency, rel=1e-12)


@pytest.mark.parametrize(
    ("m_y", "m_x", "pixels"), [(0, 0, (1, 8)), (0, 5, (1, 16)), (-3, 4, (16, 8))]
)
def test_bound_of_one_order_is_proved_and_is_its_pixel_envelope(m_y, m_x, pixels):
    """A blaze reaches sinc^2(m/n) on each axis and no field of pixels does better (definition)."""
    found = bound(np.array([m_y]), np.array([m_x]), np.ones(1), pixels, 0)
    envelope = np.sinc(m_y / pixels[0]) ** 2 * np.sinc(m_x / pixels[1]) ** 2
    assert found.kind == "proved"
    assert found.efficiency == pytest.approx(envelope, rel=1e-12)
    assert found.levels_factor == 1


@pytest.mark.parametrize(("levels", "factor"), [(2, 0.405285), (4, 0.810569), (8, 0.949641)])
def test_levels_leave_sinc_squared_of_one_over_n(levels, factor):
    """Dammann, Optik 31, 95 (1970) (source from memory, digits verified)."""
    found = bound(np.array([0]), np.array([1]), np.ones(1), (1, 64), levels)
    assert found.levels_factor == pytest.approx(factor, abs=1e-6)


@pytest.mark.parametrize(("count", "best", "limit"), LINES)
def test_free_phase_bound_lies_between_the_best_design_and_the_known_bound(count, best, limit):
    """1e-3 each way: the sum of waves is sampled on a grid, and the search finds local maxima."""
    found = free_phase_bound(np.zeros(count, int), line(count), equal(count))
    assert best - 1e-3 <= found <= limit + 1e-3


@pytest.mark.parametrize("weak", [0.5, 0.3, 0.1])
def test_free_phase_bound_of_two_unequal_orders_is_an_elliptic_integral(weak):
    """mean |a + b e^{ix}| = (2/pi) (a + b) E(4 a b / (a + b)^2) (integral of the half angle).

    1.3e-3: 2 pi^2 / 12 / 32^2 of 0.81, what 32 samples of a fringe cost at the kink of its modulus.
    """
    a, b = np.sqrt(weak), np.sqrt(1 - weak)
    mean = 2 / np.pi * (a + b) * ellipe(4 * a * b / (a + b) ** 2)
    found = free_phase_bound(np.zeros(2, int), np.array([-1, 3]), np.array([weak, 1 - weak]))
    assert found == pytest.approx(mean**2, abs=1.3e-3)


def test_free_phase_bound_of_a_square_is_no_less_than_the_separable_design():
    """3 x 3: two triplicators give 0.85667 (verified); no bound may lie below what can be made."""
    m_y, m_x = (axis.ravel() for axis in np.meshgrid(line(3), line(3), indexing="ij"))
    found = free_phase_bound(m_y, m_x, equal(9))
    assert 0.85667 - 1e-3 <= found <= 1


def test_free_phase_bound_is_the_same_for_orders_that_are_moved_or_spread():
    """Orders m and 2 m + 7 are the same sum of waves on another axis."""
    zero = np.zeros(3, int)
    near = free_phase_bound(zero, line(3), equal(3))
    far = free_phase_bound(zero, 2 * line(3) + 7, equal(3))
    assert far == pytest.approx(near, abs=1e-3)


def test_check_tells_the_bound_of_a_line_of_five(monkeypatch, capsys):
    """0.921244 times the mean of sinc^2(m/256), m = -2 .. 2."""
    path = job(element__pixels=[1, 256], target={"kind": "grid", "shape": [1, 5]})
    _, out, _ = call(monkeypatch, capsys, "check", path, "--json")
    told = json.loads(out)["bound"]
    assert told["kind"] == "best known"
    envelope = np.mean(np.sinc(line(5) / 256) ** 2)
    assert told["efficiency"] == pytest.approx(0.921244 * envelope, abs=2e-5)


def test_limit_beyond_a_proved_bound_is_told_as_out_of_reach(monkeypatch, capsys):
    """Order 8 of 32 pixels has at most sinc^2(1/4) = 0.8106 of the light."""
    target = {"kind": "orders", "orders": [[0, 8]]}
    for limit, status in ((">= 82 %", 1), (">= 80 %", 0)):
        path = job(element__pixels=[1, 32], target=target, limits={"efficiency": limit})
        got, out, _ = call(monkeypatch, capsys, "check", path, "--json")
        assert got == status
        assert json.loads(out)["feasible"] is (status == 0)
