"""The direct sum against closed forms; lengths are in wavelengths where nothing else is said."""

import math
import tracemalloc
from functools import cache

import numpy as np
import pytest
from scipy.special import erfc, fresnel, hankel1

from doe.direct_sum import cylindrical_sum, nodes_per_side, rayleigh_sommerfeld, terms
from doe.direct_sum.nodes import MOST_NODES
from doe.errors import ConfigError

K = 2 * np.pi


def line(count: int, pitch: float):
    """Centres of the pixels of one axis."""
    return (np.arange(count) + 0.5 - count / 2) * pitch


def places(*coordinates):
    """Points from z and the lateral coordinates, scalars being repeated."""
    columns = np.broadcast_arrays(*(np.atleast_1d(np.asarray(c, float)) for c in coordinates))
    return np.column_stack(columns)


def taper(distance, start: float, end: float):
    """1 up to start, 0 from end, with two continuous derivatives: no edge wave of its own."""
    s = np.clip((distance - start) / (end - start), 0, 1)
    return 1 - s**3 * (10 - 15 * s + 6 * s**2)


def disc(count: int, pitch: float, radius: float):
    """Share of each pixel inside a circle, from 8 x 8 samples a pixel."""
    fine = line(8 * count, pitch / 8)
    inside = fine[:, None] ** 2 + fine**2 < radius**2
    return inside.reshape(count, 8, count, 8).mean(axis=(1, 3))


# Circles


A, STEP = 10.0, 1 / 16  # radius of the circles, and the pitch of the pixels they are drawn in


@pytest.fixture(scope="module")
def aperture():
    """A circular opening in pixels, heights on its axis, and the slanted ray R to the rim."""
    z = np.array([10.0, 18.5, 30.0, 50.0, 67.0, 100.0, 200.0, 400.0])
    return disc(328, STEP, A).astype(complex), z, np.hypot(z, A)


def stairs(far):
    """What pixels leave of the wave from a round rim, to second order in the pitch.

    Giving each pixel its share of the circle, and making it a square of even light, are two
    box averages; at an angle of sine s each takes a sinc (p s_x) sinc (p s_y) off the rim's wave,
    which is 1 - (pi p s)^2 / 6 whatever way it looks. Here 0.6 % at most.
    """
    return 1 - (np.pi * STEP * A / far) ** 2 / 3


@pytest.mark.parametrize("kind", [1, 2])
def test_axis_of_a_circular_aperture_is_the_closed_form(aperture, kind):
    """u = exp(ikz) - (z/R) exp(ikR), R^2 = z^2 + a^2, for kind 1, without z/R for kind 2.

    (definition: on the axis the integral can be done along r.) The tolerance of 1 %, in the
    amplitude of the rim's wave and in the peak intensity 4, is for the stairs; with their closed
    form 1e-3 remains: the fourth order (pi p s)^4 / 20, and the 8 x 8 samples of a pixel.
    """
    field, z, far = aperture
    points = places(z, 0, 0)
    got = rayleigh_sommerfeld(field, (STEP, STEP), points, 1.0, kind=kind, tolerance=1e-5)
    rim = np.exp(1j * K * far) * (z / far if kind == 1 else 1)
    plain = np.exp(1j * K * z)
    np.testing.assert_allclose(got, plain - rim, rtol=0, atol=0.01)
    np.testing.assert_allclose(np.abs(got) ** 2, np.abs(plain - rim) ** 2, rtol=0, atol=0.04)
    np.testing.assert_allclose(got, plain - stairs(far) * rim, rtol=0, atol=1e-3)
    # Fresnel number a^2 / z = 1: the last maximum, four times the intensity without a screen.
    assert np.abs(got[z == 100.0]) ** 2 == pytest.approx(4, rel=0.01)


