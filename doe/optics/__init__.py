"""Light from the mask to the pattern, as differentiable JAX functions."""
