"""Levels of a relief and its binary mask layers."""

import jax.numpy as jnp
import numpy as np
from jaxtyping import Array, Bool, Float, UInt8


def nearest_level(phase: Float[Array, "*shape"], levels: int) -> Float[Array, "*shape"]:
    """Index 0 .. N-1 of the level nearest to a phase [rad], as a float. Source: definition."""
    step = 2 * jnp.pi / levels
    return jnp.mod(jnp.round(phase / step), levels)


def level_phase(level: Float[Array, "*shape"], levels: int) -> Float[Array, "*shape"]:
    """Phase [rad] of a level: 2 pi level / N. Source: definition."""
    return 2 * jnp.pi / levels * level


def layers_of(level: UInt8[np.ndarray, "y x"], levels: int) -> Bool[np.ndarray, "mask y x"]:
    """Binary layers of a relief, True = glass left standing; layer 0 is the pi etch.

    level = sum over k of layers[k] 2^(M-1-k), M = log2 N. Source: Swanson, MIT Lincoln Laboratory
    TR-854 (1989) (from memory).
    """
    masks = levels.bit_length() - 1
    weights = 2 ** np.arange(masks)[::-1].astype(np.uint8)
    standing: Bool[np.ndarray, "mask y x"] = (level[None] & weights[:, None, None]) > 0
    return standing


def level_of(layers: Bool[np.ndarray, "mask y x"]) -> UInt8[np.ndarray, "y x"]:
    """The relief that binary layers make: the inverse of `layers_of`."""
    weights = 2 ** np.arange(len(layers))[::-1]
    level: UInt8[np.ndarray, "y x"] = np.tensordot(weights, layers, axes=1).astype(np.uint8)
    return level
