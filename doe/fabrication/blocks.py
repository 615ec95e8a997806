"""Blocks of pixels that keep a mask rule by construction."""

import numpy as np
from jaxtyping import Int


def block_centres(pixels: int, size: int) -> Int[np.ndarray, " pixel"]:
    """For each pixel of a period, the centre pixel of its block of at least `size` pixels.

    A relief that is constant on each block keeps a minimum feature and gap of `size`, across the
    seam too. Source: a union of blocks is a union of `size`-wide rectangles.
    """
    count = max(1, pixels // size)
    borders = np.arange(count + 1) * pixels // count
    block = np.searchsorted(borders, np.arange(pixels), side="right") - 1
    centres: Int[np.ndarray, " pixel"] = ((borders[:-1] + borders[1:] - 1) // 2)[block]
    return centres
