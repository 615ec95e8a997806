"""Index, etch depths and surfaces of fused silica, and the first acceptance job by hand."""

import json

import numpy as np
import pytest
from helpers import ROOT, call, evaluate, job

# Wavelength [um], index, depth of the pi etch [um]: Malitson, J. Opt. Soc. Am. 55, 1205 (1965),
# coefficients read, digits verified.
FUSED_SILICA = [
    (0.2483, 1.508383, 0.24421),
    (0.2660, 1.499683, 0.26617),
    (0.3550, 1.476072, 0.37284),
    (0.4050, 1.469581, 0.43124),
    (0.4880, 1.463015, 0.52698),
    (0.5320, 1.460706, 0.57737),
    (0.5875618, 1.458464, 0.64079),
    (0.6328, 1.457018, 0.69231),
    (0.7800, 1.453671, 0.85965),
    (0.8500, 1.452498, 0.93923),
    (0.9400, 1.451199, 1.04167),
    (1.0640, 1.449631, 1.18319),
    (1.3100, 1.446804, 1.46597),
    (1.5500, 1.444024, 1.74540),
    (2.0000, 1.438085, 2.28266),
]


@pytest.fixture
def check(monkeypatch, capsys):
    """Exit status and JSON of `doe check` for a wavelength in fused silica."""

    def run(wavelength: str, **changes):
        path = job(material={"name": "fused silica"}, beam__wavelength=wavelength, **changes)
        status, out, _ = call(monkeypatch, capsys, "check", path, "--json")
        return status, json.loads(out)

    return run


@pytest.mark.parametrize(("wavelength", "index", "depth"), FUSED_SILICA)
def test_fused_silica_has_the_published_index_and_pi_depth(check, wavelength, index, depth):
    """Half a unit of the last digit printed: 5e-7 in the index, 5e-6 um in the depth."""
    status, result = check(f"{wavelength} um")
    assert status == 0
    assert result["facts"]["index"] == pytest.approx(index, abs=5.1e-7)
    assert result["facts"]["etch_depth_1_m"] == pytest.approx(depth * 1e-6, abs=5.1e-12)


def test_each_etch_is_half_as_deep_as_the_one_before(check):
    """lambda / (2^m (n - 1)): all N - 1 steps add up to (N - 1)/N lambda / (n - 1) (definition)."""
    _, result = check("1030 nm", element__levels=16)
    depths = [result["facts"][f"etch_depth_{etch}_m"] for etch in (1, 2, 3, 4)]
    np.testing.assert_allclose(depths, depths[0] / 2.0 ** np.arange(4), rtol=1e-12)
    total = 15 / 16 * 1030e-9 / (result["facts"]["index"] - 1)
    assert sum(depths) == pytest.approx(total, rel=1e-12)


@pytest.mark.parametrize("wavelength", ["193 nm", "209.9 nm", "3.72 um", "10.6 um"])
def test_wavelength_outside_the_published_fit_is_refused(check, wavelength):
    """0.21 to 3.71 um, Malitson (1965) (read)."""
    status, result = check(wavelength)
    assert status == 3
    assert [fault["key"] for fault in result["errors"]] == ["beam.wavelength"]
    assert "fused silica" in result["errors"][0]["problem"]


@pytest.mark.parametrize("wavelength", ["210 nm", "3.71 um"])
def test_wavelength_at_the_end_of_the_published_fit_is_accepted(check, wavelength):
    assert check(wavelength, element__period="2 mm")[0] == 0


def test_unknown_material_is_refused_with_the_nearest_name(monkeypatch, capsys):
    path = job(material={"name": "fused silca"})
    status, out, _ = call(monkeypatch, capsys, "check", path, "--json")
    assert status == 3
    assert "fused silica" in json.loads(out)["errors"][0]["fix"]


def test_both_surfaces_of_fused_silica_let_93_percent_through(monkeypatch, capsys):
    """(1 - R)^2, R = ((n - 1)/(n + 1))^2 = 0.034598 at 632.8 nm (verified); 2 x 5e-7 in R."""
    result = evaluate(
        monkeypatch,
        capsys,
        None,
        material={"name": "fused silica"},
        beam__wavelength="632.8 nm",
        target={"kind": "orders", "orders": [[0, 0]]},
    )
    through = result["scores"]["efficiency_with_surfaces"]
    assert through == pytest.approx((1 - 0.034598) ** 2, abs=1.1e-6)


@pytest.mark.parametrize("levels", [2, 8])
def test_height_of_a_whole_wavelength_over_n_minus_1_is_a_whole_turn(monkeypatch, capsys, levels):
    """Phase 2 pi (n - 1) h / lambda (definition): heights of an N-level blaze make the blaze."""
    index = 1.457018  # fused silica at 632.8 nm, as above; its 5e-7 cost less than 1e-9 of power
    step = 632.8e-9 / (index - 1) / levels
    heights = np.repeat(np.arange(levels), 32 // levels)[None, :] * step
    result = evaluate(
        monkeypatch,
        capsys,
        heights,
        "--as",
        "height",
        material={"name": "fused silica"},
        beam__wavelength="632.8 nm",
        element__pixels=[1, 32],
        element__levels=0,
        target={"kind": "orders", "orders": [[0, 1]]},
    )
    assert result["scores"]["efficiency"] == pytest.approx(np.sinc(1 / levels) ** 2, abs=1e-8)


def test_needle_mill_has_the_numbers_of_the_hand_calculation(monkeypatch, capsys):
    """7 x 7 at 1030 nm, f 100 mm, pitch 100 um, D 5 mm, M^2 1.1, 5.2 nm: by hand, digits as given.

    Period lambda f / pitch; spot 4 lambda f M^2 / (pi D); smear 424 um x 5.2 nm / 1030 nm.
    """
    path = ROOT / "configs" / "needle_mill.toml"
    status, out, _ = call(monkeypatch, capsys, "check", path, "--json")
    result = json.loads(out)
    facts = result["facts"]
    assert status == 0
    assert result["feasible"]
    for etch, depth in enumerate([1144.3e-9, 572.2e-9, 286.1e-9], start=1):
        assert facts[f"etch_depth_{etch}_m"] == pytest.approx(depth, abs=0.06e-9)
    assert "etch_depth_4_m" not in facts
    assert facts["period_x_m"] == pytest.approx(1.030e-3, rel=1e-9)
    assert facts["order_spacing_x_rad"] == pytest.approx(1.000e-3, abs=5e-7)
    assert facts["periods_in_beam"] == pytest.approx(4.85, abs=0.005)
    assert facts["spot_diameter_m"] == pytest.approx(28.9e-6, abs=0.06e-6)
    assert facts["pitch_to_spot"] == pytest.approx(3.5, abs=0.05)
    assert facts["pixel_pitch_x_m"] == pytest.approx(4.02e-6, abs=0.005e-6)
    assert facts["bandwidth_m"] == pytest.approx(5.2e-9, abs=0.06e-9)
    assert facts["smear_m"] == pytest.approx(2.1e-6, abs=0.06e-6)
    corner = np.hypot(3, 3) * facts["order_spacing_x_rad"]
    assert facts["largest_angle_rad"] == pytest.approx(corner, rel=1e-5)
    assert result["bound"]["levels_factor"] == pytest.approx(0.949641, abs=1e-6)
