"""The suite's shape checker is at work."""

import jax.numpy as jnp
import jaxtyping
import pytest


def test_a_wrong_shape_is_caught():
    from doe.optics.orders import amplitudes

    near, line = jnp.ones((8, 8), complex), jnp.ones((3, 8), complex)
    assert amplitudes(near, line, line).shape == (3, 3)
    with pytest.raises(jaxtyping.TypeCheckError):
        amplitudes(near[0], line, line)
