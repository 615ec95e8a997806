"""Wanted orders, their shares, and where a lens puts them."""

import math

import numpy as np
import pytest
from helpers import job

from doe.config.load import load
from doe.targets import BUILDERS, build
from doe.targets.spots import position_error


def orders(**changes: object) -> dict[tuple[int, int], float]:
    """Wanted orders and their shares for the small job with changes."""
    target = build(load(job(**changes))[0])
    assert target.share.sum() == pytest.approx(1)
    places = zip(target.m_y.tolist(), target.m_x.tolist(), strict=True)
    return dict(zip(places, target.share, strict=True))


def test_an_odd_grid_takes_consecutive_orders():
    found = orders(target__shape=[3, 5])
    assert set(found) == {(y, x) for y in (-1, 0, 1) for x in (-2, -1, 0, 1, 2)}
    assert list(found.values()) == pytest.approx([1 / 15] * 15)


def test_an_even_grid_takes_odd_orders_alone():
    found = orders(target__shape=[2, 4])
    assert set(found) == {(y, x) for y in (-1, 1) for x in (-3, -1, 1, 3)}


def test_named_orders_make_a_grid():
    found = orders(target={"kind": "grid", "orders_y": [0, 2], "orders_x": [-5, 1]})
    assert set(found) == {(0, -5), (0, 1), (2, -5), (2, 1)}


def test_weights_run_along_the_rows_and_make_the_shares():
    found = orders(target={"kind": "grid", "shape": [1, 3], "weights": [1, 2, 5]})
    assert found == {(0, -1): 1 / 8, (0, 0): 2 / 8, (0, 1): 5 / 8}


def test_nested_weights_are_read_row_by_row():
    target = {"kind": "grid", "orders_y": [0, 1], "orders_x": [0, 1], "weights": [[1, 2], [3, 4]]}
    assert orders(target=target) == {(0, 0): 0.1, (0, 1): 0.2, (1, 0): 0.3, (1, 1): 0.4}


def test_a_spot_without_weight_is_not_wanted():
    found = orders(target={"kind": "orders", "orders": [[0, 1], [2, 3]], "weights": [0, 1]})
    assert found == {(2, 3): 1.0}


def test_an_unwanted_zero_order_leaves_the_others():
    found = orders(target__zero_order="unwanted")
    assert len(found) == 8
    assert (0, 0) not in found


def test_angles_become_the_nearest_orders():
    """The order is sin(angle) period / wavelength; 0.1 % of a step off is within the rule."""
    step = 633e-9 / 640e-6
    angle = math.degrees(math.asin(4.001 * step))
    target = {"kind": "angles", "angles": [[f"{angle:.9f} deg", f"{-angle:.9f} deg"]]}
    assert orders(target=target) == {(4, -4): 1.0}
    config, _ = load(job(target=target))
    error = position_error(config, build(config))
    assert error == pytest.approx(0.001 * step * math.sqrt(2), rel=1e-4)


LENS = {"plane__kind": "lens", "plane__focal_length": "100 mm", "element__period": None}


def test_with_the_sine_mapping_every_spot_lies_at_its_pitch():
    config, _ = load(job(target__pitch="1 mm", target__shape=[3, 7], **LENS))
    assert position_error(config, build(config)) == pytest.approx(0, abs=1e-15)


@pytest.mark.parametrize(
    ("mapping", "place"), [("f-tan", math.tan), ("f-theta", lambda angle: angle)]
)
def test_other_mappings_move_the_outer_spots(mapping, place):
    """1 mm at 100 mm sets the sine of order 1 to 0.01; order 3 then lies off 3 mm."""
    config, _ = load(
        job(target__pitch="1 mm", target__shape=[1, 7], plane__mapping=mapping, **LENS)
    )
    expected = abs(0.1 * place(math.asin(0.03)) - 3e-3)
    assert position_error(config, build(config)) == pytest.approx(expected, rel=1e-9)


def test_an_even_grid_lies_at_its_pitch_too():
    config, _ = load(job(target__pitch=["1 mm", "0.5 mm"], target__shape=[2, 4], **LENS))
    assert position_error(config, build(config)) == pytest.approx(0, abs=1e-15)
    step = 633e-9 / config.element.period[1] * 0.1  # one order along x
    assert 2 * step == pytest.approx(0.5e-3)


def test_a_period_rounded_by_the_user_moves_the_spots():
    """4e-5 of 3 mm, within the 1e-4 that is let through."""
    period = 633e-9 / 0.01 * (1 + 4e-5)
    config, _ = load(
        job(
            target__pitch="1 mm",
            target__shape=[1, 7],
            **(LENS | {"element__period": f"{period * 1e6:.9f} um"}),
        )
    )
    assert position_error(config, build(config)) == pytest.approx(3e-3 * 4e-5, rel=1e-3)


def test_orders_have_no_wanted_place():
    config, _ = load(job())
    assert position_error(config, build(config)) is None


def test_every_kind_of_target_has_a_builder():
    from doe.config.faults import target_kinds
    from doe.config.target import NoTarget

    assert set(target_kinds().values()) - {NoTarget} == set(BUILDERS)
    assert np.isfinite(build(load(job())[0]).share).all()
