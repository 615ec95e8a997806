"""Levels and binary layers."""

import math

import jax
import jax.numpy as jnp
import numpy as np
import pytest

from doe.fabrication.levels import layers_of, level_of, level_phase, nearest_level

POWERS = [2, 4, 8, 16, 32, 64, 128, 256]


@pytest.mark.parametrize("levels", POWERS)
def test_layers_add_up_to_the_level_by_definition(levels):
    """level = sum over k of layers[k] 2^(M-1-k), M = log2 N; layer 0 is the pi etch."""
    level = np.arange(levels, dtype=np.uint8).reshape(2, -1)
    layers = layers_of(level, levels)
    masks = int(math.log2(levels))
    assert layers.shape == (masks, *level.shape)
    assert layers.dtype == bool
    total = sum(layers[k].astype(int) * 2 ** (masks - 1 - k) for k in range(masks))
    np.testing.assert_array_equal(total, level)


@pytest.mark.parametrize("levels", POWERS)
def test_the_relief_comes_back_from_its_layers(levels):
    level = np.random.default_rng(levels).integers(0, levels, (9, 7)).astype(np.uint8)
    again = level_of(layers_of(level, levels))
    np.testing.assert_array_equal(again, level)
    assert again.dtype == np.uint8


def test_the_first_layer_of_eight_levels_is_the_upper_half():
    level = np.arange(8, dtype=np.uint8)[None]
    layers = layers_of(level, 8)[:, 0]
    np.testing.assert_array_equal(layers[0], [0, 0, 0, 0, 1, 1, 1, 1])
    np.testing.assert_array_equal(layers[2], [0, 1, 0, 1, 0, 1, 0, 1])


@pytest.mark.parametrize("levels", [2, 3, 4, 8, 16, 256])
def test_the_nearest_level_is_the_nearest_on_the_circle(levels):
    phase = np.random.default_rng(1).uniform(-20, 20, 2000)
    step = 2 * np.pi / levels
    distance = np.abs(np.angle(np.exp(1j * (phase[:, None] - step * np.arange(levels)[None]))))
    with jax.enable_x64(True):
        found = np.asarray(nearest_level(jnp.asarray(phase), levels))
    np.testing.assert_array_equal(found, distance.argmin(axis=1))


@pytest.mark.parametrize("levels", [2, 8, 256])
def test_a_levels_phase_is_nearest_to_itself(levels):
    level = jnp.arange(levels, dtype=jnp.float32)
    np.testing.assert_array_equal(nearest_level(level_phase(level, levels), levels), level)
    assert float(level_phase(jnp.float32(levels), levels)) == pytest.approx(2 * np.pi)
