"""The makeable rule and the way to it."""

import jax
import jax.numpy as jnp
import numpy as np
import pytest

from doe.fabrication.makeable import FREE_UNTIL, SETTLED_FROM, freezing, makeable

PHASE = jnp.asarray(np.random.default_rng(4).uniform(-9, 9, (24, 24)), jnp.float32)
COUNTS = [2, 4, 8, 16]


def off_level(phase: jax.Array, levels: int) -> np.ndarray:
    """Distance [rad] to the nearest level, on the circle."""
    step = 2 * np.pi / levels
    values = np.asarray(phase, float)
    return np.abs(values - np.round(values / step) * step)


@pytest.mark.parametrize("levels", [0, *COUNTS, 256])
def test_making_twice_changes_nothing(levels):
    once = makeable(PHASE, levels)
    np.testing.assert_array_equal(makeable(once, levels), once)


@pytest.mark.parametrize("levels", COUNTS)
def test_a_made_phase_lies_on_a_level_within_half_a_step(levels):
    made = makeable(PHASE, levels)
    assert off_level(made, levels).max() < 2e-6
    turn = np.angle(np.exp(1j * (np.asarray(made, float) - np.asarray(PHASE, float))))
    assert np.abs(turn).max() <= np.pi / levels + 1e-5
    assert float(made.min()) >= 0
    assert float(made.max()) < 2 * np.pi


def test_a_continuous_profile_is_left_as_it_is():
    assert makeable(PHASE, 0) is PHASE
    assert freezing(PHASE, 0, jnp.float32(0.5)) is PHASE


@pytest.mark.parametrize("levels", COUNTS)
@pytest.mark.parametrize("fraction", [0.0, FREE_UNTIL / 2, FREE_UNTIL])
def test_at_the_start_every_pixel_is_free(levels, fraction):
    np.testing.assert_array_equal(freezing(PHASE, levels, jnp.float32(fraction)), PHASE)


@pytest.mark.parametrize("levels", COUNTS)
@pytest.mark.parametrize("fraction", [SETTLED_FROM + 1e-6, 0.95, 1.0])
def test_at_the_end_every_pixel_is_made(levels, fraction):
    """Equal to the made phase on the circle, up to round-off of float32 at 9 rad."""
    settled = np.asarray(freezing(PHASE, levels, jnp.float32(fraction)), float)
    made = np.asarray(makeable(PHASE, levels), float)
    np.testing.assert_allclose(np.exp(1j * settled), np.exp(1j * made), atol=5e-6)


@pytest.mark.parametrize("levels", COUNTS)
def test_a_phase_half_way_between_levels_settles_too(levels):
    """Half a step off, rounding may put the rest a bit beyond half a step."""
    step = 2 * np.pi / levels
    half = jnp.asarray((np.arange(-40, 40) + 0.5) * step, jnp.float32).reshape(8, 10)
    assert off_level(freezing(half, levels, jnp.float32(1)), levels).max() < 1e-4


@pytest.mark.parametrize("levels", COUNTS)
def test_what_is_settled_stays_settled_as_the_budget_goes(levels):
    before = np.zeros(PHASE.shape, bool)
    for fraction in np.linspace(0, 1, 21):
        settled = off_level(freezing(PHASE, levels, jnp.float32(fraction)), levels) < 5e-6
        assert (settled | ~before).all()
        before = settled
    assert before.all()


def test_pixels_nearest_to_a_level_settle_first():
    half_way = jnp.float32((FREE_UNTIL + SETTLED_FROM) / 2)  # half of half a step is taken in
    phase = freezing(PHASE, 8, half_way)
    near = off_level(PHASE, 8) < 0.499 * np.pi / 8
    far = off_level(PHASE, 8) > 0.501 * np.pi / 8
    assert off_level(phase, 8)[near].max() < 5e-6
    np.testing.assert_array_equal(np.asarray(phase)[far], np.asarray(PHASE)[far])


def test_settled_pixels_have_no_slope_and_free_ones_have():
    half_way = jnp.float32((FREE_UNTIL + SETTLED_FROM) / 2)
    slope = jax.grad(lambda phase: freezing(phase, 8, half_way).sum())(PHASE)
    near, far = off_level(PHASE, 8) < 0.49 * np.pi / 8, off_level(PHASE, 8) > 0.51 * np.pi / 8
    np.testing.assert_array_equal(np.asarray(slope)[near], 0)
    np.testing.assert_array_equal(np.asarray(slope)[far], 1)
