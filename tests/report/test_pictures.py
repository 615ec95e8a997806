"""Pictures are drawn for every sort of design, without any window system, and repeatably."""

import io
import warnings
from dataclasses import replace

import numpy as np
import pytest
from helpers import job
from PIL import Image

from doe.config.load import load
from doe.config.made_part import Errors
from doe.report import comparison, overview
from doe.result import Result, Trace
from doe.scoring import evaluate


def result_of(**changes: object) -> Result:
    """A random mask under the small job with changes, with a trace of three looks."""
    config, text = load(job(**({"element__pixels": 16} | changes)))
    count = config.element.levels or 8
    level = np.random.default_rng(3).integers(0, count, config.element.pixels)
    phase = level * (2 * np.pi / count) + (0 if config.element.levels else 0.1)
    course = np.array([0.5, 0.6, 0.7], np.float32)
    trace = Trace(np.array([10, 20, 30]), 1 - course, course, 0.9 - course)
    return replace(evaluate(config, text, phase, Errors()), trace=trace)


def picture(data: bytes) -> np.ndarray:
    """A PNG as another program reads it, in RGB."""
    with Image.open(io.BytesIO(data)) as image:
        assert image.format == "PNG"
        return np.asarray(image.convert("RGB"))


CASES = {
    "levels": {},
    "two levels": {"element__levels": 2, "target__shape": [2, 2]},
    "continuous": {"element__levels": 0},
    "one dimension": {"element__pixels": [1, 48], "target__shape": [1, 5]},
    "one order at the edge": {"target": {"kind": "orders", "orders": [[7, -7]]}},
    "not square": {"element__pixels": [24, 16], "element__period": ["0.3 mm", "0.64 mm"]},
}


@pytest.mark.parametrize("name", CASES)
def test_a_picture_is_drawn_for_every_sort_of_design(name):
    pixels = picture(overview.draw(result_of(**CASES[name])))
    height, width, _ = pixels.shape
    assert width > 2 * height, "three panels side by side"
    assert width >= 1200
    for panel in np.array_split(pixels, 3, axis=1):
        colours = np.unique(panel.reshape(-1, 3), axis=0)
        assert len(colours) > 50, "a panel is empty"


def test_the_same_result_gives_the_same_picture():
    result = result_of()
    assert overview.draw(result) == overview.draw(result)


def test_another_mask_gives_another_picture():
    result = result_of()
    mask = replace(result.mask, levels=result.mask.levels[::-1].copy())
    assert overview.draw(replace(result, mask=mask)) != overview.draw(result)


def draw_comparison(result: Result) -> bytes:
    """The picture of a comparison with one entry."""
    return comparison.draw({("gradient", True): result})


@pytest.mark.parametrize(
    ("draw", "title"),
    [
        (overview.draw, "5 $_$ each"),
        (overview.draw, "100 % \\ ~ & # µ " + "x" * 100),
        (draw_comparison, "$\\frac{$ a_b^c"),
    ],
    ids=["dollars", "signs", "comparison"],
)
def test_any_title_is_drawn_as_it_stands(draw, title):
    """Signs of formulas are text here; a run of hours must not fail at its picture."""
    result = result_of()
    titled = replace(result, config=result.config.model_copy(update={"title": title}))
    assert picture(draw(titled)).size


def test_perfect_and_missing_figures_are_drawn_too():
    """Uniformity errors of 0 have no logarithm."""
    result = result_of()
    nothing = np.zeros(3, np.float32)
    perfect = replace(
        result,
        trace=Trace(np.array([10, 20, 30]), nothing, nothing, nothing),
        scores=result.scores | {"uniformity_error": 0.0},
    )
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        assert picture(overview.draw(perfect)).size
        assert picture(comparison.draw({("a", False): perfect, ("a", True): result})).size


def test_a_comparison_shows_every_method():
    result = result_of()
    methods = [f"method {number}" for number in range(7)]
    results = {
        (name, True): replace(result, scores=result.scores | {"efficiency": 0.1 * i + 0.2})
        for i, name in enumerate(methods)
    }
    few = comparison.draw({("method 0", True): results["method 0", True]})
    many = comparison.draw(results)
    assert picture(many).shape == picture(few).shape
    assert many != few
