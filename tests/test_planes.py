"""Light of single elements on their planes, from config to figures, against closed forms."""

import json
import math

import h5py
import numpy as np
import pytest
from helpers import call, job

WAVE, FOCAL = 532e-9, 0.2
LAMBDA_F = WAVE * FOCAL


def tables(**changes):
    """A bare beam behind a lens, with changes."""
    base = {
        "beam": {"wavelength": "532 nm", "diameter": "4 mm"},
        "element": {
            "kind": "single",
            "size": "12 mm",
            "pixels": 384,
            "levels": 0,
            "aperture": "12 mm",
        },
        "plane": {
            "kind": "lens",
            "focal_length": "200 mm",
            "window": "250 um",
            "samples": 201,
        },
        "target": {"kind": "none"},
    }
    for name, value in changes.items():
        table, _, key = name.partition("__")
        if value is None:
            base[table].pop(key, None)
        elif key:
            base[table][key] = value
        else:
            base[table] = value
    return base


def lit(monkeypatch, capsys, *words, **changes):
    """The JSON of `doe evaluate` for a single element."""
    path = job(**tables(**changes))
    status, out, err = call(monkeypatch, capsys, "evaluate", path, *words, "--json")
    assert status == 0, err
    return json.loads(out)


@pytest.fixture
def light(monkeypatch, capsys):
    return lambda *words, **changes: lit(monkeypatch, capsys, *words, **changes)


def spot(diameter, distance=FOCAL):
    """1/e^2 diameter of a focused Gaussian, ISO 11146 propagation law (from memory)."""
    return 4 * WAVE * distance / (math.pi * diameter)


def test_a_round_gaussian_has_the_spot_of_its_beam_law(light):
    (plane,) = light()["planes"]
    assert plane["width"] == pytest.approx([spot(4e-3)] * 2, rel=1e-3)
    assert plane["power_in_window"] == pytest.approx(1, abs=1e-4)
    assert plane["peak_irradiance"] == pytest.approx(8 / (math.pi * spot(4e-3) ** 2), rel=2e-3)


def test_an_elliptical_beam_has_its_wide_focus_along_its_narrow_side(light):
    (plane,) = light(beam__diameter=["4 mm", "2.5 mm"])["planes"]
    assert plane["width"] == pytest.approx([spot(4e-3), spot(2.5e-3)], rel=2e-3)


def test_a_fwhm_is_converted_aloud(light):
    """FWHM = 2 w sqrt(ln 2 / 2), so that D = 1.6986 FWHM."""
    told = light(beam__diameter=None, beam__fwhm="2.35482 mm")
    assert told["planes"][0]["width"] == pytest.approx([spot(4e-3)] * 2, rel=1e-3)
    assert any("FWHM" in text and "4 mm" in text for text in told["warnings"])


@pytest.mark.parametrize("shift", [-6e-3, 3e-3])
def test_out_of_focus_the_beam_grows_by_its_rayleigh_range(light, shift):
    """w(z) = w0 sqrt(1 + (z / z_R)^2), z_R = pi w0^2 / lambda."""
    text = f"{shift * 1e3} mm"
    (plane,) = light(plane__shifts=[text], plane__window="600 um")["planes"]
    waist = spot(4e-3) / 2
    grown = 2 * waist * math.hypot(1, shift * WAVE / (math.pi * waist**2))
    assert plane["width"] == pytest.approx([grown] * 2, rel=2e-3)
    assert plane["shift_m"] == pytest.approx(shift)


def test_m2_widens_the_focus_and_keeps_the_beam(light):
    """The far field of a beam of M^2 is M^2 times as wide (ISO 11146, from memory)."""
    (plane,) = light(beam__m2=1.8)["planes"]
    assert plane["width"] == pytest.approx([1.8 * spot(4e-3)] * 2, rel=5e-3)


def test_a_residual_divergence_adds_in_squares(light):
    (plane,) = light(beam__divergence="0.01 deg")["planes"]
    blur = FOCAL * math.radians(0.01)
    assert plane["width"] == pytest.approx([math.hypot(spot(4e-3), blur)] * 2, rel=5e-3)


