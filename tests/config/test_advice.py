"""Warnings: each is given where it is due, with figures worked out by hand, and not elsewhere."""

import pytest
from helpers import job

from doe.config.advice import largest_prime, next_good, process_warnings, warnings
from doe.config.load import load


def told(**changes: object) -> list[str]:
    """The warnings of the small job with changes."""
    return warnings(load(job(**changes))[0])


def test_a_sound_job_has_no_warnings():
    assert told() == []


def test_pixels_below_half_a_wavelength_are_beyond_the_model():
    """Row 24: 9 um / 32 = 281 nm, below 633 nm / 2."""
    (one, *_) = [text for text in told(element__period="9 um") if "thin-element" in text]
    assert "281.2 nm" in one
    assert "not valid" in one


def test_pixels_of_few_wavelengths_make_the_model_uncertain():
    (one,) = [text for text in told(element__period="180 um") if "thin-element" in text]
    assert "8.9 wavelengths" in one  # 180 / 32 / 0.633
    assert "uncertain" in one


@pytest.mark.parametrize(("pixels", "good"), [(34, 36), (257, 270), (251, 256), (38, 40)])
def test_a_large_prime_factor_names_the_next_good_size(pixels, good):
    """Row 30; the next number of the form 2^a 3^b 5^c by hand."""
    (one, *_) = [text for text in told(element__pixels=pixels) if "slow" in text]
    assert f"{pixels} pixels" in one
    assert f"{good} would be faster" in one


@pytest.mark.parametrize("pixels", [33, 65, 49, 26])
def test_an_odd_size_of_small_primes_is_not_slow(pixels):
    assert not [text for text in told(element__pixels=pixels) if "slow" in text]


def test_prime_factors_agree_with_trial_division():
    for number in range(2, 400):
        divisors = [p for p in range(2, number + 1) if number % p == 0]
        primes = [p for p in divisors if all(p % q for q in range(2, p))]
        assert largest_prime(number) == max(primes)
    assert next_good(1) == 1


def test_spots_closer_than_the_beam_resolves_overlap():
    """Row 34: angle between orders 989 urad; 4 633 nm / (pi 1 mm) = 806 urad, ratio 1.2."""
    (one,) = [text for text in told(beam__diameter="1 mm", beam__m2=1.0) if "overlap" in text]
    assert "1.2 spot diameters" in one


def test_distant_orders_do_not_overlap():
    """Orders 10 apart lie 9.9 mrad apart, 12 spot diameters of 0.81 mrad."""
    target = {"kind": "grid", "orders_y": [0], "orders_x": [-10, 0, 10]}
    assert not [text for text in told(beam__diameter="1 mm", target=target) if "overlap" in text]


def test_a_rule_below_the_pixel_has_no_effect():
    """Row 42: the pixel is 640 um / 32 = 20 um."""
    (one,) = told(process__min_feature="5 um")
    assert "min_feature of 5 um has no effect" in one
    assert "20 um" in one


def test_a_rule_between_whole_pixels_is_rounded_up():
    """Row 43: 30 um on pixels of 20 um takes 2 of them."""
    config, _ = load(job())
    process = config.process.model_copy(update={"min_feature": 30e-6, "min_gap": 30e-6})
    (one,) = process_warnings(config.model_copy(update={"process": process}))
    assert "30 um is rounded up to 40 um" in one


def test_a_rule_of_whole_pixels_is_not_rounded():
    config, _ = load(job())
    process = config.process.model_copy(update={"min_feature": 40e-6, "min_gap": 60e-6})
    assert list(process_warnings(config.model_copy(update={"process": process}))) == []


def test_two_levels_cannot_make_an_unsymmetric_target():
    """Row 46: a mask of phases 0 and pi is real, so that orders m and -m are twins."""
    target = {"kind": "orders", "orders": [[0, 1], [0, 2]]}
    (one,) = told(element__levels=2, target=target)
    assert "twin" in one
    assert told(element__levels=4, target=target) == []
    assert told(element__levels=2, target={"kind": "orders", "orders": [[1, 1], [-1, -1]]}) == []


def test_unequal_twins_are_unsymmetric_too():
    target = {"kind": "orders", "orders": [[0, 1], [0, -1]], "weights": [1, 2]}
    assert any("twin" in text for text in told(element__levels=2, target=target))


@pytest.mark.parametrize(("aperture", "cut"), [("5 mm", "13.53 %"), ("7.5 mm", "1.11 %")])
def test_a_small_aperture_cuts_the_beam(aperture, cut):
    """exp(-2 (a/D)^2): 13.53 % at a = D and 1.11 % at a = 1.5 D."""
    (one,) = told(element__aperture=aperture)
    assert f"cuts {cut}" in one


def test_few_periods_in_the_beam_are_told():
    """5 mm over 2 mm is 2.5; three periods want 1.667 mm."""
    (one,) = [text for text in told(element__period="2 mm") if "periods" in text]
    assert "2.5 periods" in one
    assert "1.667 mm" in one


def test_wide_angles_are_uncertain():
    """Order 15 of a 9 um period lies beyond asin(15 0.633 / 9) > 15 deg."""
    changes = {"target": {"kind": "orders", "orders": [[0, 0], [0, 5]]}}
    (one,) = [text for text in told(element__period="9 um", **changes) if "outermost" in text]
    assert "20.59 deg" in one  # asin(5 * 0.633 / 9)
    assert "15 deg" in one