def test_spot_of_arago_behind_a_disc():
    """I / I0 = z^2 / (z^2 + a^2) (kind 1, closed form), within 1 % for the stairs.

    The beam is flat to radius 12 and fades out over ten fringes of exp(ikr) or more, so that its
    own rim sends nothing to the axis; 2e-3 is left once the stairs are allowed for.
    """
    x = line(928, STEP)
    beam = taper(np.hypot(x[:, None], x), 12.0, 29.0)
    field = beam * (1 - np.pad(disc(328, STEP, A), 300))
    z = np.array([15.0, 20.0, 25.0])
    far = np.hypot(z, A)
    got = rayleigh_sommerfeld(
        field.astype(complex), (STEP, STEP), places(z, 0, 0), 1.0, tolerance=1e-4
    )
    np.testing.assert_allclose(np.abs(got) ** 2, (z / far) ** 2, rtol=0.01)
    np.testing.assert_allclose(np.abs(got), z / far * stairs(far), rtol=2e-3)


# Gaussian beams


@pytest.mark.parametrize("axes", [1, 2])
@pytest.mark.parametrize("kind", [1, 2])
def test_gaussian_beam_spreads_by_the_paraxial_laws(axes, kind):
    """w^2 = w0^2 (1 + (z/zR)^2), axis intensity (w0/w)^axes, Gouy phase axes/2 arctan(z/zR),
    wavefront k x^2 / (2R) (Kogelnik and Li 1966, from memory).

    With w0 = 10 the paraxial laws are off by about 1 / (k w0)^2 = 2.5e-4 and pixels of 1/2 widen
    the waist by p^2 / (12 w0^2) = 2e-4; 3e-3 covers the sum at two widths and distances.
    """
    waist, pitch = 10.0, 0.5
    rayleigh = np.pi * waist**2
    zeta = np.array([0.5, 1.0, 2.0])
    z, width = zeta * rayleigh, waist * np.sqrt(1 + zeta**2)
    profile = np.exp(-((line(160, pitch) / waist) ** 2)).astype(complex)
    if axes == 1:
        on_axis = cylindrical_sum(profile, pitch, places(z, 0), 1.0, kind=kind)
        beside = cylindrical_sum(profile, pitch, places(z, width), 1.0, kind=kind)
    else:
        field, pair = np.outer(profile, profile), (pitch, pitch)
        on_axis = rayleigh_sommerfeld(field, pair, places(z, 0, 0), 1.0, kind=kind)
        beside = rayleigh_sommerfeld(
            field, pair, places(z, -0.6 * width, 0.8 * width), 1.0, kind=kind
        )
    plain = (waist / width) ** axes
    np.testing.assert_allclose(np.abs(on_axis) ** 2, plain, rtol=3e-3)
    np.testing.assert_allclose(np.abs(beside) ** 2 / plain, math.exp(-2), rtol=3e-3)
    gouy = np.exp(1j * (K * z - axes / 2 * np.arctan(zeta)))
    np.testing.assert_allclose(on_axis / gouy, np.abs(on_axis), atol=3e-3)
    front = np.exp(1j * K * width**2 / (2 * z * (1 + 1 / zeta**2)))
    np.testing.assert_allclose(beside / gouy / front, np.abs(beside), atol=3e-3)


@pytest.mark.parametrize("axes", [1, 2])
def test_power_of_a_beam_without_evanescent_part_is_kept(axes):
    """int |u|^2 over a plane is that of the element: Parseval, exp(i k z s_z) having modulus 1.

    The midpoint rule on a smooth beam that ends within the screen is exact to round-off; the
    stairs of pixel p send 1 - sinc^2 = (pi p s)^2 / 3 < 1e-3 into orders that do not propagate.
    """
    waist, pitch, z = 3.0, 0.2, 12.0
    profile = np.exp(-((line(100, pitch) / waist) ** 2)).astype(complex)
    if axes == 1:
        screen = line(160, 0.25)
        got = cylindrical_sum(profile, pitch, places(z, screen), 1.0)
        sent = np.sum(np.abs(profile) ** 2) * pitch
        assert np.sum(np.abs(got) ** 2) * 0.25 == pytest.approx(sent, rel=1e-3)
        return
    # A coarse element suffices in three dimensions, since 1 / (pi w0) limits the spectrum.
    profile, pitch = np.exp(-((line(40, 0.4) / waist) ** 2)).astype(complex), 0.4
    screen = line(26, 0.8)
    points = places(z, np.repeat(screen, 26), np.tile(screen, 26))
    field = np.outer(profile, profile)
    got = rayleigh_sommerfeld(field, (pitch, pitch), points, 1.0, tolerance=1e-3)
    sent = np.sum(np.abs(field) ** 2) * pitch**2
    assert np.sum(np.abs(got) ** 2) * 0.8**2 == pytest.approx(sent, rel=5e-3)