def test_emitters_spread_as_their_lattice(light):
    """Variance of n equal points in equal parts of W: W^2 (1 - 1/n^2) / 12, plus the spot's."""
    (plane,) = light(beam__divergence="0.03 deg", beam__emitters=[3, 2])["planes"]
    full = FOCAL * math.radians(0.03)
    for width, count in zip(plane["width"], (3, 2), strict=True):
        variance = (spot(4e-3) / 4) ** 2 + full**2 * (1 - 1 / count**2) / 12
        assert width == pytest.approx(4 * math.sqrt(variance), rel=5e-3)


def test_a_tilt_moves_the_focus_and_a_decentre_does_not(light):
    """x = f sin(theta); the shift theorem leaves the irradiance where it is."""
    (plane,) = light(beam__tilt=["0.01 deg", "-0.02 deg"])["planes"]
    places = [FOCAL * math.sin(math.radians(a)) for a in (0.01, -0.02)]
    assert plane["centroid"] == pytest.approx(places, rel=1e-3)
    (plane,) = light(beam__decentre=["0.5 mm", "-1 mm"])["planes"]
    assert plane["centroid"] == pytest.approx([0, 0], abs=1e-8)


def test_a_converging_beam_comes_to_its_focus_on_a_screen(light):
    plane = {"kind": "screen", "distance": "2 m", "window": "2 mm", "samples": 201}
    small = {"element__size": "8 mm", "element__aperture": "8 mm", "element__pixels": 640}
    (found,) = light(beam__curvature="-2 m", beam__diameter="3 mm", plane=plane, **small)["planes"]
    assert found["method"] == "fresnel"
    assert found["width"] == pytest.approx([spot(3e-3, 2.0)] * 2, rel=5e-3)


def test_light_cut_by_the_aperture_is_told(light):
    """exp(-2 a^2 / D^2) of a Gaussian; the pixelled edge leaves a part in a thousand."""
    told = light(beam__diameter="6 mm", element__aperture="7 mm")
    assert told["cut_by_aperture"] == pytest.approx(math.exp(-2 * (7 / 6) ** 2), rel=5e-3)
    assert light(beam__profile="plane")["cut_by_aperture"] == pytest.approx(0, abs=2e-3)
    soft = light(beam__profile="super-gaussian", beam__order=6)
    assert soft["cut_by_aperture"] == pytest.approx(0, abs=1e-6)


def test_a_uniform_disc_has_the_rings_of_airy(light, tmp_path):
    """Dark rings at 1.2197 and 2.2331 lambda f / D, half maximum 1.0290 wide.

    Born and Wolf, Principles of Optics (from memory), digits recomputed; the disc is 128 pixels
    across, which leaves 1 % of a ring.
    """
    ring = LAMBDA_F / 4e-3
    light("--out", "out", beam__profile="plane", plane__window=f"{6 * ring * 1e6} um")
    with h5py.File("out/light.h5") as file:
        row = file["plane/irradiance"][100]
        x = file["plane/x"][:]
        assert file["plane/irradiance"].attrs["units"] == "1/m^2"
    dark = [i for i in range(101, 200) if row[i] < row[i - 1] and row[i] < row[i + 1]]
    np.testing.assert_allclose(x[dark[:2]] / ring, [1.21967, 2.23313], atol=0.035)
    half = np.interp(-0.5, -row[100:] / row[100], x[100:])
    assert 2 * half / ring == pytest.approx(1.02899, rel=5e-3)


def test_a_measured_profile_serves_as_the_formula_does(light):
    y = (np.arange(200) - 99.5) * 50e-6
    np.save("camera.npy", 7 * np.exp(-2 * (y[:, None] ** 2 + y**2) / 2e-3**2))
    beam = {"beam__profile": "file", "beam__file": "camera.npy", "beam__file_pixel": "50 um"}
    (plane,) = light(**beam)["planes"]
    assert plane["width"] == pytest.approx([spot(4e-3)] * 2, rel=3e-3)
    assert plane["power_in_window"] == pytest.approx(1, abs=2e-3)


def test_the_axis_behind_a_round_stop_is_four_times_as_bright_at_fresnel_number_1(light):
    """|1 - (z / R) exp(i k (R - z))|^2 is 4 there (Born and Wolf, from memory), 2 % for pixels."""
    radius, wave = 1e-3, WAVE
    distance = radius**2 / wave
    changes = {
        "beam": {"wavelength": "532 nm", "profile": "plane", "diameter": "2 mm"},
        "element__size": "4 mm",
        "element__pixels": 512,
        "plane": {"kind": "screen", "distance": f"{distance * 1e3} mm", "window": "3 mm"},
    }
    (plane,) = light(**changes)["planes"]
    assert plane["peak_irradiance"] * math.pi * radius**2 == pytest.approx(4, rel=0.02)


