"""exp(i phase): its stated error, its slope, and that it is the same under jit and vmap."""

import jax
import jax.numpy as jnp
import numpy as np
import pytest

from doe.optics.phasor import phasor

STATED_ERROR = 4e-7  # in float32 below 1000 rad, by the docstring of phasor


def many_phases() -> np.ndarray:
    """Phases up to 1000 rad in float32: random, and round every multiple of a quarter pi."""
    spread = np.random.default_rng(3).uniform(-1000, 1000, 200_000)
    near = np.arange(-1273, 1274) * np.pi / 4
    edges = np.concatenate([near, near + 1e-4, near - 1e-4])
    edges = edges[np.abs(edges) < 1000]
    return np.concatenate([spread, edges, [0.0, -0.0]]).astype(np.float32)


WAYS = {
    "eager": phasor,
    "jit": jax.jit(phasor),
    "vmap": jax.vmap(phasor),
    "jit and vmap": jax.jit(jax.vmap(phasor)),
}


@pytest.mark.parametrize("way", WAYS)
def test_float32_phasor_keeps_its_stated_error_up_to_1000_rad(way):
    """Against NumPy's float64 sine and cosine of the very same float32 phase."""
    phase = many_phases()
    got = np.asarray(WAYS[way](jnp.asarray(phase)))
    exact = np.exp(1j * phase.astype(np.float64))
    assert got.dtype == np.complex64
    assert np.abs(got - exact).max() <= STATED_ERROR


def test_float32_phasor_keeps_its_stated_error_below_ten_turns():
    """The range that designs live in: phases from -10 to 10 turns."""
    phase = np.linspace(-20 * np.pi, 20 * np.pi, 100_001).astype(np.float32)
    got = np.asarray(phasor(jnp.asarray(phase)))
    assert np.abs(got - np.exp(1j * phase.astype(np.float64))).max() <= STATED_ERROR


def test_modulus_is_one_within_the_stated_error():
    modulus = np.abs(np.asarray(phasor(jnp.asarray(many_phases()))))
    assert np.abs(modulus - 1).max() <= STATED_ERROR


def test_slope_is_minus_sine_and_cosine():
    """d cos = -sin d phase, d sin = cos d phase; slopes carry the error of the value itself."""
    phase = np.linspace(-7, 7, 2001).astype(np.float32)
    real = jax.vmap(jax.grad(lambda p: phasor(p).real))(jnp.asarray(phase))
    imag = jax.vmap(jax.grad(lambda p: phasor(p).imag))(jnp.asarray(phase))
    np.testing.assert_allclose(real, -np.sin(phase.astype(np.float64)), rtol=0, atol=STATED_ERROR)
    np.testing.assert_allclose(imag, np.cos(phase.astype(np.float64)), rtol=0, atol=STATED_ERROR)


def test_forward_and_reverse_slopes_agree_under_jit():
    """The Jacobian of cos and sin is diagonal: -sin and cos of each phase (calculus)."""
    phase = jnp.array([0.1, 1.0, 2.5, -4.0, 6.0], jnp.float32)

    def both(p):
        return jnp.concatenate([phasor(p).real, phasor(p).imag])

    exact = np.concatenate([np.diag(-np.sin(np.array(phase))), np.diag(np.cos(np.array(phase)))])
    for jacobian in (jax.jacfwd, jax.jacrev):
        np.testing.assert_allclose(jax.jit(jacobian(both))(phase), exact, rtol=0, atol=STATED_ERROR)


def test_float64_phasor_and_its_slope_are_exact_to_round_off():
    """NumPy's float64 functions; 1e-15 is five units in the last place."""
    with jax.enable_x64(True):
        phase = np.concatenate([np.linspace(-1000, 1000, 40_001), np.arange(-99, 99) * np.pi / 4])
        got = phasor(jnp.asarray(phase))
        assert got.dtype == jnp.complex128
        np.testing.assert_allclose(got, np.exp(1j * phase), rtol=0, atol=1e-15)
        slope = jax.vmap(jax.grad(lambda p: phasor(p).real))(jnp.asarray(phase))
        np.testing.assert_allclose(slope, -np.sin(phase), rtol=0, atol=1e-15)
