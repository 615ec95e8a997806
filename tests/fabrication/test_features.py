"""Minimum features against the definition, spelt out in loops over every rectangle."""

from itertools import product

import numpy as np
import pytest

from doe.fabrication.features import breaches, corner_contacts, edge_length, measure, opened


def covered(layer: np.ndarray, size: tuple[int, int]) -> np.ndarray:
    """Union of all rectangles of `size` pixels that lie within a periodic layer."""
    rows, columns = layer.shape
    found = np.zeros_like(layer)
    for y, x in product(range(rows), range(columns)):
        places = [
            ((y + dy) % rows, (x + dx) % columns)
            for dy, dx in product(range(size[0]), range(size[1]))
        ]
        if all(layer[place] for place in places):
            for place in places:
                found[place] = True
    return found


def layer_of(seed: int, shape: tuple[int, int]) -> np.ndarray:
    """A random layer with patches, so that something of it outlasts an opening."""
    generator = np.random.default_rng(seed)
    layer = generator.random(shape) < 0.35
    for axis in (0, 1):
        if shape[axis] > 1:
            layer |= np.roll(layer, 1, axis=axis)
    return layer


SHAPES = [(12, 9), (7, 8), (1, 11)]
SIZES = [(1, 1), (1, 2), (2, 1), (2, 2), (3, 2), (2, 3), (4, 4), (1, 5)]


@pytest.mark.parametrize("shape", SHAPES)
@pytest.mark.parametrize("size", SIZES)
def test_the_opening_is_the_union_of_the_rectangles_inside(shape, size):
    if size[0] > shape[0]:
        size = (1, size[1])
    for seed in range(6):
        layer = layer_of(seed, shape)
        np.testing.assert_array_equal(opened(layer, size), covered(layer, size))


@pytest.mark.parametrize("shape", SHAPES)
@pytest.mark.parametrize(("feature", "gap"), [((2, 2), (2, 2)), ((3, 2), (1, 2)), ((1, 1), (2, 3))])
def test_breaches_are_what_opening_and_closing_change(shape, feature, gap):
    if shape[0] == 1:
        feature, gap = (1, feature[1]), (1, gap[1])
    for seed in range(6):
        layer = layer_of(seed, shape)
        thin = layer & ~covered(layer, feature)
        narrow = ~layer & ~covered(~layer, gap)
        np.testing.assert_array_equal(breaches(layer, feature, gap), thin | narrow)


def test_a_rule_of_one_pixel_is_never_broken():
    layer = np.random.default_rng(2).random((20, 20)) < 0.5
    assert not breaches(layer, (1, 1), (1, 1)).any()


@pytest.mark.parametrize("shift", [(0, 0), (5, 0), (0, 6), (5, 6), (3, 3)])
def test_a_feature_across_the_seam_counts_as_one(shift):
    """A square of 2 x 2 anywhere in the period keeps a rule of 2 and breaks one of 3."""
    layer = np.zeros((6, 7), bool)
    layer[:2, :2] = True
    layer = np.roll(layer, shift, axis=(0, 1))
    assert not breaches(layer, (2, 2), (2, 2)).any()
    np.testing.assert_array_equal(breaches(layer, (3, 2), (1, 1)), layer)
    np.testing.assert_array_equal(breaches(layer, (2, 3), (1, 1)), layer)


def test_the_rule_is_told_along_y_and_along_x():
    """A bar one pixel high and five wide."""
    layer = np.zeros((8, 8), bool)
    layer[3, 1:6] = True
    assert not breaches(layer, (1, 5), (1, 1)).any()
    assert breaches(layer, (2, 1), (1, 1)).sum() == 5
    assert breaches(layer, (1, 6), (1, 1)).sum() == 5


def test_a_slit_breaks_the_gap_and_not_the_feature():
    layer = np.ones((8, 8), bool)
    layer[:, 4] = False
    assert not breaches(layer, (3, 3), (1, 1)).any()
    np.testing.assert_array_equal(breaches(layer, (3, 3), (1, 2)), ~layer)


@pytest.mark.parametrize("value", [True, False])
def test_a_full_or_empty_layer_keeps_every_rule(value):
    layer = np.full((6, 6), value)
    assert not breaches(layer, (4, 4), (4, 4)).any()
    assert edge_length(layer) == 0
    assert not corner_contacts(layer).any()


def drawing(text: str) -> np.ndarray:
    """A layer drawn with # for glass."""
    return np.array([[sign == "#" for sign in line] for line in text.split()])


@pytest.mark.parametrize(
    ("text", "contacts"),
    [
        (".... .#.. ..#. ....", 1),
        (".... ..#. .#.. ....", 1),
        (".... .##. ..#. ....", 0),
        ("#... .... .... ...#", 1),  # across the corner of the period
        ("...# #... .... ....", 1),  # across its side
        ("#.#. .#.# #.#. .#.#", 16),
        ("##.. ##.. ..## ..##", 4),
        ("#### .... #### ....", 0),
    ],
)
def test_corner_contacts_of_drawn_layers(text, contacts):
    layer = drawing(text)
    assert corner_contacts(layer).sum() == contacts
    assert corner_contacts(~layer).sum() == contacts
    assert corner_contacts(layer.T).sum() == contacts
    assert corner_contacts(layer[::-1]).sum() == contacts


@pytest.mark.parametrize(
    ("text", "sides"),
    [("..... .#... .....", 4), (".##. .##. .... ....", 8), ("##.. ##..", 4), ("#.#.", 4)],
)
def test_edges_are_counted_around_the_period(text, sides):
    """A bar that spans a period of two rows has its two sides of two pixels each."""
    assert edge_length(drawing(text)) == sides


def test_each_layer_has_a_report_of_its_own():
    layers = np.stack([drawing("#... .... .... ...."), drawing("##.. ##.. .... ....")])
    one, two = measure(layers, (2, 2), (1, 2))
    assert (one.breaches, two.breaches) == (1, 0)
    assert (one.edge_length, two.edge_length) == (4, 8)
    assert (one.rule, one.gap_rule) == ((2, 2), (1, 2))