def test_angles_hold_the_power_and_the_width_of_the_far_field(light):
    plane = {"kind": "angles", "window_angle": "0.08 deg", "samples": 201}
    (found,) = light(plane=plane)["planes"]
    assert found["power_in_window"] == pytest.approx(1, abs=1e-4)
    assert found["width"] == pytest.approx([spot(4e-3) / FOCAL] * 2, rel=1e-3)


@pytest.mark.parametrize("mapping", ["f-sin", "f-tan", "f-theta"])
def test_each_lens_mapping_puts_a_tilted_beam_where_it_should(light, mapping):
    """12 degrees: f sin 41.58 mm, f tan 42.51 mm, f theta 41.89 mm; seen with fine pixels."""
    angle = math.radians(12)
    place = {"f-sin": math.sin(angle), "f-tan": math.tan(angle), "f-theta": angle}[mapping]
    changes = {
        "beam": {"wavelength": "532 nm", "diameter": "0.1 mm", "tilt": ["0 deg", "12 deg"]},
        "element": {
            "kind": "single",
            "size": "0.3 mm",
            "pixels": 1920,
            "levels": 0,
            "aperture": "0.3 mm",
        },
        "plane__window": ["8 mm", "88 mm"],
        "plane__mapping": mapping,
        "plane__samples": [101, 1201],
    }
    (plane,) = light(**changes)["planes"]
    assert plane["centroid"][1] == pytest.approx(FOCAL * place, rel=2e-3)


def test_a_wide_screen_agrees_with_the_direct_sum(light):
    """First Rayleigh-Sommerfeld kind, wavelet by wavelet, up to 25 degrees off the axis."""
    changes = {
        "beam": {"wavelength": "532 nm", "profile": "plane", "diameter": "16 um"},
        "element": {
            "kind": "single",
            "size": "16 um",
            "pixels": 32,
            "levels": 0,
            "aperture": "16 um",
        },
        "plane": {"kind": "screen", "distance": "40 mm", "window": "26 mm", "samples": 64},
    }
    told = light("--referee", "40", **changes)
    assert told["planes"][0]["method"] == "far field"
    assert told["referee"] < 1e-3


@pytest.mark.parametrize("distance", ["20 mm", "150 mm", "2000 mm"])
def test_random_phases_agree_with_the_direct_sum_at_every_distance(light, distance):
    """Each propagator in its range, on the hardest input; pixels of 8 wavelengths."""
    phase = np.random.default_rng(1).uniform(0, 2 * np.pi, (64, 64))
    np.save("mask.npy", phase)
    changes = {
        "beam": {"wavelength": "532 nm", "diameter": "200 um"},
        "element": {
            "kind": "single",
            "size": "272 um",
            "pixels": 64,
            "levels": 0,
            "aperture": "272 um",
        },
        "plane": {"kind": "screen", "distance": distance, "window": "250 um", "samples": 64},
    }
    told = light("mask.npy", "--referee", "30", **changes)
    assert told["referee"] < 1e-3, told["planes"][0]["method"]


def test_light_on_planes_is_kept_whole(light):
    light("--out", "out", plane__shifts=["-1 mm", "0 mm", "1 mm"])
    with h5py.File("out/light.h5") as file:
        assert sorted(file["planes"]) == ["0", "1", "2"]
        assert file["plane"].attrs["shift"] == 0
        assert file["plane"].attrs["signal"] == "irradiance"
        assert file["plane/y"].attrs["units"] == "m"
        assert file["planes/0"].attrs["shift"] == pytest.approx(-1e-3)
        assert file["plane/irradiance"].shape == (201, 201)
    from PIL import Image

    with Image.open("out/light.png") as picture:
        assert np.asarray(picture).std() > 10