def test_flux_of_the_second_kind_is_the_same_through_two_planes():
    """Im(u* du/dz) / k = Re(u2* u1) is the scalar flux, and free space keeps it (Green)."""
    profile = np.exp(-((line(100, 0.2) / 3.0) ** 2)).astype(complex)
    flux = []
    for z in (6.0, 18.0):
        points = places(z, line(200, 0.25))
        first, second = (cylindrical_sum(profile, 0.2, points, 1.0, kind=i) for i in (1, 2))
        flux.append(np.sum((first * second.conj()).real) * 0.25)
    assert flux[1] == pytest.approx(flux[0], rel=1e-5)


# Edges and slits


@pytest.fixture(scope="module")
def edge():
    """A line open for x > 0, fading out where it is of no account; pixels of 1/4."""
    pitch, half = 0.25, 1200.0
    x = line(int(2 * half / pitch), pitch)
    return np.where(x > 0, taper(x, 250.0, half), 0).astype(complex), pitch


# v = x sqrt(2 / z) of the extrema and intensity (Born and Wolf ch. 8, digits recomputed).
FRINGES = [
    (1.21720, 1.370443),
    (1.87252, 0.778251),
    (2.34449, 1.199271),
    (2.73901, 0.843162),
    (3.08196, 1.150881),
]


def test_straight_edge_has_a_quarter_at_the_edge_and_the_tabulated_extrema(edge):
    """z = 1000: k x^4 / (8 z^3) < 0.02 rad off the paraxial phase moves a fringe by 1e-3 of v.

    That is of second order in an extremum: 1e-3 of intensity is ample, and 1e-4 at the edge.
    """
    field, pitch = edge
    z = 1000.0
    v, want = np.array(FRINGES).T
    spread = np.array([-0.06, 0.0, 0.06])
    x = np.concatenate([[0.0], (v[:, None] + spread).ravel() * math.sqrt(z / 2)])
    got = np.abs(cylindrical_sum(field, pitch, places(z, x), 1.0, tolerance=1e-4)) ** 2
    assert got[0] == pytest.approx(0.25, abs=1e-4)
    left, middle, right = got[1:].reshape(-1, 3).T
    np.testing.assert_allclose(middle, want, rtol=0, atol=1e-3)
    # Maxima and minima take turns, and the middle one of each three is the extreme.
    sign = np.array([1, -1, 1, -1, 1])
    assert np.all(sign * (middle - left) > 0)
    assert np.all(sign * (middle - right) > 0)


def test_straight_edge_follows_the_fresnel_integrals(edge):
    """u exp(-ikz) = (1 + i)^-1 ((C + iS)(v) + (1 + i)/2) (Goodman ch. 4, from memory)."""
    field, pitch = edge
    z, v = 1000.0, np.linspace(-2, 3, 21)
    points = places(z, v * math.sqrt(z / 2))
    got = cylindrical_sum(field, pitch, points, 1.0, tolerance=1e-4)
    sine, cosine = fresnel(v)
    want = (cosine + 1j * sine + (1 + 1j) / 2) / (1 + 1j)
    np.testing.assert_allclose(got * np.exp(-1j * K * z), want, atol=0.01)


# z, E parallel to the edge, H parallel (Sommerfeld's half-plane, Born and Wolf ch. 11).
POLARISED = [
    (0.5, 0.178163, 0.346494),
    (1, 0.198079, 0.314491),
    (2, 0.212631, 0.293689),
    (5, 0.225906, 0.276626),
    (10, 0.232769, 0.268497),
    (100, 0.244434, 0.255693),
]

# The same at z = 10 and x = 3, 2, 1 in the light, 1, 2, 3 in the shadow.
BESIDE = [
    (1.39191, 1.17406, 0.58553, 0.09047, 0.03857, 0.01870),
    (1.28456, 1.10861, 0.60212, 0.11994, 0.06000, 0.03459),
]


