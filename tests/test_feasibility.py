"""What `doe check` tells, against arithmetic done by hand."""

import math

import pytest
from helpers import job

from doe.config.load import load
from doe.feasibility import Feasibility, assess


def assessed(**changes: object) -> Feasibility:
    """The assessment of the small job with changes."""
    return assess(load(job(**changes))[0])


def facts(**changes: object) -> dict[str, float]:
    """The SI values of the facts."""
    return {fact.name: fact.value for fact in assessed(**changes).facts}


LENS = {"plane__kind": "lens", "plane__focal_length": "100 mm"}


def test_angles_and_spacing_follow_the_grating_equation():
    found = facts(target__shape=[5, 5])
    step = 633e-9 / 640e-6
    assert found["order_spacing_x_rad"] == pytest.approx(math.asin(step))
    assert found["largest_angle_rad"] == pytest.approx(math.asin(2 * math.sqrt(2) * step))
    assert found["period_y_m"] == 640e-6


def test_the_spot_behind_a_lens_is_the_gaussian_focus():
    found = facts(beam__m2=1.2, **LENS)
    expected = 4 * 633e-9 * 0.1 * 1.2 / (math.pi * 5e-3)
    assert found["spot_diameter_m"] == pytest.approx(expected)
    assert found["pitch_to_spot"] == pytest.approx(633e-9 / 640e-6 * 0.1 / expected)


def test_beam_figures():
    found = facts()
    assert found["periods_in_beam"] == pytest.approx(5 / 0.64)
    assert found["aperture_loss"] == pytest.approx(math.exp(-8))
    assert found["pixel_pitch_x_m"] == pytest.approx(20e-6)


def test_the_spot_pitch_of_a_line_is_that_along_the_line():
    """Five spots along x, 989 urad apart; nothing lies along y, whatever the period there."""
    line = facts(element__period=["3 mm", "0.64 mm"], target__shape=[1, 5])
    angle = 4 * 633e-9 / (math.pi * 5e-3)
    assert line["pitch_to_spot"] == pytest.approx(633e-9 / 640e-6 / angle)


def test_the_spot_pitch_of_named_orders_is_their_distance():
    named = facts(target={"kind": "grid", "orders_y": [0], "orders_x": [-10, 0, 10]})
    angle = 4 * 633e-9 / (math.pi * 5e-3)
    assert named["pitch_to_spot"] == pytest.approx(10 * 633e-9 / 640e-6 / angle)


@pytest.mark.parametrize("levels", [2, 4, 8, 16])
def test_the_etches_halve_from_half_a_wave(levels):
    found = facts(element__levels=levels)
    masks = levels.bit_length() - 1
    for etch in range(1, masks + 1):
        expected = 633e-9 / 2**etch / 0.5
        assert found[f"etch_depth_{etch}_m"] == pytest.approx(expected)
    assert f"etch_depth_{masks + 1}_m" not in found


def test_a_short_pulse_smears_the_outer_spot():
    """5.2 nm of 1030 nm at an outer spot sqrt(2) 161 um off the axis."""
    found = facts(
        beam={"wavelength": "1030 nm", "diameter": "5 mm", "pulse_duration": "300 fs"}, **LENS
    )
    band = 2 * math.log(2) / math.pi * 1030e-9**2 / (299792458 * 300e-15)
    assert found["bandwidth_m"] == pytest.approx(band)
    offset = math.sqrt(2) * 1030e-9 / 640e-6 * 0.1
    assert found["smear_m"] == pytest.approx(offset * band / 1030e-9)


def test_a_stated_bandwidth_stands_above_the_pulse():
    beam = {"wavelength": "1030 nm", "diameter": "5 mm", "bandwidth": "10 nm"}
    assert facts(beam=beam | {"pulse_duration": "300 fs"})["bandwidth_m"] == pytest.approx(10e-9)


ONE = {"kind": "orders", "orders": [[0, 1]]}


def test_a_single_order_has_a_proved_bound():
    found = assessed(target=ONE, limits={"efficiency": ">= 99 %"})
    assert found.bound.kind == "proved"
    assert found.bound.efficiency == pytest.approx((math.sin(math.pi / 32) / (math.pi / 32)) ** 2)
    assert found.feasible
    assert found.limits[0].met


def test_a_limit_beyond_a_proved_bound_is_out_of_reach():
    """The pixels of order 8 of 32 leave sinc^2(1/4) = 81.1 %, whatever the phase."""
    target = {"kind": "orders", "orders": [[0, 8]]}
    found = assessed(target=target, limits={"efficiency": ">= 82 %"})
    assert not found.feasible
    assert any("out of reach" in text for text in found.verdicts)
    assert assessed(target=target, limits={"efficiency": ">= 81 %"}).feasible


def test_a_limit_above_what_levels_usually_leave_is_a_warning_only():
    """Two levels leave 40.5 % of a blaze; four would leave 81 %."""
    found = assessed(element__levels=2, target=ONE, limits={"efficiency": ">= 60 %"})
    assert found.feasible
    (text,) = [text for text in found.warnings if "above" in text]
    assert "4 levels" in text


def test_an_upper_limit_on_efficiency_is_no_promise():
    found = assessed(target=ONE, limits={"efficiency": "<= 50 %"})
    assert found.feasible
    assert not [text for text in found.warnings if "above" in text]


def test_limits_that_need_a_design_are_left_open():
    found = assessed(limits={"uniformity_error": "<= 1 %"})
    assert [(one.name, one.met) for one in found.limits] == [("uniformity_error", None)]


def test_the_bound_of_equal_orders_is_a_published_one():
    """Three equal orders reach 92.56 % (Krackhardt, Mait and Streibl 1992, from memory)."""
    found = assessed(target__shape=[1, 3], element__pixels=256)
    assert found.bound.kind == "best known"
    assert found.bound.efficiency == pytest.approx(0.9256, abs=2e-4)


def test_memory_grows_with_the_pixels():
    small, large = facts()["memory_bytes"], facts(element__pixels=512)["memory_bytes"]
    assert large - small > 24 * (512**2 - 32**2), "a float32 phase, its moments and a field"
    assert facts(solver__steps=400)["time_s"] > facts()["time_s"]
