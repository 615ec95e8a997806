"""Blocks of pixels keep a rule by construction."""

import numpy as np
import pytest

from doe.fabrication.blocks import block_centres
from doe.fabrication.features import breaches


@pytest.mark.parametrize(("pixels", "size"), [(64, 3), (64, 5), (10, 7), (7, 8), (256, 8), (9, 1)])
def test_any_relief_on_blocks_keeps_the_rule_over_the_seam(pixels, size):
    centres = block_centres(pixels, size)
    noise = np.random.default_rng(1).random((pixels, pixels)) > 0.5
    layer = noise[np.ix_(centres, centres)]
    fits = min(size, pixels)
    assert not breaches(layer, (fits, fits), (fits, fits)).any()


def test_a_block_holds_its_own_centre_and_is_never_smaller_than_the_rule():
    centres = block_centres(65, 4)
    assert (np.diff(centres) >= 0).all()
    assert (centres[centres] == centres).all(), "taking the centre twice changes nothing"
    assert np.bincount(centres)[np.unique(centres)].min() >= 4


def test_a_rule_of_one_pixel_changes_nothing():
    np.testing.assert_array_equal(block_centres(12, 1), np.arange(12))
