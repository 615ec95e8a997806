"""Order powers of a drawing, by the exact Fourier transform of its polygons in float64."""

import numpy as np
from jaxtyping import Complex, Float, Int

from doe.signoff.drawing import Drawing


def order_powers(
    drawing: Drawing, m_y: Int[np.ndarray, " row"], m_x: Int[np.ndarray, " column"]
) -> Float[np.ndarray, "row column"]:
    """Power of the orders (m_y, m_x) of the drawn relief, etch m being pi / 2^(m-1) deep.

    Between the edges of all layers the phase is constant, and the plane wave of an order is
    integrated over each such rectangle in closed form: nothing is sampled.
    Error: round-off. Source: Fourier series of a function constant on rectangles.
    """
    masks = len(drawing.standing)
    depth = np.pi / 2.0 ** np.arange(masks)
    phase = np.tensordot(depth, drawing.standing, axes=1)
    near = np.exp(1j * phase)
    amplitude = integrals(m_y, drawing.y) @ near @ integrals(m_x, drawing.x).T
    power: Float[np.ndarray, "row column"] = np.abs(amplitude) ** 2
    return power


def integrals(
    orders: Int[np.ndarray, " order"], borders: Int[np.ndarray, " border"]
) -> Complex[np.ndarray, "order interval"]:
    """Mean over a period of exp(-2 pi i m u / period) on each interval between borders.

    Source: elementary integral, (exp(-i a) - exp(-i b)) / (2 pi i m), for m = 0 the length.
    """
    turn = borders / borders[-1]
    waves = np.exp(-2j * np.pi * orders[:, None] * turn)
    safe = np.where(orders == 0, 1, orders)[:, None]
    closed = (waves[:, :-1] - waves[:, 1:]) / (2j * np.pi * safe)
    found: Complex[np.ndarray, "order interval"] = np.where(
        orders[:, None] == 0, np.diff(turn), closed
    )
    return found
