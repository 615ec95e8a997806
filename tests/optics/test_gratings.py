"""Gratings with a closed form or published figures, from a config and a mask file to the scores.

Scalar thin element, infinitely many periods, no surface losses. A pixel is a step, so a relief of
whole pixels has exact order powers, whatever the number of pixels: where no other tolerance is
explained, 1e-12 stands for the round-off of float64.
"""

import numpy as np
import pytest
from helpers import evaluate, power_of
from scipy.special import jv

EXACT = 1e-12
PIXELS = 32  # of the staircases: holds whole steps of 2, 4, 8 and 16 levels
ORDERS = np.arange(1 - PIXELS // 2, PIXELS // 2)


@pytest.fixture
def grating(monkeypatch, capsys):
    """Evaluates a relief along x and gives the powers of the wanted orders, and all the JSON."""

    def run(relief, orders, *options, levels=0):
        result = evaluate(
            monkeypatch,
            capsys,
            np.atleast_2d(relief),
            *options,
            element__pixels=list(np.atleast_2d(relief).shape),
            element__levels=levels,
            target={"kind": "orders", "orders": [[0, int(m)] for m in orders]},
        )
        return np.array([power_of(result, 0, m) for m in orders]), result

    return run


def staircase(levels: int) -> np.ndarray:
    return (np.arange(PIXELS) * levels // PIXELS).astype(np.uint8)


def staircase_powers(levels: int, orders: np.ndarray, error: float) -> np.ndarray:
    """[sinc(m/N) sin(pi (a - m)) / (N sin(pi (a - m) / N))]^2, a = 1 + error (derived).

    The geometric sum of N equal steps; where a - m is a multiple of N it adds up to N.
    """
    lag = 1 + error - orders
    period = np.isclose(lag % levels, 0) | np.isclose(lag % levels, levels)
    ratio = np.sin(np.pi * lag) / np.where(period, 1, levels * np.sin(np.pi * lag / levels))
    return (np.sinc(orders / levels) * np.where(period, 1, ratio)) ** 2


def flips_powers(flips: np.ndarray, orders: np.ndarray) -> np.ndarray:
    """Order powers of a period of +1 and -1 that changes sign at 0 and at each flip.

    c_m = integral of s exp(-2 pi i m x), step by step (definition of the Fourier series).
    """
    edges = np.concatenate([[0.0], flips, [1.0]])
    signs = (-1.0) ** np.arange(len(edges) - 1)
    amplitudes = []
    for m in orders:
        area = edges if m == 0 else np.exp(-2j * np.pi * m * edges) / (-2j * np.pi * m)
        amplitudes.append((signs * np.diff(area)).sum())
    return np.abs(amplitudes) ** 2


def flips_levels(flips: np.ndarray, pixels: int) -> np.ndarray:
    """Two levels that change at each flip, moved to the nearest pixel edge."""
    edges = np.rint(np.asarray(flips) * pixels).astype(int)
    return (np.searchsorted(edges, np.arange(pixels), side="right") % 2).astype(np.uint8)


@pytest.mark.parametrize(
    ("levels", "efficiency"),
    [(2, 0.405285), (4, 0.810569), (8, 0.949641), (16, 0.987215)],
)
def test_staircase_of_levels_sends_sinc_squared_of_one_over_n_into_order_1(
    grating, levels, efficiency
):
    """sinc^2(1/N), Dammann, Optik 31, 95 (1970) (source from memory, digits verified)."""
    powers, result = grating(staircase(levels), [1], levels=levels)
    assert result["scores"]["efficiency"] == pytest.approx(np.sinc(1 / levels) ** 2, abs=EXACT)
    assert powers[0] == pytest.approx(efficiency, abs=1e-6)  # the digits printed
    assert result["bound"]["levels_factor"] == pytest.approx(efficiency, abs=1e-6)


@pytest.mark.parametrize(
    ("levels", "efficiency"), [(3, 0.683918), (5, 0.875140), (6, 0.911891), (32, 0.996791)]
)
def test_staircase_given_as_phase_has_the_same_efficiency(grating, levels, efficiency):
    """Levels that are no power of two come as a phase; Dammann (1970), as above."""
    pixels = 3 * PIXELS * 5
    phase = 2 * np.pi / levels * (np.arange(pixels) * levels // pixels)
    powers, _ = grating(phase, [1])
    assert powers[0] == pytest.approx(efficiency, abs=1e-6)  # the digits printed


def test_staircase_of_4_levels_has_light_in_every_fourth_order_only(grating):
    """Orders 1 mod 4 with sinc^2(m/4), all others dark (verified by a separate computation)."""
    powers, result = grating(staircase(4), ORDERS, levels=4)
    printed = {-7: 0.016542, -3: 0.090063, 1: 0.810569, 5: 0.032423, 9: 0.010007}
    for order, power in printed.items():
        assert power_of(result, 0, order) == pytest.approx(power, abs=1e-6)
    assert np.abs(powers[ORDERS % 4 != 1]).max() < EXACT


@pytest.mark.parametrize("levels", [2, 4, 8, 16])
@pytest.mark.parametrize("percent", [2, 5, -5, 10])
def test_every_order_of_a_staircase_etched_too_deep_has_its_closed_form(grating, levels, percent):
    """Depth of all etches times 1 + e; the geometric sum over the steps (derived)."""
    powers, _ = grating(staircase(levels), ORDERS, "--error", f"depth={percent}%", levels=levels)
    expected = staircase_powers(levels, ORDERS, percent / 100)
    np.testing.assert_allclose(powers, expected, rtol=0, atol=EXACT)


@pytest.mark.parametrize(
    ("levels", "at_2", "at_5", "at_10", "zero_deep", "zero_shallow"),
    [
        (2, 0.404885, 0.402790, 0.395367, 0.006156, 0.006156),
        (4, 0.809570, 0.804338, 0.785866, 0.002836, 0.003319),
        (8, 0.948412, 0.941977, 0.919280, 0.002381, 0.002878),
        (16, 0.985921, 0.979153, 0.955284, 0.002281, 0.002779),
    ],
)
def test_depth_error_costs_order_1_and_feeds_the_zero_order_as_tabled(
    grating, levels, at_2, at_5, at_10, zero_deep, zero_shallow
):
    """Table of the closed form above, verified by brute force; 1e-6 is the digits printed."""

    def scores(percent):
        options = ("--error", f"depth={percent}%")
        return grating(staircase(levels), [1], *options, levels=levels)[1]["scores"]

    deep, shallow = scores(5), scores(-5)
    got = [scores(2)["efficiency"], deep["efficiency"], scores(10)["efficiency"]]
    np.testing.assert_allclose(got, [at_2, at_5, at_10], rtol=0, atol=1e-6)
    zero = [deep["zero_order"], shallow["zero_order"]]
    np.testing.assert_allclose(zero, [zero_deep, zero_shallow], rtol=0, atol=1e-6)


@pytest.mark.parametrize(
    ("errors", "keys"), [((0.05, 0, 0), (1,)), ((0.02, -0.04, 0.1), (1, 2, 3))]
)
def test_error_of_single_etches_gives_the_product_of_their_factors(grating, errors, keys):
    """Etch k steps pi / 2^(k-1) (1 + e_k) over a 2^k-th of the period, so the orders factorise.

    |c_m| = |sinc(m/8)| product over k of |cos((phi_k - 2 pi m / 2^k) / 2)| (derived: the sum over
    the 8 steps is a product of three sums of two terms).
    """
    options = [w for k in keys for w in ("--error", f"depth_{k}={100 * errors[k - 1]:g}%")]
    powers, _ = grating(staircase(8), ORDERS, *options, levels=8)
    amplitude = np.sinc(ORDERS / 8)
    for k, error in enumerate(errors, start=1):
        step = np.pi / 2 ** (k - 1) * (1 + error)
        amplitude = amplitude * np.cos((step - 2 * np.pi * ORDERS / 2**k) / 2)
    np.testing.assert_allclose(powers, amplitude**2, rtol=0, atol=EXACT)


def test_error_of_the_whole_relief_and_of_an_etch_add_up(grating):
    """depth = 3 % with depth_1 = 2 % is a pi etch 5 % too deep and a pi/2 etch 3 % too deep."""
    options = ("--error", "depth=3%", "--error", "depth_1=2%")
    powers, _ = grating(staircase(4), ORDERS, *options, levels=4)
    first = np.cos((np.pi * 1.05 - np.pi * ORDERS) / 2)
    second = np.cos((np.pi / 2 * 1.03 - np.pi / 2 * ORDERS) / 2)
    np.testing.assert_allclose(powers, (np.sinc(ORDERS / 4) * first * second) ** 2, atol=EXACT)


@pytest.mark.parametrize("filled", [27, 20, 15, 30])
@pytest.mark.parametrize("step", [np.pi, 2.0, 0.7, 5.5])
def test_binary_grating_of_any_duty_and_depth_has_its_closed_form(grating, filled, step):
    """Duty D, phase step phi: 1 - 4 D (1 - D) sin^2(phi/2), [2/(m pi) sin(phi/2) sin(pi m D)]^2.

    Source: Fourier series of a square wave (verified by a separate computation).
    """
    pixels, duty = 60, filled / 60
    orders = np.arange(1 - pixels // 2, pixels // 2)
    powers, _ = grating(np.where(np.arange(pixels) < filled, step, 0.0), orders)
    m = np.where(orders == 0, 1, orders)
    expected = (2 / (m * np.pi) * np.sin(step / 2) * np.sin(np.pi * m * duty)) ** 2
    expected[orders == 0] = 1 - 4 * duty * (1 - duty) * np.sin(step / 2) ** 2
    np.testing.assert_allclose(powers, expected, rtol=0, atol=EXACT)


@pytest.mark.parametrize(
    ("filled", "zero", "first", "second", "third"),
    [
        (27, 0.010000, 0.395367, 0.009675, 0.035750),
        (20, 0.111111, 0.303964, 0.075991, 0.0),
        (15, 0.250000, 0.202642, 0.101321, 0.022516),
    ],
)
def test_two_levels_of_duty_45_33_and_25_percent_have_the_tabled_orders(
    grating, filled, zero, first, second, third
):
    """Table of the square wave at a step of pi, verified; 1e-6 is the digits printed."""
    levels = (np.arange(60) < filled).astype(np.uint8)
    powers, _ = grating(levels, [-1, 0, 1, 2, 3], levels=2)
    np.testing.assert_allclose(powers, [first, zero, first, second, third], rtol=0, atol=1e-6)


def test_half_filled_grating_of_twice_arctan_half_pi_splits_into_three_equal_orders(grating):
    """Step 2 atan(pi/2) at half duty: three times 1/(1 + pi^2/4) = 0.288400 (verified)."""
    step = 2 * np.arctan(np.pi / 2)
    powers, result = grating(np.where(np.arange(60) < 30, step, 0.0), [-1, 0, 1])
    np.testing.assert_allclose(powers, 1 / (1 + np.pi**2 / 4), rtol=0, atol=EXACT)
    assert result["scores"]["efficiency"] == pytest.approx(0.865201, abs=1e-6)
    assert result["scores"]["uniformity_error"] < EXACT


# Flips of the two levels in a period, number of pixels that hold them exactly, efficiency.
# Sources: Zhou and Liu, Appl. Opt. 34, 5961 (1995), even numbers with the half-period shift of
# Morrison, J. Opt. Soc. Am. A 9, 464 (1992) (recalled, recomputed); the rows of six digits are an
# own search.
DAMMANN = [
    (2, [0.5], 100_000, 0.810569),
    (3, [0.73526], 100_000, 0.66416),
    (4, [0.22057, 0.44563], 100_000, 0.70632),
    (5, [0.03863, 0.39084, 0.65552], 100_000, 0.77377),
    (3, [0.264742], 1_000_000, 0.66416),
    (4, [0.054357, 0.277178], 1_000_000, 0.70643),
    (5, [0.264685, 0.613039, 0.651646], 1_000_000, 0.77388),
]


def whole_period(spots: int, flips: list[float]) -> np.ndarray:
    """All flips: an even number of spots repeats them, inverted, in the second half."""
    if spots == 2 or spots % 2:
        return np.array(flips)
    return np.array([*flips, 0.5, *(flip + 0.5 for flip in flips)])


def spots_of(spots: int) -> np.ndarray:
    """N consecutive orders round the axis, or the N odd ones."""
    return np.arange(spots) - spots // 2 if spots % 2 else 2 * np.arange(spots) + 1 - spots


@pytest.mark.parametrize(("spots", "flips", "pixels", "efficiency"), DAMMANN)
def test_binary_splitter_of_published_flips_has_the_published_efficiency(
    grating, spots, flips, pixels, efficiency
):
    """The flips are printed to 5 or 6 digits, which move the efficiency by less than 1e-4 and
    leave a uniformity error below 1e-4; against the exact series only round-off counts."""
    orders, edges = spots_of(spots), whole_period(spots, flips)
    powers, result = grating(flips_levels(edges, pixels), orders, levels=2)
    np.testing.assert_allclose(powers, flips_powers(edges, orders), rtol=0, atol=1e-11)
    assert result["scores"]["efficiency"] == pytest.approx(efficiency, abs=1e-4)
    assert result["scores"]["uniformity_error"] < 1e-4


@pytest.mark.parametrize(("row", "efficiency"), [(4, 0.44111), (6, 0.59889)])
def test_binary_splitter_in_two_dimensions_has_the_square_of_the_efficiency(
    monkeypatch, capsys, row, efficiency
):
    """0 and pi add up modulo 2 pi, so the field is a product and so are its orders (verified)."""
    spots, flips, _, _ = DAMMANN[row]
    pixels = 400
    line = flips_levels(np.array(flips), pixels)
    result = evaluate(
        monkeypatch,
        capsys,
        line[:, None] ^ line[None, :],
        element__pixels=pixels,
        element__levels=2,
        target={"kind": "grid", "shape": [spots, spots]},
    )
    snapped = np.rint(np.array(flips) * pixels) / pixels
    one_axis = flips_powers(snapped, spots_of(spots))
    for i, m_y in enumerate(spots_of(spots)):
        for j, m_x in enumerate(spots_of(spots)):
            expected = one_axis[i] * one_axis[j]
            assert power_of(result, m_y, m_x) == pytest.approx(expected, abs=EXACT)
    # Each of up to 4 edges moves by at most half a pixel: about 2/P in an amplitude of 0.4.
    assert result["scores"]["efficiency"] == pytest.approx(efficiency, abs=4 / pixels)


def test_triplicator_has_three_orders_of_30_85_percent(grating):
    """Phase atan(2.657179 cos), Gori et al., Opt. Commun. 157, 13 (1998) (from memory, verified).

    2e-5: the digits of the parameter; 4096 pixels cost the order 1 less than 1e-6.
    """
    angle = 2 * np.pi * (np.arange(4096) + 0.5) / 4096
    powers, result = grating(np.arctan(2.657179 * np.cos(angle)), [-1, 0, 1])
    np.testing.assert_allclose(powers, 0.308521, rtol=0, atol=2e-5)
    assert result["scores"]["efficiency"] == pytest.approx(0.925562, abs=2e-5)
    assert result["scores"]["uniformity_error"] < 1e-4
    assert result["bound"]["efficiency"] == pytest.approx(0.925562, abs=2e-5)


@pytest.mark.parametrize("depth", [0.3, 1.434696, 1.841185, 3.0])
def test_sinusoidal_phase_has_bessel_orders(grating, depth):
    """J_m(A)^2 times the pixel's sinc^2(m/P), Jacobi and Anger.

    64 samples alias order 64 - m onto m: J_49(3) is below 1e-50.
    """
    pixels, orders = 64, np.arange(-15, 16)
    phase = depth * np.cos(2 * np.pi * (np.arange(pixels) + 0.5) / pixels)
    powers, _ = grating(phase, orders)
    expected = jv(orders, depth) ** 2 * np.sinc(orders / pixels) ** 2
    np.testing.assert_allclose(powers, expected, rtol=0, atol=EXACT)


def test_best_sinusoidal_phases_reach_their_known_efficiencies(grating):
    """Largest J_1^2 and J_0 = J_1 (verified); 4096 pixels cost less than 1e-6."""
    wave = np.cos(2 * np.pi * (np.arange(4096) + 0.5) / 4096)
    powers, _ = grating(1.841185 * wave, [1])
    assert powers[0] == pytest.approx(0.338567, abs=2e-6)
    _, result = grating(1.434696 * wave, [-1, 0, 1])
    assert result["scores"]["efficiency"] == pytest.approx(0.900736, abs=2e-6)
    assert result["scores"]["uniformity_error"] < 1e-5  # six digits of the depth


@pytest.mark.parametrize(
    ("orders", "waves", "efficiency"),
    [
        ([-3, -1, 1, 3], [(1, 1, 0), (3, 1.04599, 1.84495)], 0.91902),
        ([-2, -1, 0, 1, 2], [(0, 1, 0), (1, 0.91763, np.pi / 2), (2, 1.79836, np.pi)], 0.921244),
    ],
)
def test_best_continuous_splitters_into_4_and_5_reach_their_known_efficiencies(
    grating, orders, waves, efficiency
):
    """arg of a sum of cosines, form of Romero and Dickey, J. Opt. Soc. Am. A 24, 2280 (2007) (from
    memory), parameters of an own search; 2e-5 is the digits of the parameters."""
    angle = 2 * np.pi * (np.arange(4096) + 0.5) / 4096
    field = sum(size * np.exp(1j * turn) * np.cos(q * angle) for q, size, turn in waves)
    _, result = grating(np.angle(field), orders)
    assert result["scores"]["efficiency"] == pytest.approx(efficiency, abs=2e-5)
    assert result["scores"]["uniformity_error"] < 1e-3


def test_pixel_costs_an_order_at_a_quarter_of_its_count_its_sinc_squared(grating):
    """sinc^2(1/4) = 0.810569 (verified), and its strongest replica m - P has (1/3)^2 of it."""
    powers, result = grating(2 * np.pi * np.arange(32) / 4, [8])
    assert powers[0] == pytest.approx(0.810569, abs=1e-6)
    assert powers[0] == pytest.approx(np.sinc(1 / 4) ** 2, abs=EXACT)
    assert result["scores"]["worst_stray_to_mean"] == pytest.approx(1 / 9, abs=EXACT)
    assert result["scores"]["stray"] == pytest.approx(1 - np.sinc(1 / 4) ** 2, abs=EXACT)


def test_order_at_half_the_pixel_count_has_its_sinc_squared(grating):
    """sinc^2(1/2) = 0.405285 (verified) of the sin^2(phi/2) that alternating pixels send there."""
    powers, result = grating(np.tile([0.0, 2.0], 16), [0])
    assert power_of(result, 0, -16) == pytest.approx(0.405285 * np.sin(1) ** 2, abs=1e-6)
    assert powers[0] == pytest.approx(np.cos(1) ** 2, abs=EXACT)


def test_mask_without_any_light_in_the_wanted_orders_is_still_scored(grating):
    """Alternating pixels of 0 and pi send no light at all into order 1."""
    _, result = grating(np.tile([0.0, np.pi], 16), [1])
    assert result["scores"]["efficiency"] == pytest.approx(0, abs=EXACT)


def test_pixel_envelopes_of_both_axes_multiply(monkeypatch, capsys):
    """A blaze of order -2 along y and 5 along x on 12 x 20 pixels: sinc^2(2/12) sinc^2(5/20)."""
    y, x = np.indices((12, 20))
    result = evaluate(
        monkeypatch,
        capsys,
        2 * np.pi * (-2 * y / 12 + 5 * x / 20),
        element__pixels=[12, 20],
        element__levels=0,
        target={"kind": "orders", "orders": [[-2, 5]]},
    )
    expected = np.sinc(2 / 12) ** 2 * np.sinc(5 / 20) ** 2
    assert result["scores"]["efficiency"] == pytest.approx(expected, abs=EXACT)
    assert result["bound"]["efficiency"] == pytest.approx(expected, abs=EXACT)
    assert result["bound"]["kind"] == "proved"


def test_bare_aperture_has_all_light_in_the_zero_order(monkeypatch, capsys):
    result = evaluate(monkeypatch, capsys, None)
    assert power_of(result, 0, 0) == 1.0
    assert result["scores"]["efficiency"] == pytest.approx(1, abs=EXACT)


def fourier_integral(phase: np.ndarray, orders_y: np.ndarray, orders_x: np.ndarray) -> np.ndarray:
    """Powers of the orders of square pixels, every pixel integrated by itself over its area."""

    def strips(orders, pixels):
        edge = np.arange(pixels + 1) / pixels
        m = np.where(orders == 0, 1, orders)[:, None]
        wave = np.exp(-2j * np.pi * m * edge) / (-2j * np.pi * m)
        return np.where(orders[:, None] == 0, 1 / pixels, np.diff(wave, axis=1))

    rows, columns = phase.shape
    along_y, along_x = strips(orders_y, rows), strips(orders_x, columns)
    amplitudes = np.zeros((len(orders_y), len(orders_x)), complex)
    for j in range(rows):
        for i in range(columns):
            pixel = np.exp(1j * phase[j, i])
            amplitudes += pixel * along_y[:, j, None] * along_x[None, :, i]
    return np.abs(amplitudes) ** 2


def random_cell(monkeypatch, capsys, shape, wanted):
    levels = np.random.default_rng(7).integers(8, size=shape, dtype=np.uint8)
    result = evaluate(
        monkeypatch,
        capsys,
        levels,
        element__pixels=list(shape),
        target={"kind": "orders", "orders": wanted},
    )
    return 2 * np.pi / 8 * levels, result


@pytest.mark.parametrize("shape", [(9, 11), (10, 12)])
def test_every_order_of_a_random_relief_agrees_with_its_fourier_integral(
    monkeypatch, capsys, shape
):
    """Plain NumPy float64: a sum over pixels of exact integrals (definition of the orders)."""
    orders_y, orders_x = (np.arange(n) - n // 2 for n in shape)
    inner = [
        [int(m_y), int(m_x)]
        for m_y in orders_y
        for m_x in orders_x
        if 2 * abs(m_y) < shape[0] and 2 * abs(m_x) < shape[1]
    ]
    phase, result = random_cell(monkeypatch, capsys, shape, inner)
    expected = fourier_integral(phase, orders_y, orders_x)
    listed = {(o["m_y"], o["m_x"]): o["power"] for o in result["orders"]}
    assert len(listed) >= len(inner)
    for row, m_y in enumerate(orders_y):
        for column, m_x in enumerate(orders_x):
            power = listed.get((m_y, m_x))
            if power is None:
                assert expected[row, column] <= 1e-4  # left out of the JSON as too weak
            else:
                assert power == pytest.approx(expected[row, column], abs=EXACT)


def test_scores_of_a_random_relief_agree_with_their_definitions(monkeypatch, capsys):
    """Efficiency, uniformity error, zero order and worst stray with replicas from plain NumPy.

    The strongest replica lies within one pixel count of the addressed orders.
    """
    wanted = [[0, 1], [2, -3], [-1, 4]]
    phase, result = random_cell(monkeypatch, capsys, (10, 12), wanted)
    orders_y, orders_x = np.arange(-15, 16), np.arange(-18, 19)
    table = fourier_integral(phase, orders_y, orders_x)
    spot = np.array([table[m_y + 15, m_x + 18] for m_y, m_x in wanted])
    zero = table[15, 18]
    rest = table.copy()
    rest[15, 18] = 0
    for m_y, m_x in wanted:
        rest[m_y + 15, m_x + 18] = 0
    expected = {
        "efficiency": spot.sum(),
        "efficiency_with_surfaces": spot.sum() * (1 - 0.2**2) ** 2,  # (n - 1) / (n + 1), n = 1.5
        "uniformity_error": (spot.max() - spot.min()) / (spot.max() + spot.min()),
        "rms_error": spot.std() / spot.mean(),
        "zero_order": zero,
        "zero_order_to_mean": zero / spot.mean(),
        "worst_stray_to_mean": rest.max() / spot.mean(),
        "stray": 1 - spot.sum() - zero,
        "hottest_to_mean": spot.max() / spot.mean(),
    }
    for name, value in expected.items():
        assert result["scores"][name] == pytest.approx(value, abs=EXACT), name


def test_power_of_all_orders_with_their_replicas_adds_up_to_one(monkeypatch, capsys):
    """Parseval: an element of phase alone loses no light.

    Replicas up to 400 periods of the pixel on both axes are summed; the rest of sum over r of
    sinc^2(x + r) is 2 sin^2(pi x) / pi^2 / (R + 1/2) up to 1/R^3 (midpoint rule).
    """
    shape, reach = (9, 11), 400
    orders_y, orders_x = (np.arange(n) - n // 2 for n in shape)
    all_orders = [[int(m_y), int(m_x)] for m_y in orders_y for m_x in orders_x]
    phase, result = random_cell(monkeypatch, capsys, shape, all_orders)
    addressed = np.array([[power_of(result, m_y, m_x) for m_x in orders_x] for m_y in orders_y])

    def with_replicas(orders, pixels):
        x = orders[:, None] / pixels
        near = (np.sinc(x + np.arange(-reach, reach + 1)) ** 2).sum(axis=1)
        far = 2 * np.sin(np.pi * x[:, 0]) ** 2 / np.pi**2 / (reach + 0.5)
        return (near + far) / np.sinc(x[:, 0]) ** 2

    factor = with_replicas(orders_y, 9)[:, None] * with_replicas(orders_x, 11)[None, :]
    assert (addressed * factor).sum() == pytest.approx(1, abs=1e-6)
    lost = (addressed * (factor - 1)).sum()
    assert result["scores"]["stray"] == pytest.approx(lost, abs=1e-6)
    # The replicas of the addressed orders really lie where the factor puts them.
    replicas = fourier_integral(phase, orders_y + 9, orders_x - 22)
    ratio = (np.sinc((orders_y + 9) / 9) / np.sinc(orders_y / 9))[:, None] * (
        np.sinc((orders_x - 22) / 11) / np.sinc(orders_x / 11)
    )
    np.testing.assert_allclose(replicas, addressed * ratio**2, rtol=0, atol=EXACT)