def sommerfeld(z, x):
    """Exact intensities (E, H parallel to the edge) of a plane wave at a half-plane in x < 0.

    G(psi) = exp(-i k r cos psi) erfc(-exp(-i pi/4) sqrt(2 k r) cos(psi / 2)) / 2, and
    u = G(phi - phi0) -/+ G(phi + phi0), phi from the plate on the side of the lamp
    (Born and Wolf ch. 11, from memory).
    """
    r = np.hypot(z, x)
    phi = np.pi + np.arctan2(z, x)

    def wave(psi):
        root = np.exp(-0.25j * np.pi) * np.sqrt(2 * K * r) * np.cos(psi / 2)
        return np.exp(-1j * K * r * np.cos(psi)) * 0.5 * erfc(-root)

    direct, mirrored = wave(phi - np.pi / 2), wave(phi + np.pi / 2)
    return np.abs(direct - mirrored) ** 2, np.abs(direct + mirrored) ** 2


@pytest.mark.parametrize("kind", [1, 2])
def test_scalar_edge_lies_between_the_two_polarisations_of_the_half_plane(edge, kind):
    """By symmetry half the plane wave is left right behind the edge at every z: 0.25 exactly.

    1e-6, the tolerance of the sum, is far more than is left of the far end of the strip, which
    fades out over hundreds of fringes.
    """
    field, pitch = edge
    z, electric, magnetic = np.array(POLARISED).T
    exact = sommerfeld(z, np.zeros_like(z))
    np.testing.assert_allclose(exact, [electric, magnetic], atol=2e-6)
    got = np.abs(cylindrical_sum(field, pitch, places(z, 0), 1.0, kind=kind)) ** 2
    np.testing.assert_allclose(got, 0.25, rtol=0, atol=1e-6)
    assert np.all((electric < got) & (got < magnetic))
    # Three wavelengths into the light and into the shadow, at z = 10.
    x = np.array([3.0, 2.0, 1.0, -1.0, -2.0, -3.0])
    exact = np.array(sommerfeld(10.0, x))
    np.testing.assert_allclose(exact, BESIDE, atol=6e-6)
    got = np.abs(cylindrical_sum(field, pitch, places(10.0, x), 1.0, kind=kind)) ** 2
    assert np.all((exact.min(axis=0) < got) & (got < exact.max(axis=0)))


# u / pi of the side maxima of sin^2 u / u^2 (elementary: tan u = u).
SIDE_MAXIMA = [
    (1.430297, 0.0471904),
    (2.459024, 0.0164800),
    (3.470890, 0.0083403),
    (4.477409, 0.0050287),
]


@pytest.mark.parametrize("axes", [1, 2])
@pytest.mark.parametrize("pixels", [2, 160])
def test_far_slit_has_the_side_maxima_of_sinc_squared(axes, pixels):
    """I / I(0) = (z/r)^2 sinc^2(a s) for kind 1 at a fixed r = 1e5, a = 20; kind 2 without z/r.

    (a/2)^2 / r = 1e-3 turns of phase across the slit are left: 1e-5 relative, table 1e-4. Two
    pixels ten wavelengths wide do as well as many, as the sum integrates each of them.
    """
    width, r = 20.0, 1e5
    u, want = np.array([(0.0, 1.0), *SIDE_MAXIMA]).T
    s = u / width
    z = r * np.sqrt(1 - s**2)
    pitch = width / pixels
    for kind, slope in ((1, z / r), (2, 1.0)):
        if axes == 1:
            slit = np.ones(pixels, complex)
            got = cylindrical_sum(slit, pitch, places(z, r * s), 1.0, kind=kind)
        else:
            slit = np.ones((3, pixels), complex)
            points = places(z, 0, r * s)
            got = rayleigh_sommerfeld(slit, (0.3, pitch), points, 1.0, kind=kind)
        intensity = np.abs(got / got[0] / slope) ** 2
        np.testing.assert_allclose(intensity, want, rtol=1e-4)