BAD = {
    "no size": ({"element__size": None}, 3, "element.size"),
    "a period": ({"element__period": "1 mm"}, 3, "element.period"),
    "pixels not square": ({"element__size": ["12 mm", "11 mm"]}, 3, "element.size"),
    "spots": ({"target": {"kind": "grid", "shape": [3, 3]}}, 3, "target.kind"),
    "two sizes": ({"beam__fwhm": "2 mm"}, 3, "beam.diameter"),
    "beam beyond the aperture": ({"beam__diameter": "13 mm"}, 3, "beam.diameter"),
    "file without profile": ({"beam__file": "camera.npy"}, 3, "beam.file"),
    "no window": ({"plane__window": None}, 3, "plane.window"),
    "a distance behind a lens": ({"plane__distance": "1 m"}, 3, "plane.distance"),
    "window beyond the pixels": ({"plane__window": "4 mm"}, 3, "plane.window"),
    "emitters without angle": ({"beam__emitters": [2, 2]}, 3, "beam.emitters"),
    "shifted angles": (
        {"plane": {"kind": "angles", "window_angle": "0.1 deg", "shifts": ["1 mm"]}},
        3,
        "plane.shifts",
    ),
    "steep wavefront": ({"beam__curvature": "-100 mm"}, 3, "beam.curvature"),
    "steep tilt": ({"beam__tilt": ["0 deg", "5 deg"]}, 3, "beam.tilt"),
    "huge": ({"element__pixels": 200_000, "plane__window": "10 um"}, 7, "element.pixels"),
}


@pytest.mark.parametrize("name", BAD)
def test_what_cannot_be_is_refused_in_four_parts(name, monkeypatch, capsys):
    changes, status, key = BAD[name]
    path = job(**tables(**changes))
    found, _, err = call(monkeypatch, capsys, "evaluate", path)
    assert found == status
    assert key in err
    assert "; allowed: " in err
    assert "; try: " in err


@pytest.mark.parametrize(
    "values",
    [
        np.full((8, 8), np.nan),
        np.ones((1, 1)),
        np.zeros((8, 8)),
        np.ones((8, 8, 3)),
        np.ones((8, 8), complex),
    ],
    ids=["nan", "one pixel", "dark", "three axes", "complex"],
)
def test_a_file_that_is_no_profile_is_refused(values, monkeypatch, capsys):
    np.save("camera.npy", values)
    beam = {"beam__profile": "file", "beam__file": "camera.npy", "beam__file_pixel": "50 um"}
    status, _, err = call(monkeypatch, capsys, "evaluate", job(**tables(**beam)))
    assert status == 4
    assert "camera.npy" in err


def test_a_missing_profile_is_named(monkeypatch, capsys):
    beam = {"beam__profile": "file", "beam__file": "none.npy", "beam__file_pixel": "50 um"}
    status, _, err = call(monkeypatch, capsys, "evaluate", job(**tables(**beam)))
    assert status == 4
    assert "none.npy" in err


def test_a_unit_cell_refuses_what_it_cannot_see(monkeypatch, capsys):
    path = job(beam__tilt=["0 deg", "1 deg"])
    status, _, err = call(monkeypatch, capsys, "check", path)
    assert status == 3
    assert "beam.tilt" in err


def test_nothing_can_be_designed_without_a_target(monkeypatch, capsys):
    status, _, err = call(monkeypatch, capsys, "run", job(**tables()))
    assert status == 3
    assert "target.kind" in err


@pytest.mark.parametrize(("beta", "inside"), [(8, 0.9505), (32, 0.9851)])
def test_a_mapped_flat_top_holds_its_share_of_the_light(light, beta, inside):
    """Romero and Dickey, J. Opt. Soc. Am. A 13, 751 (1996) (from memory), digits by own sums.

    Phase beta (sqrt(pi)/2 xi erf(xi) + exp(-xi^2)/2 - 1/2), xi = sqrt(2) x / r0, on each axis; the
    share within the target is that of one axis, squared.
    """
    from scipy.special import erf

    radius, pixels, size = 1.5e-3, 1024, 9e-3
    half = beta * LAMBDA_F / (2 * math.sqrt(2 * math.pi) * radius)
    xi = math.sqrt(2) * (np.arange(pixels) - (pixels - 1) / 2) * size / pixels / radius
    line = beta * (math.sqrt(math.pi) / 2 * xi * erf(xi) + np.exp(-(xi**2)) / 2 - 0.5)
    np.save("mask.npy", line[:, None] + line)
    changes = {
        "beam__diameter": "3 mm",
        "element": {
            "kind": "single",
            "size": "9 mm",
            "pixels": pixels,
            "levels": 0,
            "aperture": "12.8 mm",
        },
        "plane__window": f"{2 * half * 1e6} um",
    }
    (plane,) = light("mask.npy", **changes)["planes"]
    assert plane["power_in_window"] == pytest.approx(inside**2, abs=0.006)


