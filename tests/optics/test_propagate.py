"""Propagators against closed forms; the digits stand in the docstrings with their source.

Where a closed form belongs to the very steps that the pixels are, 1e-9 stands for the round-off
of float64; other tolerances are explained.
"""

import os
import subprocess
import sys
from pathlib import Path

import jax
import jax.numpy as jnp
import numpy as np
import pytest
from scipy.special import sici

import doe
from doe.errors import ConfigError
from doe.optics import propagate
from doe.optics.choice import (
    angular_spectrum_range,
    choose,
    far_field_range,
    fresnel_error,
    fresnel_number,
    fresnel_range,
)
from doe.optics.far_field import (
    addressed_power,
    centres,
    defocus_phase,
    far_field,
    far_field_grid,
    grid_directions,
)
from doe.optics.fft import fft2, ifft2
from doe.optics.propagate import fresnel_basis, fresnel_scaled

EXACT = 1e-9
HENE = 632.8e-9
AXIS = np.zeros(1)

# Compiled as a whole: operation by operation takes longer to compile than to run.
angular_spectrum = jax.jit(
    propagate.angular_spectrum,
    static_argnums=(1, 2, 3),
    static_argnames=("pad", "direction"),
)


@pytest.fixture(autouse=True)
def _in_float64():
    with jax.enable_x64(True):
        yield


def power(field) -> np.ndarray:
    return np.abs(np.asarray(field)) ** 2


def random_field(shape, seed=0):
    """Uniform amplitude and uniform random phase: light in every direction the pixels have."""
    return jnp.exp(2j * np.pi * np.random.default_rng(seed).random(shape))


def disc(pixels: int, radius: float, fine: int = 8):
    """A clear disc (radius in pixels) as the share of each pixel that it covers."""
    sub = (np.arange(pixels * fine) + 0.5) / fine - pixels / 2
    inside = sub[:, None] ** 2 + sub[None, :] ** 2 < radius**2
    return jnp.asarray(inside.reshape(pixels, fine, pixels, fine).mean(axis=(1, 3)) + 0j)


# --- the FFT door ------------------------------------------------------------------------------