def test_long_strip_in_space_is_the_slit_in_the_plane():
    """Cylindrical waves are spherical ones summed along a line: amplitude and phase alike.

    The strip is even over 20 and fades out over 100 wavelengths of its length, tens of fringes;
    1e-3 is for that end.
    """
    z, x, pitch = 15.0, np.array([-4.0, 0.0, 1.5, 3.0, 7.0]), 0.25
    slit = np.exp(1j * np.linspace(0, 3, 16)) * np.linspace(0.5, 1, 16)
    along = taper(np.abs(line(800, pitch)), 10.0, 100.0)
    for kind in (1, 2):
        flat = cylindrical_sum(slit, pitch, places(z, x), 1.0, kind=kind)
        long = rayleigh_sommerfeld(
            np.outer(along, slit), (pitch, pitch), places(z, 0, x), 1.0, kind=kind, tolerance=1e-5
        )
        np.testing.assert_allclose(long, flat, atol=1e-3 * np.abs(flat).max())


# Laws of the wavelets themselves


@pytest.fixture
def scene():
    """A random oblong field and points all over the half-space."""
    random = np.random.default_rng(7)
    field = random.normal(size=(5, 8)) + 1j * random.normal(size=(5, 8))
    points = np.column_stack([random.uniform(1, 9, 12), random.uniform(-9, 9, (12, 2))])
    return field, (0.5, 0.3), points


def test_second_kind_has_i_k_times_the_first_as_its_slope(scene):
    """du2/dz = i k u1 (definition); central difference of step 1e-3, (k h)^2 / 6 = 7e-6 off."""
    field, pitch, points = scene
    step = np.array([1e-3, 0, 0])
    after, before = (
        rayleigh_sommerfeld(field, pitch, points + side * step, 1.0, kind=2, tolerance=1e-9)
        for side in (1, -1)
    )
    first = rayleigh_sommerfeld(field, pitch, points, 1.0, tolerance=1e-9)
    np.testing.assert_allclose((after - before) / 2e-3, 1j * K * first, rtol=0, atol=1e-3)
    flat = field[0]
    after, before = (
        cylindrical_sum(flat, 0.3, points[:, ::2] + side * step[:2], 1.0, kind=2, tolerance=1e-9)
        for side in (1, -1)
    )
    first = cylindrical_sum(flat, 0.3, points[:, ::2], 1.0, tolerance=1e-9)
    np.testing.assert_allclose((after - before) / 2e-3, 1j * K * first, rtol=0, atol=1e-3)


@pytest.mark.parametrize("kind", [1, 2])
@pytest.mark.parametrize("axes", [1, 2])
def test_the_field_obeys_the_wave_equation(scene, kind, axes):
    """Laplacian u = -k^2 u, by second differences of step h = 0.01, off by (k h)^2 / 12 = 4e-4."""
    field, pitch, points = scene
    if axes == 1:
        field, pitch, points = field[0], pitch[1], points[:, ::2]
    add = cylindrical_sum if axes == 1 else rayleigh_sommerfeld
    step = 0.01

    def shifted(axis, side):
        moved = points.copy()
        moved[:, axis] += side * step
        return add(field, pitch, moved, 1.0, kind=kind, tolerance=1e-10)

    middle = shifted(0, 0)
    bend = sum(shifted(a, 1) + shifted(a, -1) - 2 * middle for a in range(axes + 1)) / step**2
    np.testing.assert_allclose(bend, -(K**2) * middle, rtol=0, atol=1e-3 * K**2 * abs(middle).max())


def test_the_two_kinds_differ_by_the_slope_of_the_ray():
    """u1 / u2 = (z/r) (1 + i / (kr)) for a small pixel, so equal far away on the axis."""
    z, x = np.array([1e3, 1e3, 1e3, 2.0]), np.array([0.0, 500.0, 2000.0, 1.0])
    r = np.hypot(z, x)
    dot = np.ones((1, 1), complex)
    first, second = (
        rayleigh_sommerfeld(dot, (1e-4, 1e-4), places(z, 0, x), 1.0, kind=i) for i in (1, 2)
    )
    np.testing.assert_allclose(first / second, z / r * (1 + 1j / (K * r)), rtol=1e-6)
    assert first[0] / second[0] == pytest.approx(1, abs=2e-4)
    # In the plane: H1 / H0 tends to -i, and -i (i k / 2) is the factor k / 2 of the second kind.
    flat = [cylindrical_sum(dot[0], 1e-4, places(z, x), 1.0, kind=i) for i in (1, 2)]
    np.testing.assert_allclose(flat[0][:3] / flat[1][:3], (z / r)[:3], atol=2e-4)


