"""Design arithmetic against closed forms worked out beside the code."""

import math

import numpy as np
import pytest

from doe import sampling


@pytest.mark.parametrize(
    ("levels", "efficiency"), [(2, 4 / math.pi**2), (4, 8 / math.pi**2), (8, 0.949640), (0, 1.0)]
)
def test_a_blaze_of_levels_has_sinc_squared_efficiency(levels, efficiency):
    """40.5 %, 81.1 % and 95.0 %: the textbook figures of Dammann's and Swanson's staircases."""
    assert sampling.blaze_efficiency(levels) == pytest.approx(efficiency, rel=1e-5)


def test_sinc_agrees_with_numpy():
    for x in np.linspace(-3, 3, 61):
        assert sampling.sinc(float(x)) == pytest.approx(float(np.sinc(x)), abs=1e-15)


def test_the_pixel_envelope_at_nyquist_is_that_of_a_binary_blaze():
    assert sampling.pixel_envelope(16, 32) == pytest.approx(4 / math.pi**2)
    assert sampling.pixel_envelope(0, 32) == 1.0


def test_the_largest_angle_is_that_of_a_grating_of_two_pixels():
    assert sampling.largest_angle(633e-9, 633e-9) == pytest.approx(math.radians(30))
    assert sampling.largest_angle(633e-9, 100e-9) == pytest.approx(math.pi / 2)


def test_the_three_mappings_of_a_lens():
    sine = math.sin(math.radians(10))
    assert sampling.focal_position(sine, 0.1, "f-sin") == pytest.approx(0.1 * sine)
    tangent = sampling.focal_position(sine, 0.1, "f-tan")
    assert tangent == pytest.approx(0.1 * math.tan(math.radians(10)))
    assert sampling.focal_position(-sine, 0.1, "f-theta") == pytest.approx(-0.1 * math.radians(10))


def test_a_focused_gaussian_is_as_wide_as_its_waist():
    """2 w0 with w0 = wavelength f / (pi w): 26.23 um for 1030 nm, 100 mm, 5 mm."""
    spot = sampling.spot_diameter(1030e-9, 0.1, 5e-3, 1.0)
    assert spot == pytest.approx(2 * 1030e-9 * 0.1 / (math.pi * 2.5e-3))
    assert spot == pytest.approx(26.23e-6, rel=1e-3)
    assert sampling.spot_diameter(1030e-9, 0.1, 5e-3, 1.3) == pytest.approx(1.3 * spot)
    assert sampling.divergence(1030e-9, 5e-3, 1.0) * 0.1 == pytest.approx(spot)


@pytest.mark.parametrize("ratio", [0.5, 1.0, 1.5, 2.0])
def test_the_loss_at_an_aperture_agrees_with_the_integral(ratio):
    diameter = 5e-3
    w, edge = diameter / 2, ratio * diameter / 2
    r = (np.arange(200_000) + 0.5) / 200_000 * edge
    inside = float((np.exp(-2 * (r / w) ** 2) * r).sum() * (edge / 200_000) * 4 / w**2)
    assert sampling.aperture_loss(diameter, ratio * diameter) == pytest.approx(1 - inside, abs=1e-8)


def test_one_and_a_half_beam_diameters_lose_one_per_cent():
    assert sampling.aperture_loss(5e-3, 7.5e-3) == pytest.approx(0.0111, abs=5e-5)


def test_the_peak_fluence_integrates_to_the_pulse_energy():
    energy, diameter = 1e-3, 5e-3
    peak = sampling.peak_fluence(energy, diameter)
    r = (np.arange(100_000) + 0.5) * (4 * diameter / 100_000)
    profile = peak * np.exp(-2 * (r / (diameter / 2)) ** 2)
    total = float((profile * 2 * math.pi * r).sum() * (4 * diameter / 100_000))
    assert total == pytest.approx(energy, rel=1e-6)
    assert peak == pytest.approx(101.86, rel=1e-4)  # 2 mJ / (pi 6.25 mm^2) in J/m^2


def test_300_fs_at_1030_nm_are_5_nm_wide():
    assert sampling.transform_limit(1030e-9, 300e-15) == pytest.approx(5.2e-9, abs=0.03e-9)


@pytest.mark.parametrize(
    ("rule", "pitch", "pixels"),
    [(1e-6, 1e-6, 1), (1.001e-6, 1e-6, 2), (0.5e-6, 4e-6, 1), (3e-6, 1e-6, 3), (0.3, 0.1, 3)],
)
def test_a_rule_takes_whole_pixels(rule, pitch, pixels):
    assert sampling.pixels_for(rule, pitch) == pixels


def test_the_etches_halve_and_the_first_is_half_a_turn():
    depths = [sampling.etch_depth(1030e-9, 1.45, etch) for etch in (1, 2, 3)]
    assert 2 * math.pi / 1030e-9 * 0.45 * depths[0] == pytest.approx(math.pi)
    assert depths[0] / depths[1] == pytest.approx(2)
    assert depths[1] / depths[2] == pytest.approx(2)