@pytest.mark.parametrize("is_centred", [False, True])
def test_fft_is_the_plain_sum_and_its_inverse_undoes_it(is_centred):
    """Definition of the discrete Fourier transform, for an even and an odd side."""
    rows, columns = 6, 5
    field = random_field((rows, columns))
    start_y, start_x = (rows // 2, columns // 2) if is_centred else (0, 0)
    y, x = np.arange(rows) - start_y, np.arange(columns) - start_x
    wave_y = np.exp(-2j * np.pi * y[:, None] * y / rows)
    wave_x = np.exp(-2j * np.pi * x[:, None] * x / columns)
    out = fft2(field, is_centred=is_centred)
    np.testing.assert_allclose(out, wave_y @ np.asarray(field) @ wave_x.T, atol=EXACT)
    np.testing.assert_allclose(ifft2(out, is_centred=is_centred), field, atol=EXACT)
    assert power(out).sum() == pytest.approx(rows * columns * power(field).sum(), rel=EXACT)


# --- far field ---------------------------------------------------------------------------------


def slit(directions, pixels=40, pitch=2e-6):
    """Far field of a clear slit along x, one pixel high, as a share of the axis."""
    far = far_field(jnp.ones((1, pixels)) + 0j, pitch, HENE, AXIS, np.asarray(directions))
    return power(far[0]) / (pixels * pitch**2) ** 2


def test_slit_has_the_zeros_and_side_maxima_of_sinc_squared():
    """sin^2 u / u^2, Born and Wolf ch. 8 (from memory; digits verified): I at its maxima."""
    unit = HENE / (40 * 2e-6)
    np.testing.assert_allclose(slit(np.arange(1, 30) * unit), 0, atol=EXACT)
    maxima = slit(np.array([1.430297, 2.459024, 3.470890, 4.477409]) * unit)
    np.testing.assert_allclose(maxima, [0.0471904, 0.0164800, 0.0083403, 0.0050287], atol=1e-7)
    np.testing.assert_allclose(slit(np.array([0.885893 / 2]) * unit), 0.5, atol=1e-6)


def test_central_lobe_of_a_slit_holds_its_share_of_the_power():
    """0.902823 of the power lies between the first zeros (verified); densities are per s."""
    pitch, width = 2e-6, 40 * 2e-6
    s = (np.arange(4000) + 0.5) / 4000 * 2 * HENE / width - HENE / width
    far = far_field(jnp.ones((1, 40)) + 0j, pitch, HENE, AXIS, s)
    lobe = power(far).sum() * (s[1] - s[0]) / HENE  # the y integral of |T|^2 / wavelength: pitch
    assert lobe / pitch**2 / width == pytest.approx(0.902823, abs=1e-6)


@pytest.fixture(scope="module")
def airy():
    """Far field of a disc on x and over a window; x in units of wavelength f / D."""
    diameter = 240
    near = disc(256, diameter / 2)

    def intensity(y, x):
        unit = HENE / (diameter * 5e-6)
        far = far_field(near, 5e-6, HENE, np.asarray(y) * unit, np.asarray(x) * unit)
        return power(far) / power(near.sum() * 5e-6**2)

    return intensity


def test_disc_has_the_rings_and_widths_of_airy(airy):
    """Born and Wolf ch. 8 (from memory; digits verified). 1e-4: the covered share of edge pixels
    is counted in 64ths, and a staircase of 240 steps is not quite round."""
    dark = airy(AXIS, [1.219670, 2.233131, 3.238315, 4.241063])
    np.testing.assert_allclose(dark, 0, atol=1e-6)
    bright = airy(AXIS, [1.634719, 2.679292, 3.698710])[0]
    np.testing.assert_allclose(bright, [0.0174979, 0.0041580, 0.0016006], atol=1e-4)
    np.testing.assert_allclose(airy(AXIS, [1.028994 / 2])[0], 0.5, atol=1e-3)
    np.testing.assert_allclose(airy(AXIS, [0.822461])[0], np.exp(-2), atol=1e-3)


def test_disc_encircles_the_energy_of_airy(airy):
    """1 - J0^2 - J1^2 at the dark rings (Rayleigh; digits verified). 2e-3: pixels of the rim."""
    x = (np.arange(800) + 0.5) / 800 * 9 - 4.5
    share = airy(x, x) * (x[1] - x[0]) ** 2 * np.pi / 4  # |T|^2 over the area of the disc
    r = np.hypot(x[:, None], x)
    held = [share[r < ring].sum() for ring in (1.219670, 2.233131, 3.238315, 4.241063)]
    np.testing.assert_allclose(held, [0.837785, 0.909931, 0.937647, 0.952319], atol=1e-3)


def test_phase_that_rises_along_x_goes_to_positive_directions():
    """exp(+2 pi i m x / period) is order +m, at s_x = +m wavelength / period (conventions)."""
    near = jnp.exp(2j * np.pi * 3 * np.arange(32) / 32)[None, :] * jnp.ones((32, 1))
    far = power(far_field_grid(near, 2e-6, 1))
    assert np.unravel_index(far.argmax(), far.shape) == (16, 16 + 3)
    assert grid_directions(32, 2e-6, HENE, 1)[16 + 3] == pytest.approx(3 * HENE / (32 * 2e-6))


@pytest.mark.parametrize("oversampling", [1, 2, 3])
@pytest.mark.parametrize("shape", [(12, 12), (9, 16)])
def test_whole_addressed_field_is_the_far_field_on_its_grid(shape, oversampling):
    """Two methods for one integral, for even, odd and unequal sides."""
    near, pitch = random_field(shape), 3e-6
    grid = far_field_grid(near, pitch, oversampling)
    s_y, s_x = (grid_directions(n, pitch, HENE, oversampling) for n in shape)
    assert s_y[len(s_y) // 2] == s_x[len(s_x) // 2] == 0
    np.testing.assert_allclose(grid, far_field(near, pitch, HENE, s_y, s_x), atol=EXACT * pitch**2)


def test_addressed_power_and_replicas_make_up_the_whole():
    """Sum over all replicas is pitch^2 sum |near|^2 (Parseval). 101 zones an axis miss the tails
    of sinc^2, in the mean 2 / (pi^2 101) of the power an axis (derived)."""
    near, pitch, zones = random_field((8, 8)), 3e-6, 101
    s = (np.arange(zones * 16) - zones * 8) * HENE / (16 * pitch)
    far = power(far_field(near, pitch, HENE, s, s)) * ((s[1] - s[0]) / HENE) ** 2
    inside = np.abs(s + 1e-9) < HENE / (2 * pitch)
    assert far[np.ix_(inside, inside)].sum() == pytest.approx(
        addressed_power(far_field_grid(near, pitch), pitch).item(), rel=EXACT
    )
    tails = 2 * 2 / (np.pi**2 * zones)
    assert far.sum() / (pitch**2 * 64) == pytest.approx(1 - tails, abs=tails / 4)


def test_random_phases_leave_their_closed_form_share_in_the_addressed_field():
    """(2/pi (Si(pi) - 2/pi))^2 = 0.5986, the mean of sinc^2 over the band, per axis (derived).
    256 x 256 independent speckles spread it by about 0.003."""
    near = random_field((256, 256))
    share = addressed_power(far_field_grid(near, 1e-6), 1e-6) / (1e-12 * 256**2)
    assert share == pytest.approx((2 / np.pi * (sici(np.pi)[0] - 2 / np.pi)) ** 2, abs=0.01)


def test_speckle_of_random_phases_is_fully_developed():
    """Contrast 1 and a share e^-3 above three times the mean (Goodman, Speckle Phenomena in
    Optics; from memory). 1e4 independent speckles spread them by 0.01 and 0.002."""
    s = (np.arange(100) - 50) * HENE / (256 * 1e-6)
    far = power(far_field(random_field((256, 256)), 1e-6, HENE, s, s))
    envelope = np.sinc(s * 1e-6 / HENE) ** 2
    speckle = far / envelope[:, None] / envelope
    assert speckle.std() / speckle.mean() == pytest.approx(1, abs=0.03)
    assert (speckle > 3 * speckle.mean()).mean() == pytest.approx(np.exp(-3), abs=0.005)


def test_defocus_spreads_a_focused_gaussian_by_its_rayleigh_range():
    """On the axis 1 / (1 + (dz / z_R)^2), z_R = wavelength f^2 / (pi w^2) (Gaussian beams)."""
    focal, w, pitch = 0.2, 1e-3, 20e-6
    x = centres(400, pitch)
    near = jnp.exp(-(x[:, None] ** 2 + x**2) / w**2)
    rayleigh = HENE * focal**2 / (np.pi * w**2)
    peak = power(far_field(near + 0j, pitch, HENE, AXIS, AXIS)).item()
    for shift in (-2 * rayleigh, rayleigh):
        phase = defocus_phase(jnp.asarray(x), jnp.asarray(x), focal, shift, HENE)
        blurred = power(far_field(near * jnp.exp(1j * phase), pitch, HENE, AXIS, AXIS)).item()
        # 1e-4: the sine condition departs from the parabola by (w / f)^2 of the phase.
        assert blurred / peak == pytest.approx(1 / (1 + (shift / rayleigh) ** 2), rel=1e-4)


def test_defocus_in_front_of_a_lens_is_undone_by_its_own_distance():
    """Fresnel through a thin lens to f + dz agrees with defocus in size: a second route."""
    focal, shift, pitch = 0.5, 4e-3, 5e-6
    x = centres(256, pitch)
    square = x[:, None] ** 2 + x**2
    near = jnp.kron(random_field((16, 16)), jnp.ones((16, 16))) * np.exp(-square / 4e-4**2)
    lens = np.exp(-1j * np.pi * square / (HENE * focal))
    points = np.linspace(-4e-3, 4e-3, 41)
    seen = power(fresnel_scaled(near * lens, pitch, HENE, focal + shift, points, points))
    # The lens is at the element here, so the shift to take is that of f + dz by Newton's form.
    z = focal + shift
    phase = defocus_phase(jnp.asarray(x), jnp.asarray(x), focal, shift * focal / z, HENE)
    directions = points / z
    far = far_field(near * jnp.exp(1j * phase), pitch, HENE, directions, directions)
    expected = power(far) / (HENE * z) ** 2
    # 1e-3: the quadratic phase within a pixel, pi pitch^2 / (4 wavelength z), is left out by far.
    np.testing.assert_allclose(seen, expected, atol=1e-3 * expected.max())


# --- angular spectrum and Fresnel --------------------------------------------------------------


def gaussian_beam(x, waist, z):
    """Siegman, Lasers, ch. 17 (from memory), time dependence exp(-i omega t)."""
    rayleigh = np.pi * waist**2 / HENE
    q = z - 1j * rayleigh
    along = np.exp(2j * np.pi * (z / HENE % 1)) * (-1j * rayleigh) / q
    return along * np.exp(1j * np.pi / HENE * (x[:, None] ** 2 + x**2) / q)


@pytest.mark.parametrize("turns", [0.3, 1.0])
def test_gaussian_beam_keeps_its_closed_form(turns):
    """w(z), R(z) and Gouy phase at once. 1e-4: steps of a 64th of the waist take (p/w)^2 / 6."""
    pitch, pixels = 10e-6, 384
    waist = 64 * pitch
    x = centres(pixels, pitch)
    z = turns * np.pi * waist**2 / HENE
    near = jnp.asarray(gaussian_beam(x, waist, 0.0))
    got = angular_spectrum(near, pitch, HENE, z, direction=4 * HENE / (np.pi * waist))
    np.testing.assert_allclose(got, gaussian_beam(x, waist, z), atol=1e-4)
    points = x[::16]
    got = fresnel_scaled(near, pitch, HENE, z, points, points)
    np.testing.assert_allclose(got, gaussian_beam(points, waist, z), atol=1e-4)


@pytest.mark.parametrize("number", [3, 4])
def test_axis_behind_a_disc_by_the_angular_spectrum(number):
    """|1 - (z/R) exp(i k (R - z))|^2, R^2 = z^2 + a^2 (first Rayleigh-Sommerfeld integral on the
    axis, derived). 0.04 of 4: edge pixels hold the mean of the edge, sinc(N p / a) of its wave."""
    pitch, radius = 4e-6, 60
    a = radius * pitch
    z = a**2 / (number * HENE)
    slant = np.hypot(z, a)
    expected = abs(1 - z / slant * np.exp(2j * np.pi * (slant - z) / HENE)) ** 2
    got = power(angular_spectrum(disc(127, radius), pitch, HENE, z, pad=10))[63, 63]
    assert got == pytest.approx(expected, abs=0.04)


@pytest.mark.parametrize("number", [0.5, 1, 2, 3])
def test_axis_behind_a_disc_by_fresnel(number):
    """|1 - exp(i pi N)|^2: 2, 4, 0, 4 at Fresnel numbers 1/2, 1, 2, 3 (Born and Wolf ch. 8)."""
    pitch, radius = 10e-6, 60
    z = (radius * pitch) ** 2 / (number * HENE)
    got = power(fresnel_scaled(disc(127, radius), pitch, HENE, z, AXIS, AXIS)).item()
    assert got == pytest.approx(abs(1 - np.exp(1j * np.pi * number)) ** 2, abs=0.04)


def test_straight_edge_has_its_fringes():
    """0.25 at the edge; extrema by Cornu's spiral (Born and Wolf ch. 8; digits verified).
    2e-3: the far edge of the opening at v = 400 adds up to 0.45 / v."""
    pitch, pixels, z = 20e-6, 4096, 0.1265
    scale = np.sqrt(2 / (HENE * z))
    v = np.array([0, 1.21720, 1.87252, 2.34449, 2.73901, 3.08196])
    points = v / scale - pixels * pitch / 2
    basis_x = fresnel_basis(points, pixels, pitch, HENE, z)
    got = power(basis_x.sum(axis=1))  # a clear opening; along y the edge is endless
    expected = [0.25, 1.370443, 0.778251, 1.199271, 0.843162, 1.150881]
    np.testing.assert_allclose(got, expected, atol=2e-3)


@pytest.mark.parametrize(
    ("period", "exact", "paraxial"),
    [(50e-6, 7.901074e-3, 7.901391e-3), (4e-6, 50.2505e-6, 50.5689e-6)],
)
def test_grating_comes_back_at_the_exact_talbot_distance(period, exact, paraxial):
    """wavelength / (1 - sqrt(1 - (wavelength/period)^2)) for orders 0, +-1 (Rayleigh; digits
    verified). There the orders are in step again; 1e-5 rad: the digits printed."""
    x = np.arange(64) / 64
    near = jnp.asarray((1 + 0.5 * np.cos(2 * np.pi * x))[None, :] + 0j)

    def lag(z):
        orders = fft2(angular_spectrum(near, period / 64, HENE, z, pad=1))[0]
        return np.angle(orders[1] / orders[0]), np.angle(orders[-1] / orders[0])

    np.testing.assert_allclose(lag(exact), 0, atol=1e-5)
    np.testing.assert_allclose(np.abs(lag(exact / 2)), np.pi, atol=1e-5)
    late = 2 * np.pi * (paraxial - exact) / exact
    np.testing.assert_allclose(lag(paraxial), -late, atol=1e-5)


def test_grating_comes_back_at_the_paraxial_talbot_distance_of_fresnel():
    """2 period^2 / wavelength = 7.901391 mm for 50 um (Talbot; digits verified). A weak phase
    grating, since its intensity answers to the first power of a wrong distance."""
    period, z, per = 50e-6, 7.901391e-3, 8
    pixels = 400 * per
    x = centres(pixels, period / per)
    grating = 1 + 0.5j * np.cos(2 * np.pi * x / period)
    # A broad Gaussian, so that no edge wave of the opening reaches the middle.
    near = grating * np.exp(-((x / (100 * period)) ** 2))
    points = x[pixels // 2 - per : pixels // 2 + per]
    across = fresnel_basis(AXIS, 1, period / per, HENE, z)[0, 0]
    got = fresnel_scaled(jnp.asarray(near[None, :]), period / per, HENE, z, AXIS, points)
    np.testing.assert_allclose(power(got[0] / across), power(grating[: 2 * per]), atol=2e-3)


def test_evanescent_order_decays_by_its_closed_form():
    """exp(-k z sqrt((wavelength/period)^2 - 1)) below a period of one wavelength (definition)."""
    period, pixels = HENE / 2, 16
    wave = np.cos(2 * np.pi * (np.arange(pixels) + 0.5) / pixels)
    near = jnp.asarray(wave[None, :] * np.ones((4, 1)) + 0j)
    for z in (0.0, 0.1 * HENE, HENE):
        got = angular_spectrum(near, period / pixels, HENE, z, pad=1)
        decay = np.exp(-2 * np.pi * z / HENE * np.sqrt(3)) * np.sinc(1 / pixels)
        np.testing.assert_allclose(got, decay * near, atol=1e-12)


def rayleigh_sommerfeld(near, pitch, z, y, x, fine=8):
    """The first integral at one point, by the midpoint rule on fine x fine parts of each pixel."""
    n_y, n_x = near.shape
    field = np.kron(np.asarray(near), np.ones((fine, fine)))
    part = pitch / fine
    square = (y - centres(n_y * fine, part)[:, None]) ** 2 + (x - centres(n_x * fine, part)) ** 2
    r = np.sqrt(square + z**2)
    k = 2 * np.pi / HENE
    kernel = z / (2 * np.pi * r**2) * (1 / r - 1j * k) * np.exp(1j * k * r)
    return (field * kernel).sum() * part**2


def test_steep_light_of_half_wave_pixels_agrees_with_the_direct_sum():
    """Rayleigh-Sommerfeld, summed directly; no angle is small and nothing is a replica."""
    pitch, z = HENE / 2, 4 * HENE
    near = random_field((20, 24))
    got = np.asarray(angular_spectrum(near, pitch, HENE, z, pad=16))
    y, x = centres(20, pitch), centres(24, pitch)
    for j, i in [(0, 0), (7, 12), (10, 3), (19, 20)]:
        expected = rayleigh_sommerfeld(near, pitch, z, y[j], x[i])
        assert got[j, i] == pytest.approx(
            expected, abs=0.006
        )  # of a field of 1: grazing light lost


@pytest.mark.parametrize(
    ("block", "z", "gap"),
    [(4, 0.03, 1.5e-3), (8, 0.03, 1.5e-3)],
)
def test_angular_spectrum_and_fresnel_agree_where_both_hold(block, z, gap):
    """Two routes to one field, random phases in blocks; below 26 mm replicas meet the window.

    rms gap: Fresnel is off by up to 0.03 rad, the angular spectrum by the replicas left out.
    """
    pitch, wavelength = 10e-6, 0.5e-6
    steps = random_field((64 // block, 48 // block))
    near = jnp.kron(steps, jnp.ones((block, block)))
    y, x = centres(64, pitch), centres(48, pitch)
    spectrum = angular_spectrum(near, pitch, wavelength, z, pad=4)
    paraxial = fresnel_scaled(near, pitch, wavelength, z, y, x)
    assert np.sqrt(power(spectrum - paraxial).mean() / power(paraxial).mean()) < gap


def test_power_stays_the_same_on_the_way():
    """Parseval: a unit cell below the unit circle loses nothing but its replicas."""
    near, pitch = random_field((32, 40)), 2e-6
    start = power(angular_spectrum(near, pitch, HENE, 0.0, pad=1)).sum()
    later = power(angular_spectrum(near, pitch, HENE, 0.123, pad=1)).sum()
    assert later == pytest.approx(start, rel=EXACT)
    table = addressed_power(far_field_grid(near, pitch, 1), pitch).item()
    assert start * pitch**2 == pytest.approx(table, rel=EXACT)


# --- what holds for all ------------------------------------------------------------------------

POINTS = np.linspace(-40e-6, 55e-6, 7)
PROPAGATORS = {
    "far_field": lambda u: far_field(u, 4e-6, HENE, POINTS * 1e3, POINTS[:5] * 1e3),
    "far_field_grid": lambda u: far_field_grid(u, 4e-6, 3),
    "angular_spectrum": lambda u: angular_spectrum(u, 4e-6, HENE, 1e-4),
    "fresnel_scaled": lambda u: fresnel_scaled(u, 4e-6, HENE, 1e-4, POINTS, POINTS[:5]),
}


@pytest.mark.parametrize("name", PROPAGATORS)
def test_reverse_mode_is_the_adjoint(name):
    """sum(v A u) = sum((A^T v) u) for any u and v (definition of the transpose)."""
    run = PROPAGATORS[name]
    near = random_field((12, 15), seed=1)
    far, back = jax.vjp(run, near)
    ghost = random_field(far.shape, seed=2)
    (pulled,) = back(ghost)
    np.testing.assert_allclose((pulled * near).sum(), (ghost * far).sum(), rtol=EXACT)


@pytest.mark.parametrize("name", PROPAGATORS)
def test_single_precision_keeps_six_digits_under_jit(name):
    """Against float64 without jit; 3e-6 of the root mean square is a few roundings of 6e-8."""
    run = PROPAGATORS[name]
    near = random_field((12, 15))
    exact = np.asarray(run(near))
    got = jax.jit(run)(near.astype(jnp.complex64))
    assert got.dtype == jnp.complex64
    np.testing.assert_allclose(got, exact, atol=3e-6 * np.sqrt(power(exact).mean()) * 3)


def test_single_precision_holds_over_a_thousand_waves_of_sag():
    """k z s^2 / 2 is 6000 rad here, which float32 alone would lose to 4e-4 rad and more."""
    near, pitch = random_field((64, 64)), 2e-6
    exact = angular_spectrum(near, pitch, HENE, 0.05, pad=1)
    got = angular_spectrum(near.astype(jnp.complex64), pitch, HENE, 0.05, pad=1)
    np.testing.assert_allclose(got, exact, atol=2e-5)


def test_far_field_twice_as_fine_fits_into_four_fields_of_its_output():
    """The compiler's own account of argument, output and scratch, at 1024 x 1024."""
    with jax.enable_x64(False):
        near = jax.ShapeDtypeStruct((1024, 1024), jnp.complex64)
        use = jax.jit(lambda u: far_field_grid(u, 1e-6)).lower(near).compile().memory_analysis()
    total = use.argument_size_in_bytes + use.output_size_in_bytes + use.temp_size_in_bytes
    assert total <= 4 * 8 * 2048**2


PEAK = """
import resource, numpy as np, jax, jax.numpy as jnp
from doe.optics.far_field import far_field_grid
small = jax.jit(lambda u: far_field_grid(u, 1e-6))
small(jnp.ones((8, 8), jnp.complex64)).block_until_ready()
start = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
near = jnp.ones((4096, 4096), jnp.complex64)
far_field_grid(near, 1e-6).block_until_ready()
print((resource.getrusage(resource.RUSAGE_SELF).ru_maxrss - start) * 1024 / (8 * 8192**2))
"""


@pytest.mark.slow
def test_peak_memory_at_4096_is_below_six_fields_of_the_output():
    """Resident set of a fresh process; 8192 x 8192 complex64 is one field."""
    place = {**os.environ, "PYTHONPATH": str(Path(doe.__file__).parent.parent)}
    command = [sys.executable, "-c", PEAK]
    run = subprocess.run(command, env=place, capture_output=True, text=True, check=True)
    assert float(run.stdout) < 6


# --- ranges, refusals and the choice -----------------------------------------------------------


def test_ranges_have_their_closed_forms():
    """Definitions, worked by hand: 1000 pixels of 10 um at 0.5 um, s = 0.025."""
    args = (1000, 1000), 10e-6, 0.5e-6
    sideways = 0.025 / np.sqrt(1 - 2 * 0.025**2)
    assert angular_spectrum_range(*args).longest == pytest.approx(10e-3 / sideways)
    assert angular_spectrum_range(*args, pad=4).longest == pytest.approx(20e-3 / sideways)
    assert angular_spectrum_range(*args, direction=0.0025).longest == pytest.approx(4, rel=1e-4)
    assert far_field_range(*args).shortest == pytest.approx(2 * 2 * 10e-3**2 / 0.5e-6)
    assert fresnel_number(*args, 0.5) == pytest.approx(100)


def test_fresnel_range_ends_where_its_error_is_an_eighth_of_pi():
    """k r^4 / (8 z^3) for flat rays, k z s^4 / 8 within the addressed field (Goodman ch. 4)."""
    reach, pitch, wavelength = 2e-3, 1e-6, 0.5e-6
    far = fresnel_range(reach, pitch, wavelength, 1.0)
    k = 2 * np.pi / wavelength
    assert k * reach**4 / (8 * far.shortest**3) == pytest.approx(np.pi / 8)
    near = fresnel_range(reach, pitch, wavelength, 1e-6)
    assert k * near.longest * (2**0.5 * 0.25) ** 4 / 8 == pytest.approx(np.pi / 8)
    assert fresnel_error(reach, pitch, wavelength, near.longest * 1.01) > np.pi / 8
    assert fresnel_range(1e-4, 1e-4, wavelength, 1.0) == (0.0, np.inf)


@pytest.mark.parametrize(
    ("call", "words"),
    [
        (lambda u: angular_spectrum(u, 4e-6, HENE, 1.0), "cuts into the signal"),
        (lambda u: angular_spectrum(u, 4e-6, HENE, -1e-5), "evanescent"),
        (lambda u: angular_spectrum(u, 4e-6, HENE, 1e-5, pad=0), "unit cell"),
        (lambda u: fresnel_scaled(u, 1e-6, HENE, 1e-3, AXIS, AXIS + 1e-3), "is off by up to"),
        (lambda u: fresnel_scaled(u, 1e-6, HENE, 0.0, AXIS, AXIS), "above 0"),
    ],
)
def test_false_results_are_refused_with_a_way_out(call, words):
    with pytest.raises(ConfigError, match=words) as caught:
        call(random_field((16, 16)))
    fault = caught.value.faults[0]
    assert fault.allowed
    assert fault.fix


@pytest.mark.parametrize(
    ("distance", "window", "propagator"),
    [
        (0.1, 5e-3, "angular-spectrum"),  # all rays end within the padded width
        (1.0, 5e-3, "fresnel"),  # too far for it, and flat
        (0.1, 20e-3, "fresnel"),  # a window wider than the element
        (900.0, 1.0, "far-field"),
    ],
)
def test_choice_names_a_propagator_whose_range_holds_the_distance(distance, window, propagator):
    """1000 pixels of 10 um at 0.5 um: rays to 0.4 m, far field from 800 m."""
    made = choose((1000, 1000), 10e-6, 0.5e-6, distance, (window, window))
    assert made.propagator == propagator
    assert made.shortest <= distance <= made.longest
    assert made.fresnel_number == pytest.approx(50 / distance)
    assert made.why


def test_steep_light_at_middle_distance_takes_a_larger_grid_or_is_refused():
    """1 um pixels: too steep for Fresnel from 0.03 to 15 mm."""
    made = choose((500, 500), 1e-6, 0.5e-6, 4e-3, (0.6e-3, 0.5e-3))
    assert (made.propagator, made.grid) == ("angular-spectrum", (600, 500))
    assert made.pad > 2
    assert made.shortest <= 4e-3 <= made.longest
    with pytest.raises(ConfigError, match="too steep for Fresnel"):
        choose((4000, 4000), 1e-6, 0.5e-6, 50e-3, (4e-3, 4e-3))