def test_a_mirrored_field_gives_the_mirrored_picture(scene):
    """Flips, a turn of the axes and a change of all lengths (definition); exact to round-off."""
    field, pitch, points = scene
    plain = rayleigh_sommerfeld(field, pitch, points, 1.0)
    for flip, sign in (((0,), [1, -1, 1]), ((1,), [1, 1, -1])):
        got = rayleigh_sommerfeld(np.flip(field, flip), pitch, points * sign, 1.0)
        np.testing.assert_allclose(got, plain, rtol=1e-11)
    turned = rayleigh_sommerfeld(field.T, pitch[::-1], points[:, [0, 2, 1]], 1.0)
    np.testing.assert_allclose(turned, plain, rtol=1e-11)
    small = (pitch[0] * 1e-6, pitch[1] * 1e-6)
    np.testing.assert_allclose(
        rayleigh_sommerfeld(field, small, points * 1e-6, 1e-6), plain, rtol=1e-10
    )
    flat = cylindrical_sum(field[0], 0.3, points[:, ::2], 1.0)
    small_flat = cylindrical_sum(field[0, ::-1], 0.3e-6, points[:, ::2] * [1e-6, -1e-6], 1e-6)
    np.testing.assert_allclose(small_flat, flat, rtol=1e-10)


def test_lamp_and_eye_may_change_places(scene):
    """Reciprocity: the table of pixel to pixel centre of a second plane is symmetric."""
    field, pitch, _ = scene
    y, x = line(5, pitch[0]), line(8, pitch[1])
    points = places(2.0, np.repeat(y, 8), np.tile(x, 5))
    table = []
    for index in range(40):
        dot = np.zeros(40, complex)
        dot[index] = 1
        table.append(rayleigh_sommerfeld(dot.reshape(5, 8), pitch, points, 1.0))
    np.testing.assert_allclose(table, np.transpose(table), rtol=1e-11)
    # Superposition, with the dark pixels left out above.
    whole = rayleigh_sommerfeld(field, pitch, points, 1.0)
    np.testing.assert_allclose(field.ravel() @ np.array(table), whole, rtol=0, atol=1e-11)


# Integration of the pixels, and its price


gauss = cache(np.polynomial.legendre.leggauss)


def by_hand(side, point, count: int):
    """First kind over one pixel at the origin, and the integral of its modulus, by count nodes."""
    node, weight = gauss(count)
    y, x = node[:, None] * side[0] / 2 - point[1], node * side[1] / 2 - point[2]
    r = np.sqrt(point[0] ** 2 + y**2 + x**2)
    wavelet = point[0] / r * (1 / r - 1j * K) * np.exp(1j * K * r) / r / (2 * np.pi)
    area = np.outer(weight, weight) * side[0] * side[1] / 4
    return np.sum(wavelet * area), np.sum(np.abs(wavelet) * area)


@pytest.mark.parametrize("tolerance", [1e-3, 1e-6, 1e-9])
def test_pixels_are_integrated_within_the_tolerance_and_without_waste(tolerance):
    """120 nodes a side are the referee; the nodes chosen are few above those that would do."""
    random = np.random.default_rng(3)
    spare = []
    for _ in range(40):
        side = 10.0 ** random.uniform(-1, 0.7, 2)
        z = side.max() * 10.0 ** random.uniform(-0.3, 1.5)
        point = np.array([z, *(z * random.normal(size=2))])
        want, modulus = by_hand(side, point, 120)
        pixel = np.ones((1, 1), complex)
        pitch = (float(side[0]), float(side[1]))
        got = rayleigh_sommerfeld(pixel, pitch, point[None], 1.0, tolerance=tolerance)[0]
        assert abs(got - want) <= tolerance * modulus
        chosen = nodes_per_side((1, 1), pitch, point[None], 1.0, tolerance=tolerance).max()
        fewest = next(
            n for n in range(1, 65) if abs(by_hand(side, point, n)[0] - want) <= tolerance * modulus
        )
        spare.append(chosen - fewest)
    assert np.median(spare) <= 3