def test_a_phase_zone_plate_focuses_four_over_pi_squared_of_a_lens(light):
    """0 and pi in turn over whole zones: (2 / pi)^2 = .405285 of the lens's irradiance on the axis.

    Source: Goodman, Introduction to Fourier Optics (from memory); 16 zones, 2 % for pixels.
    """
    focal, pixels, size = 0.1, 640, 2.4e-3
    place = (np.arange(pixels) - (pixels - 1) / 2) * size / pixels
    square = place[:, None] ** 2 + place**2
    zones = square / (WAVE * focal)
    diameter = 2 * math.sqrt(16 * WAVE * focal)
    changes = {
        "beam": {"wavelength": "532 nm", "profile": "plane", "diameter": f"{diameter * 1e3} mm"},
        "element": {
            "kind": "single",
            "size": "2.4 mm",
            "pixels": pixels,
            "levels": 0,
            "aperture": "2.4 mm",
        },
        "plane": {"kind": "screen", "distance": "100 mm", "window": "100 um", "samples": 101},
    }
    np.save("lens.npy", -np.pi * square / (WAVE * focal))
    np.save("plate.npy", np.pi * (np.floor(zones) % 2))
    told = [light(name, **changes)["planes"][0] for name in ("lens.npy", "plate.npy")]
    lens, plate = (plane["peak_irradiance"] for plane in told)
    assert plate / lens == pytest.approx(4 / math.pi**2, rel=0.02)


def test_both_kinds_differ_far_off_the_axis_as_their_cosine(light):
    """Far away the first kind is cos(theta) times the second, in amplitude: Sommerfeld."""
    changes = {
        "beam": {"wavelength": "532 nm", "profile": "plane", "diameter": "4 um"},
        "element": {
            "kind": "single",
            "size": "4 um",
            "pixels": 16,
            "levels": 0,
            "aperture": "4 um",
        },
        "plane": {"kind": "screen", "distance": "10 mm", "window": "1 mm", "samples": 16},
    }
    told = light("--at", "10 mm, 0 mm, 4 mm", "--at", "10 mm, 0 mm, 0 mm", **changes)
    far, axis = told["points"]
    cosine = 10 / math.hypot(10, 4)
    assert far["first_kind"] / far["second_kind"] == pytest.approx(cosine**2, rel=1e-3)
    assert axis["first_kind"] == pytest.approx(axis["second_kind"], rel=1e-3)
    assert (far["z_m"], far["x_m"]) == pytest.approx((0.01, 0.004))


@pytest.mark.parametrize("text", ["10 mm, 0 mm", "10, 0, 0", "a, b, c", "10 mm; 0 mm; 0 mm"])
def test_a_point_that_is_none_is_refused(text, monkeypatch, capsys):
    status, _, err = call(monkeypatch, capsys, "evaluate", job(**tables()), "--at", text)
    assert status == 3
    assert "--at" in err


def test_a_point_in_the_element_itself_is_refused(monkeypatch, capsys):
    words = ["evaluate", job(**tables()), "--at", "0 mm, 0 mm, 0 mm"]
    status, _, err = call(monkeypatch, capsys, *words)
    assert status == 3
    assert "; try: " in err


def test_a_screen_that_no_propagator_reaches_is_refused_with_a_way_out(monkeypatch, capsys):
    """Too near for the far field, too steep for Fresnel, too far for the angular spectrum."""
    changes = {
        "beam": {"wavelength": "532 nm", "diameter": "4 mm"},
        "element__pixels": 9000,
        "element__size": "6 mm",
        "element__aperture": "6 mm",
        "plane": {"kind": "screen", "distance": "60 mm", "window": "40 mm"},
    }
    status, _, err = call(monkeypatch, capsys, "evaluate", job(**tables(**changes)))
    assert status in (3, 7)
    assert "; allowed: " in err
    assert "; try: " in err
