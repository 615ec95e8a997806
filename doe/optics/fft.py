"""The one door to the two-dimensional fast Fourier transform: norms and centring stated once."""

import jax.numpy as jnp
from jaxtyping import Array, Complex

AXES = (-2, -1)


def fft2(
    field: Complex[Array, "*batch y x"], *, is_centred: bool = False
) -> Complex[Array, "*batch fy fx"]:
    """Sum of field[y, x] exp(-2 pi i (fy y / ny + fx x / nx)), without any factor in front.

    is_centred: y, x and fy, fx count from [ny // 2, nx // 2] on both sides, else from [0, 0].
    So sum |out|^2 = ny nx sum |field|^2. Unit: that of the field. The sign belongs to light that
    goes with exp(-i omega t): order +m is the phase exp(+2 pi i m x / period).
    Error: about 1e-7 sqrt(log2(ny nx)) of the root mean square in complex64. Source: definition.
    """
    if is_centred:
        return jnp.fft.fftshift(jnp.fft.fft2(jnp.fft.ifftshift(field, AXES), axes=AXES), AXES)
    return jnp.fft.fft2(field, axes=AXES)


def ifft2(
    field: Complex[Array, "*batch fy fx"], *, is_centred: bool = False
) -> Complex[Array, "*batch y x"]:
    """The inverse of `fft2`: sum of field exp(+2 pi i ...) over ny nx.

    is_centred: as `fft2`. The adjoint of `fft2` is ny nx times this function.
    Error: as `fft2`. Source: definition.
    """
    if is_centred:
        return jnp.fft.fftshift(jnp.fft.ifft2(jnp.fft.ifftshift(field, AXES), axes=AXES), AXES)
    return jnp.fft.ifft2(field, axes=AXES)