@pytest.mark.parametrize("kind", [1, 2])
def test_lines_are_integrated_within_the_tolerance(kind):
    """In the plane the referee is 120 nodes a pixel with the complex Hankel function itself."""
    random = np.random.default_rng(5)
    node, weight = gauss(120)
    for _ in range(60):
        side = float(10.0 ** random.uniform(-1.5, 0.7))
        z = side * 10.0 ** random.uniform(-0.3, 1.5)
        x = z * random.normal()
        r = np.hypot(z, node * side / 2 - x)
        wavelet = 0.5j * K * z / r * hankel1(1, K * r) if kind == 1 else K / 2 * hankel1(0, K * r)
        want, modulus = weight @ wavelet * side / 2, weight @ np.abs(wavelet) * side / 2
        for tolerance in (1e-3, 1e-6, 1e-9):
            got = cylindrical_sum(
                np.ones(1, complex), side, places(z, x), 1.0, kind=kind, tolerance=tolerance
            )
            assert abs(got[0] - want) <= tolerance * modulus


def test_smaller_pixels_of_the_same_field_change_nothing(scene):
    """Pixels cut in two by three are the same light; twice the tolerance of all moduli."""
    field, pitch, points = scene
    cut = np.kron(field, np.ones((2, 3)))
    coarse = rayleigh_sommerfeld(field, pitch, points, 1.0, tolerance=1e-8)
    fine = rayleigh_sommerfeld(cut, (pitch[0] / 2, pitch[1] / 3), points, 1.0, tolerance=1e-8)
    np.testing.assert_allclose(fine, coarse, atol=2e-7)
    flat = cylindrical_sum(field[0], 0.3, points[:, ::2], 1.0, tolerance=1e-8)
    thin = cylindrical_sum(np.repeat(field[0], 3), 0.1, points[:, ::2], 1.0, tolerance=1e-8)
    np.testing.assert_allclose(thin, flat, atol=2e-7)


def test_without_a_wave_the_first_kind_is_the_solid_angle_of_the_pixel():
    """k -> 0 leaves z / (2 pi r^3) dA, solid angle / 2 pi, and z / (pi r^2) dx, angle / pi.

    A rectangle from the foot of the point to its corner (y, x) is seen under
    arctan(y x / (z sqrt(y^2 + x^2 + z^2))) (elementary); k r < 1e-3 changes 1e-6 of it. One pixel
    at a time is lit, so this tells where each pixel of an odd and an even axis lies, and which
    way the axes run; it goes as near the plane as a quarter of a pixel.
    """
    z, y, x = 1.0, 2.5, -1.2
    point, pitch = places(z, y, x), (4.0, 3.0)

    def corner(v, u):
        return np.arctan(v * u / (z * np.sqrt(v**2 + u**2 + z**2)))

    for row, low in enumerate((-6.0, -2.0, 2.0)):
        for column, left in enumerate((-6.0, -3.0, 0.0, 3.0)):
            field = np.zeros((3, 4), complex)
            field[row, column] = 2j
            got = rayleigh_sommerfeld(field, pitch, point, 1e5)[0]
            v, u = (low - y, low + 4.0 - y), (left - x, left + 3.0 - x)
            seen = corner(v[1], u[1]) - corner(v[0], u[1]) - corner(v[1], u[0]) + corner(v[0], u[0])
            assert got == pytest.approx(2j * seen / (2 * np.pi), abs=4e-6)
            flat = cylindrical_sum(field[row], 3.0, point[:, ::2], 1e5)[0]
            angle = np.arctan(u[1] / z) - np.arctan(u[0] / z)
            assert flat == pytest.approx(2j * angle / np.pi, abs=4e-6)


