"""Rules across tables: sound jobs pass, and each rule is told with figures worked out by hand."""

import math

import pytest
from helpers import job

from doe.config.load import load
from doe.errors import ConfigError


def fault_of(**changes: object):
    """The first fault of the small job with changes."""
    with pytest.raises(ConfigError) as caught:
        load(job(**changes))
    return caught.value.faults[0]


def orders(*pairs: list[int]) -> dict[str, object]:
    """A target of listed orders."""
    return {"kind": "orders", "orders": list(pairs)}


@pytest.mark.parametrize("levels", [0, 2, 4, 8, 16, 32, 64, 128, 256])
def test_masks_make_powers_of_two_of_levels(levels):
    assert load(job(element__levels=levels))[0].element.levels == levels


@pytest.mark.parametrize(("levels", "low"), [(3, 2), (5, 4), (6, 4), (7, 4), (12, 8), (255, 128)])
def test_other_numbers_of_levels_name_both_neighbours(levels, low):
    assert f"{low} or {2 * low}" in fault_of(element__levels=levels).fix


@pytest.mark.parametrize("order", [-15, 15])
def test_the_last_order_inside_the_field_is_sound(order):
    load(job(target=orders([0, order], [order, 0])))


@pytest.mark.parametrize("order", [-16, 16])
def test_the_nyquist_order_is_refused(order):
    assert "Nyquist" in fault_of(target=orders([0, 0], [order, 0])).problem


def test_an_order_along_y_of_a_one_dimensional_cell_is_refused():
    fault = fault_of(element__pixels=[1, 32], target=orders([1, 0]))
    assert "along y" in fault.problem


def test_the_even_count_asks_for_odd_orders():
    config, _ = load(job(target={"kind": "grid", "shape": [2, 4]}))
    places = {(spot.m_y, spot.m_x) for spot in config.target.spots((1.0, 1.0))}
    assert places == {(y, x) for y in (-1, 1) for x in (-3, -1, 1, 3)}


@pytest.mark.parametrize(("count", "spacing"), [(5, 1), (4, 2)])
def test_the_pitch_of_a_grid_sets_the_period(count, spacing):
    # pitch = spacing * wavelength * f / period, f-sin mapping
    changes = {"plane__kind": "lens", "plane__focal_length": "200 mm", "element__period": None}
    config, _ = load(job(target__shape=[count, count], target__pitch="0.1266 mm", **changes))
    expected = spacing * 633e-9 * 0.2 / 126.6e-6
    assert config.element.period == pytest.approx((expected, expected), rel=1e-12)


def test_the_angular_pitch_of_a_grid_sets_the_period():
    config, _ = load(job(element__period=None, target__angular_pitch=["0.1 deg", "2 mrad"]))
    expected = 633e-9 / math.sin(math.radians(0.1)), 633e-9 / math.sin(2e-3)
    assert config.element.period == pytest.approx(expected, rel=1e-12)


@pytest.mark.parametrize(("period", "sound"), [("633.05 um", True), ("633.2 um", False)])
def test_a_period_may_differ_from_the_pitch_by_a_rounding(period, sound):
    """Relative departures of 8e-5 and 3e-4 on either side of the stated 1e-4."""
    changes = {"element__period": period, "target__angular_pitch": "1 mrad"}
    if sound:
        assert load(job(**changes))[0].element.period[0] == pytest.approx(633.05e-6)
    else:
        fault = fault_of(**changes)
        assert fault.key == "element.period"
        assert "633.0001 um" in fault.problem  # 633e-9 / sin(1e-3)


def test_a_one_dimensional_cell_is_one_pixel_high():
    config, _ = load(job(element__pixels=[1, 64], target=orders([0, 1], [0, -1])))
    assert config.element.period == pytest.approx((640e-6 / 64, 640e-6))


def test_an_angle_on_an_order_is_sound_and_between_orders_is_not():
    step = 633e-9 / 640e-6
    on = math.degrees(math.asin(3 * step))
    load(job(target={"kind": "angles", "angles": [["0 deg", f"{on:.7f} deg"]]}))
    off = math.degrees(math.asin(3.02 * step))
    fault = fault_of(target={"kind": "angles", "angles": [["0 deg", f"{off:.7f} deg"]]})
    assert "3.020" in fault.problem


def test_half_the_period_is_the_largest_rule():
    fault = fault_of(element__pixels=8, process__min_feature="320.1 um")
    assert "320 um" in fault.allowed


def test_a_rule_of_one_pixel_is_sound():
    assert load(job(process__min_feature="20 um"))[0].process.min_gap == pytest.approx(20e-6)


def test_as_many_weights_as_spots_are_sound():
    config, _ = load(job(target__weights=[1, 1, 1, 1, 0, 1, 1, 1, 1]))
    assert len(config.target.spots((1.0, 1.0))) == 8


def test_an_unwanted_zero_order_is_no_spot():
    config, _ = load(job(target__zero_order="unwanted"))
    assert (0, 0) not in {(spot.m_y, spot.m_x) for spot in config.target.spots((1.0, 1.0))}


def test_limits_from_both_sides_are_sound_where_they_leave_room():
    config, _ = load(job(limits={"zero_order_to_mean": [">= 0.88", "<= 112 %"]}))
    low, high = config.limits.zero_order_to_mean
    assert (low.value, high.value) == pytest.approx((0.88, 1.12))
    assert low.met_by(0.9)
    assert not low.met_by(0.87)
