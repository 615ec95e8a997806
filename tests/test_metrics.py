"""Scores of order tables made by hand, and the order in which designs are preferred."""

import jax.numpy as jnp
import numpy as np
import pytest
from helpers import job

from doe.config.load import load
from doe.metrics import (
    Scores,
    Wanted,
    merit,
    range_of,
    replica_ratio,
    scores,
    uniformity_error,
)

N = 8  # orders -4 .. 3 along both axes, the zero order at [4, 4]


def table_of(powers: dict[tuple[int, int], float], shape: tuple[int, int] = (N, N)):
    """An order table with these powers and no others."""
    table = np.zeros(shape, np.float32)
    for (m_y, m_x), power in powers.items():
        table[m_y + shape[0] // 2, m_x + shape[1] // 2] = power
    return jnp.asarray(table)


def wanted(shares: dict[tuple[int, int], float], shape: tuple[int, int] = (N, N)) -> Wanted:
    """Wanted orders and their shares; surfaces pass 92 %."""
    return Wanted(
        row=jnp.array([m_y + shape[0] // 2 for m_y, _ in shares]),
        column=jnp.array([m_x + shape[1] // 2 for _, m_x in shares]),
        share=jnp.array(list(shares.values()), jnp.float32),
        surfaces=jnp.float32(0.92),
    )


PAIR = {(0, 1): 0.5, (0, -1): 0.5}


def test_scores_of_two_unequal_orders():
    """0.5 and 0.3: U = 0.2 / 0.8, rms = 0.1 / 0.4, hottest 0.5 / 0.4."""
    powers = {(0, 1): 0.5, (0, -1): 0.3, (0, 0): 0.08, (2, 0): 0.04}
    found = scores(table_of(powers), wanted(PAIR))
    expected = {
        "efficiency": 0.8,
        "efficiency_with_surfaces": 0.8 * 0.92,
        "uniformity_error": 0.25,
        "rms_error": 0.25,
        "zero_order": 0.08,
        "zero_order_to_mean": 0.2,
        "worst_stray_to_mean": 0.1,
        "stray": 0.12,
        "hottest_to_mean": 1.25,
    }
    assert found._asdict() == pytest.approx(expected, rel=1e-6)


def test_a_wanted_zero_order_is_no_stray():
    shares = {(0, 0): 1 / 3, (0, 1): 1 / 3, (0, -1): 1 / 3}
    found = scores(table_of({(0, 0): 0.4, (0, 1): 0.2, (0, -1): 0.3}), wanted(shares))
    assert float(found.stray) == pytest.approx(0.1, abs=1e-6)
    assert float(found.zero_order) == pytest.approx(0.4)
    assert float(found.zero_order_to_mean) == pytest.approx(0.4 / 0.3)
    assert float(found.uniformity_error) == pytest.approx(0.2 / 0.6, rel=1e-6)


def test_powers_in_the_wanted_ratio_are_uniform():
    shares = {(0, 1): 0.6, (0, 2): 0.3, (1, 0): 0.1}
    found = scores(
        table_of({place: 0.9 * share for place, share in shares.items()}), wanted(shares)
    )
    assert float(found.efficiency) == pytest.approx(0.9)
    for name in ("uniformity_error", "rms_error"):
        assert float(getattr(found, name)) == pytest.approx(0, abs=1e-6)
    assert float(found.hottest_to_mean) == pytest.approx(1)


def test_unequal_shares_are_judged_by_their_own_targets():
    """Equal powers where 3 : 1 is wanted: relative 2/3 and 2, U = (2 - 2/3) / (2 + 2/3)."""
    found = scores(table_of({(0, 1): 0.4, (0, -1): 0.4}), wanted({(0, 1): 0.75, (0, -1): 0.25}))
    assert float(found.uniformity_error) == pytest.approx(0.5)
    assert float(found.hottest_to_mean) == pytest.approx(2 / (4 / 3))


@pytest.mark.parametrize(
    ("powers", "error"), [([1, 1, 1], 0), ([1, 3], 0.5), ([0, 5], 1), ([0.9, 1.0, 1.1], 0.1)]
)
def test_the_uniformity_error_is_max_minus_min_over_their_sum(powers, error):
    assert float(uniformity_error(jnp.array(powers, jnp.float32))) == pytest.approx(error, abs=1e-7)


@pytest.mark.parametrize("order", [1, 2, 3, -4])
def test_the_nearest_replica_has_the_pixels_share(order):
    """sinc^2((m - n) / n) over sinc^2(m / n) is (m / (n - m))^2 for whole m."""
    m = abs(order)
    ratio = np.sinc((m - N) / N) ** 2 / np.sinc(m / N) ** 2
    assert replica_ratio(N)[order + N // 2] == pytest.approx((m / (N - m)) ** 2)
    assert replica_ratio(N)[order + N // 2] == pytest.approx(ratio)


def test_a_replica_of_a_wanted_order_may_be_the_worst_stray():
    """Order 3 of 8 pixels has a replica of (3/5)^2 = 0.36 of its power."""
    found = scores(
        table_of({(0, 3): 0.4, (0, 1): 0.4, (1, 1): 0.1}), wanted({(0, 3): 0.5, (0, 1): 0.5})
    )
    assert float(found.worst_stray_to_mean) == pytest.approx(0.36)


def test_a_replica_of_the_zero_order_does_not_exist():
    found = scores(table_of({(0, 0): 0.9, (0, 1): 0.05, (0, -1): 0.05}), wanted(PAIR))
    assert float(found.worst_stray_to_mean) == pytest.approx(1 / 49, rel=1e-5)  # of order 1


def test_a_one_dimensional_cell_has_replicas_along_x_alone():
    shape = (1, N)
    found = scores(
        table_of({(0, 2): 0.4, (0, -2): 0.4}, shape), wanted({(0, 2): 0.5, (0, -2): 0.5}, shape)
    )
    assert float(found.worst_stray_to_mean) == pytest.approx((2 / 6) ** 2)
    assert (replica_ratio(1) == 0).all()


def some(**changes: float) -> Scores:
    """Scores of a fair design, with changes."""
    fair = dict.fromkeys(Scores._fields, 0.1) | {"efficiency": 0.8, "uniformity_error": 0.005}
    return Scores(**{name: jnp.float32(value) for name, value in (fair | changes).items()})


def limits_of(**limits: object):
    """Limits of a job as arrays."""
    return range_of(load(job(limits=limits))[0].limits)


def test_a_design_within_its_limits_is_worth_its_efficiency():
    limits = limits_of(efficiency=">= 70 %", uniformity_error="<= 1 %")
    assert float(merit(some(), limits)) == pytest.approx(0.8)
    assert float(merit(some(efficiency=0.9), limits)) > float(merit(some(), limits))


def test_every_feasible_design_comes_before_every_infeasible_one():
    limits = limits_of(uniformity_error="<= 1 %")
    poor = merit(some(efficiency=0.01), limits)
    bright = merit(some(efficiency=1.0, uniformity_error=0.0101), limits)
    assert float(poor) > float(bright)


def test_of_two_infeasible_designs_the_one_nearer_its_limits_comes_first():
    limits = limits_of(uniformity_error="<= 1 %")
    near = merit(some(efficiency=0.6, uniformity_error=0.05), limits)
    far = merit(some(efficiency=0.7, uniformity_error=0.2), limits)
    assert float(near) > float(far)


@pytest.mark.parametrize(
    ("limits", "kept", "broken"),
    [
        ({"zero_order_to_mean": [">= 0.9", "<= 1.1"]}, 1.0, 1.2),
        ({"zero_order_to_mean": [">= 0.9", "<= 1.1"]}, 1.0, 0.8),
        ({"zero_order_to_mean": "<= 0.5"}, 0.4, 0.6),
    ],
)
def test_limits_hold_on_either_side(limits, kept, broken):
    limits = limits_of(**limits)
    assert float(merit(some(zero_order_to_mean=kept), limits)) > 0
    assert float(merit(some(zero_order_to_mean=broken), limits)) < 0


def test_a_design_that_is_met_by_a_hair_in_float32_is_met_in_float64():
    """The search keeps a trace inside the stated limit, so that the verdict cannot turn."""
    limits = limits_of(efficiency=">= 80 %")
    assert float(merit(some(efficiency=0.80001), limits)) < 0
    assert float(merit(some(efficiency=0.8003), limits)) > 0
