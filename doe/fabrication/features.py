"""Minimum feature and gap of binary layers, across the seam of the period."""

import numpy as np
from jaxtyping import Bool
from scipy import ndimage

from doe.result import FeatureReport

Layer = Bool[np.ndarray, "y x"]


def measure(
    layers: Bool[np.ndarray, "mask y x"], feature: tuple[int, int], gap: tuple[int, int]
) -> tuple[FeatureReport, ...]:
    """What each layer keeps of the rule; `feature` and `gap` are pixels (y, x)."""
    return tuple(
        FeatureReport(
            rule=feature,
            gap_rule=gap,
            breaches=int(breaches(layer, feature, gap).sum()),
            corner_contacts=int(corner_contacts(layer).sum()),
            edge_length=edge_length(layer),
        )
        for layer in layers
    )


def breaches(layer: Layer, feature: tuple[int, int], gap: tuple[int, int]) -> Layer:
    """Pixels that break the rule: those the layer's opening or its closing would change.

    Source: definition of this project's rule, by opening (feature) and closing (gap) with a
    rectangle, Serra, Image Analysis and Mathematical Morphology (1982) (from memory).
    """
    broken: Layer = (layer & ~opened(layer, feature)) | (~layer & ~opened(~layer, gap))
    return broken


def opened(layer: Layer, size: tuple[int, int]) -> Layer:
    """Opening of a periodic layer by a rectangle of `size` pixels (y, x)."""
    margin = [(2 * s, 2 * s) for s in size]
    padded = np.pad(layer, margin, mode="wrap")
    result = ndimage.binary_opening(padded, structure=np.ones(size, bool))
    (top, _), (left, _) = margin
    inside: Layer = result[top : top + layer.shape[0], left : left + layer.shape[1]]
    return inside


def corner_contacts(layer: Layer) -> Layer:
    """Corners where two pixels of one sort meet and touch nowhere else."""
    right = np.roll(layer, -1, axis=1)
    below = np.roll(layer, -1, axis=0)
    across = np.roll(right, -1, axis=0)
    contact: Layer = (layer == across) & (right == below) & (layer != right)
    return contact


def edge_length(layer: Layer) -> int:
    """Pixel sides between glass and gap in one period."""
    return int(sum((layer != np.roll(layer, 1, axis=axis)).sum() for axis in (0, 1)))
