"""Verdicts on limits."""

import json

from helpers import call, job


def test_a_limit_on_light_that_is_not_there_is_missed(monkeypatch, capsys):
    """The bare aperture sends nothing into +-1: no uniformity, and so none within the limit."""
    path = job(target__shape=[2, 2], limits={"uniformity_error": "<= 1 %"})
    status, out, _ = call(monkeypatch, capsys, "evaluate", path, "--json")
    told = json.loads(out)
    assert status == 1
    assert told["status"] == "missed"
    assert told["limits"][0]["met"] is False
    assert told["scores"]["uniformity_error"] is None


def test_a_limit_on_a_score_the_target_has_not_is_not_judged(monkeypatch, capsys):
    path = job(limits={"position_error": "<= 1 um"})
    status, out, _ = call(monkeypatch, capsys, "evaluate", path, "--json")
    assert (status, json.loads(out)["status"]) == (0, "not judged")
