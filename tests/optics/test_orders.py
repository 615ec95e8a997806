"""The two ways from a field at the mask to its orders, and the way back."""

import jax
import jax.numpy as jnp
import numpy as np
import pytest

from doe.optics.orders import amplitudes, basis, mask_field, order_numbers, order_table
from doe.optics.phasor import phasor

SHAPES = [(8, 12), (9, 11), (1, 16)]
EXACT = 1e-13  # round-off of float64 in sums of about a hundred terms of modulus 1


@pytest.fixture(autouse=True)
def _float64():
    with jax.enable_x64(True):
        yield


def random_field(shape: tuple[int, ...], seed: int) -> jax.Array:
    generator = np.random.default_rng(seed)
    return jnp.asarray(generator.normal(size=shape) + 1j * generator.normal(size=shape))


def bases(orders_y: np.ndarray, orders_x: np.ndarray, shape: tuple[int, int]):
    return jnp.asarray(basis(orders_y, shape[0])), jnp.asarray(basis(orders_x, shape[1]))


@pytest.mark.parametrize(("pixels", "orders"), [(8, [-4, -1, 0, 3]), (9, [-4, 0, 4, 13])])
def test_basis_integrates_each_wave_over_each_pixel(pixels, orders):
    """Row m holds the integrals of exp(-2 pi i m x) from edge to edge of each pixel.

    By Simpson's rule on 200 intervals in a pixel; its error is below (2 pi m h)^4 / 180 / n.
    """
    intervals = 200
    simpson = np.ones(intervals + 1)
    simpson[1:-1:2], simpson[2:-1:2] = 4, 2
    inside = np.linspace(0, 1, intervals + 1)
    for row, m in zip(basis(np.array(orders), pixels), orders, strict=True):
        step = 2 * np.pi * abs(m) / pixels / intervals
        for j in range(pixels):
            wave = np.exp(-2j * np.pi * m * (j + inside) / pixels)
            integral = (simpson * wave).sum() / simpson.sum() / pixels
            assert abs(row[j] - integral) <= step**4 / 180 + 1e-15


@pytest.mark.parametrize("shape", SHAPES)
def test_matrices_and_fourier_transform_give_the_same_order_powers(shape):
    near = random_field(shape, 1)
    rows, columns = (order_numbers(pixels) for pixels in shape)
    far = amplitudes(near, *bases(rows, columns, shape))
    table = order_table(near)
    np.testing.assert_allclose(np.abs(far) ** 2, table, rtol=0, atol=EXACT)


def test_amplitudes_agree_with_a_sum_written_out():
    """sum over pixels of u sinc(m/n) exp(-2 pi i m (j + 1/2) / n) / n on both axes (definition)."""
    shape = (5, 6)
    near = np.asarray(random_field(shape, 2))
    orders_y, orders_x = np.array([-2, 0, 3]), np.array([5, -1])
    got = amplitudes(jnp.asarray(near), *bases(orders_y, orders_x, shape))
    for row, m_y in enumerate(orders_y):
        for column, m_x in enumerate(orders_x):
            total = 0j
            for j in range(5):
                for i in range(6):
                    turn = m_y * (j + 0.5) / 5 + m_x * (i + 0.5) / 6
                    total += near[j, i] * np.exp(-2j * np.pi * turn) / 30
            total *= np.sinc(m_y / 5) * np.sinc(m_x / 6)
            assert abs(got[row, column] - total) < EXACT


@pytest.mark.parametrize("shape", SHAPES)
def test_mask_field_is_the_adjoint_of_amplitudes(shape):
    """<amplitudes(x), y> = <x, mask_field(y)> for any x and y (definition of an adjoint)."""
    orders_y, orders_x = np.array([0, 1, -3]), np.array([2, 0, -1, 4])
    both = bases(orders_y, orders_x, shape)
    near, orders = random_field(shape, 3), random_field((3, 4), 4)
    left = jnp.vdot(amplitudes(near, *both), orders)
    right = jnp.vdot(near, mask_field(orders, *both))
    assert abs(left - right) < EXACT * np.prod(shape)


def test_float32_amplitudes_keep_six_digits():
    """Rounding of 96 products of modulus about 1/96: 96 half-units of 6e-8 at the very worst."""
    shape = (8, 12)
    near = random_field(shape, 5) / 2
    orders_y, orders_x = order_numbers(8), order_numbers(12)
    both = bases(orders_y, orders_x, shape)
    exact = amplitudes(near, *both)
    short = amplitudes(near.astype(jnp.complex64), *(b.astype(jnp.complex64) for b in both))
    assert short.dtype == jnp.complex64
    assert float(jnp.abs(short - exact).max()) < 1e-6


@pytest.mark.parametrize("shape", [(8, 10), (9, 11), (8, 11), (9, 10), (1, 8)])
def test_zero_order_lies_at_half_the_pixels_for_even_and_odd_counts(shape):
    table = np.asarray(order_table(jnp.ones(shape, complex)))
    expected = np.zeros(shape)
    expected[shape[0] // 2, shape[1] // 2] = 1
    np.testing.assert_allclose(table, expected, rtol=0, atol=EXACT)
    assert [order_numbers(pixels)[pixels // 2] for pixels in shape] == [0, 0]


@pytest.mark.parametrize("shape", [(8, 10), (9, 11)])
@pytest.mark.parametrize("order", [(0, 1), (1, 0), (0, -1), (-2, 3)])
def test_phase_that_rises_by_two_pi_over_a_period_makes_the_order_plus_one(shape, order):
    """s = m wavelength / period, positive where the phase rises; sinc^2(m/n) is the pixel's."""
    m_y, m_x = order
    y, x = np.indices(shape)
    phase = 2 * np.pi * (m_y * y / shape[0] + m_x * x / shape[1])
    table = np.asarray(order_table(phasor(jnp.asarray(phase))))
    expected = np.zeros(shape)
    power = np.sinc(m_y / shape[0]) ** 2 * np.sinc(m_x / shape[1]) ** 2
    expected[shape[0] // 2 + m_y, shape[1] // 2 + m_x] = power
    np.testing.assert_allclose(table, expected, rtol=0, atol=EXACT)
    one = amplitudes(phasor(jnp.asarray(phase)), *bases(np.array([m_y]), np.array([m_x]), shape))
    assert abs(float(jnp.abs(one[0, 0]) ** 2) - power) < EXACT


def test_shift_by_a_pixel_turns_an_order_by_two_pi_m_over_n_and_keeps_its_power():
    """Shift theorem of the Fourier series."""
    shape, orders_y, orders_x = (8, 12), np.array([-1, 0, 2]), np.array([-4, 1, 3])
    near = random_field(shape, 6)
    both = bases(orders_y, orders_x, shape)
    shifted = amplitudes(jnp.roll(near, (1, 2), axis=(0, 1)), *both)
    turn = orders_y[:, None] * 1 / 8 + orders_x[None, :] * 2 / 12
    expected = amplitudes(near, *both) * np.exp(-2j * np.pi * turn)
    np.testing.assert_allclose(shifted, expected, rtol=0, atol=EXACT)
