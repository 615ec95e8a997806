"""The search as the last stage of a job: stopping, resuming, limits and the rule."""

import json
from pathlib import Path

import numpy as np
import pytest
from helpers import call, job

from doe import pipeline
from doe.config.load import load
from doe.solvers.hooks import Hooks

SEARCH = {
    "solver__refine": True,
    "solver__search__blocks": 12,
    "solver__search__trials": 3000,
    "element__pixels": 16,
    "limits": {"uniformity_error": "<= 2 %"},
}


class Stopper:
    """Hooks that stop when asked for the n-th time, and keep what was saved."""

    def __init__(self, after: int) -> None:
        self.after, self.asked, self.saved = after, 0, None

    def hooks(self, saved=None) -> Hooks:
        return Hooks(saved, self.save, lambda: False, self.stop, lambda *_: None)

    def save(self, facts, arrays) -> None:
        self.saved = dict(facts), [np.array(array) for array in arrays]

    def stop(self) -> bool:
        self.asked += 1
        return self.asked > self.after


def design(stopper, saved=None, **changes):
    config, text = load(job(**(SEARCH | changes)))
    return pipeline.design(config, text, "gradient", stopper.hooks(saved))


def test_a_search_stopped_and_resumed_gives_the_same_mask():
    whole, stopped = design(Stopper(10_000))
    assert not stopped
    for after in (0, 9):  # before the shaping, and in the search
        first = Stopper(after)
        _, stopped = design(first)
        assert stopped
        again, stopped = design(Stopper(10_000), first.saved)
        assert not stopped
        assert again.mask.levels.tobytes() == whole.mask.levels.tobytes()
        assert again.trace.loss.tobytes() == whole.trace.loss.tobytes()


def test_a_search_reaches_limits_that_rounding_misses():
    plain, _ = design(Stopper(10_000), solver__refine=False)
    searched, _ = design(Stopper(10_000))
    assert plain.scores["uniformity_error"] > 0.02
    assert searched.scores["uniformity_error"] <= 0.02
    assert searched.status == "met"


@pytest.mark.parametrize(
    "limits", [{"hottest_to_mean": "<= 1.01"}, {"rms_error": "<= 1 %"}], ids=["hottest", "rms"]
)
def test_the_search_keeps_other_limits_on_unevenness_too(limits):
    searched, _ = design(Stopper(10_000), limits=limits)
    assert searched.status == "met"


def test_a_rule_in_the_process_file_is_kept_and_recorded(monkeypatch, capsys):
    Path("shop.toml").write_text('min_feature = "80 um"\ncorner_contacts = "forbid"\n')
    path = job(**(SEARCH | {"process__file": "shop.toml"}))
    status, out, err = call(monkeypatch, capsys, "run", path, "--json", "--quiet")
    assert status in (0, 1), err
    told = json.loads(out)
    assert [found["rule"] for found in told["features"]] == [[2, 2]] * 3
    assert sum(found["breaches"] for found in told["features"]) == 0
    assert sum(found["corner_contacts"] for found in told["features"]) == 0


def test_limits_out_of_reach_end_with_1_and_the_nearest_figures(monkeypatch, capsys):
    limits = {"efficiency": ">= 99 %", "uniformity_error": "<= 2 %"}
    status, out, _ = call(
        monkeypatch, capsys, "run", job(**(SEARCH | {"limits": limits})), "--json", "--quiet"
    )
    told = json.loads(out)
    assert status == 1
    assert told["status"] == "missed"
    nearest = [text for text in told["warnings"] if "nearest" in text]
    assert len(nearest) == 1
    assert f"{told['scores']['efficiency']:.2%}".replace("%", " %") in nearest[0]


@pytest.mark.parametrize("levels", [2, 4])
def test_few_levels_keep_their_range(levels):
    result, _ = design(Stopper(10_000), element__levels=levels)
    assert result.mask.levels.max() < levels
    assert len(result.mask.layers) == levels.bit_length() - 1


def test_compare_shows_each_method_as_published_and_refined(monkeypatch, capsys):
    path = job(**(SEARCH | {"solver__methods": ["gradient", "weighted"], "solver__steps": 20}))
    status, out, err = call(
        monkeypatch, capsys, "compare", path, "--out", "all", "--json", "--quiet"
    )
    assert status in (0, 1), err
    told = json.loads(out)
    ways = [(row["name"], row["refined"]) for row in told["methods"]]
    assert ways == [
        ("gradient", False),
        ("weighted", False),
        ("gradient", True),
        ("weighted", True),
    ]
    for name, refined in ways:
        folder = Path("all") / (name if refined else f"{name}-as-published")
        assert (folder / "record.h5").is_file()
    refined = [row for row in told["methods"] if row["refined"]]
    assert all(row["uniformity_error"] <= 0.02 for row in refined)
    status, again, _ = call(
        monkeypatch, capsys, "compare", path, "--out", "all", "--resume", "--json"
    )
    assert json.loads(again)["methods"] == told["methods"]