def test_points_where_the_nodes_would_explode_are_refused():
    field = np.ones((4, 4), complex)
    with pytest.raises(ConfigError, match=f"more than {MOST_NODES} nodes") as caught:
        rayleigh_sommerfeld(field, (1.0, 1.0), places([5.0, 0.01], 0, 0), 1.0)
    # What the message allows is allowed.
    start = float(caught.value.faults[0].allowed.split()[3])
    rayleigh_sommerfeld(field, (1.0, 1.0), places(1.05 * start, 0, 0), 1.0)
    with pytest.raises(ConfigError, match="finer pitch"):
        cylindrical_sum(field[0], 100.0, places(200.0, 900.0), 1.0)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"kind": 3}, "kind 3"),
        ({"pitch": (0.0, 1.0)}, "above zero"),
        ({"wavelength": math.nan}, "above zero"),
        ({"wavelength": 0.0}, "above zero"),
        ({"points": np.array([[0.0, 1.0, 1.0]])}, "behind the plane"),
        ({"points": np.array([[1.0, math.inf, 1.0]])}, "behind the plane"),
        ({"tolerance": 0.0}, "tolerance"),
    ],
)
def test_what_makes_no_sum_is_refused(change, words):
    given = {"pitch": (1.0, 1.0), "points": np.array([[5.0, 0.0, 0.0]]), "wavelength": 1.0}
    with pytest.raises(ConfigError, match=words):
        rayleigh_sommerfeld(np.ones((2, 2), complex), **(given | change))


def test_points_that_do_not_fit_the_field_are_refused():
    with pytest.raises(ConfigError, match="do not fit"):
        nodes_per_side((2, 2), (1.0, 1.0), np.ones((3, 2)), 1.0)


@pytest.mark.parametrize("bad", [math.nan, math.inf])
def test_a_field_that_is_not_finite_is_refused(bad):
    field = np.array([1.0, bad], complex)
    with pytest.raises(ConfigError, match="not finite"):
        cylindrical_sum(field, 1.0, places(5.0, 0), 1.0)


def test_terms_count_the_lit_pixels_and_a_dark_field_costs_nothing():
    """Nodes of each point times lit pixels (definition)."""
    field = np.zeros((6, 5), complex)
    points = places([10.0, 3.0], 0, [0.0, 4.0])
    assert terms(field, (0.5, 0.5), points, 1.0) == 0
    np.testing.assert_array_equal(rayleigh_sommerfeld(field, (0.5, 0.5), points, 1.0), 0)
    field[2:4, 1] = 1
    nodes = nodes_per_side(field.shape, (0.5, 0.5), points, 1.0)
    want = 2 * sum(int(a) * int(b) for a, b in nodes)
    assert terms(field, (0.5, 0.5), points, 1.0) == want
    assert len(rayleigh_sommerfeld(field, (0.5, 0.5), np.empty((0, 3)), 1.0)) == 0


def test_memory_stays_far_below_200_megabytes():
    """A million pixels of the caller's own field; numpy reports its arrays to tracemalloc."""
    field = np.ones((1000, 1000), complex)
    tracemalloc.start()
    rayleigh_sommerfeld(field, (0.1, 0.1), places(1e4, 0, [0.0, 50.0]), 1.0, tolerance=1e-2)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert peak < 50e6


@pytest.mark.parametrize(
    ("width", "first", "second"),
    [
        (0.25, 0.37332, 0.70945),
        (0.5, 0.64776, 1.06291),
        (1.0, 0.84746, 0.97155),
        (1.5, 0.89150, 1.01683),
    ],
)
def test_narrow_slits_pass_the_tabulated_share_of_the_light(width, first, second):
    """Power on a far half circle over that on the slit, aperture field 1, in wavelengths.

    Digits by two own solutions of the aperture integrals; the question is that of Morse and
    Rubenstein, Phys. Rev. 54, 895 (1938) (from memory).
    """
    far, count = 2000.0, 1500
    angle = (np.arange(count) + 0.5) / count * np.pi - np.pi / 2
    points = far * np.stack([np.cos(angle), np.sin(angle)], axis=1)
    for kind, share in ((1, first), (2, second)):
        field = cylindrical_sum(np.ones(64, complex), width / 64, points, 1.0, kind=kind)
        power = (np.abs(field) ** 2).sum() * far * np.pi / count / width
        assert power == pytest.approx(share, abs=2e-4)
