"""The command line: exit status, output for programs, stopping and going on."""

import csv
import io
import json
import os
import signal
import subprocess
import sys
from contextlib import redirect_stderr, redirect_stdout
from pathlib import Path
from typing import Any

import click
import h5py
import numpy as np
import pytest
from helpers import ROOT, call, job

from doe.cli import doe, main
from doe.cli.new import KINDS

COMMANDS = sorted(doe.commands)
LIMITS = {"efficiency": ">= 30 %", "uniformity_error": "<= 99 %"}
SCORES = {
    "efficiency",
    "efficiency_with_surfaces",
    "hottest_to_mean",
    "position_error",
    "rms_error",
    "stray",
    "uniformity_error",
    "worst_stray_to_mean",
    "zero_order",
    "zero_order_to_mean",
}


def quiet_call(*words: object) -> tuple[int, str, str]:
    """Exit status, stdout and stderr of a command, where no fixture is at hand."""
    out, err = io.StringIO(), io.StringIO()
    with pytest.MonkeyPatch.context() as patch, redirect_stdout(out), redirect_stderr(err):
        patch.setattr(sys, "argv", ["doe", *map(str, words)])
        with pytest.raises(SystemExit) as end:
            main()
    return end.value.code, out.getvalue(), err.getvalue()


def strict(text: str) -> dict[str, Any]:
    """The one JSON object in a text; NaN and infinities are no JSON."""

    def refuse(name: str) -> None:
        raise AssertionError(f"{name} is no JSON")

    found = json.loads(text, parse_constant=refuse)
    assert isinstance(found, dict)
    return found


@pytest.fixture(scope="module")
def finished(tmp_path_factory) -> tuple[Path, dict[str, Any]]:
    """The folder of a finished run and the JSON it printed."""
    folder = tmp_path_factory.mktemp("finished")
    before = os.getcwd()
    os.chdir(folder)
    try:
        job(element__pixels=16, limits=LIMITS)
        status, out, err = quiet_call("run", "job.toml", "--out", "out", "--json")
        assert status == 0, err
        return folder, strict(out)
    finally:
        os.chdir(before)


@pytest.mark.parametrize("command", COMMANDS)
def test_the_help_of_every_command_has_an_example_that_parses(command, monkeypatch, capsys):
    status, out, _ = call(monkeypatch, capsys, command, "--help")
    assert status == 0
    example = out[out.index("Example: ") + len("Example: ") :].split()
    assert example[:2] == ["doe", command]
    found = doe.commands[command]
    with click.Context(found) as context:
        found.parse_args(context, example[2:])
    for option in ("--json", "--quiet", "--no-color"):
        assert option in out


def test_the_help_lists_commands_and_exit_status(monkeypatch, capsys):
    status, out, _ = call(monkeypatch, capsys, "--help")
    assert status == 0
    for command in COMMANDS:
        assert command in out
    for number in ("3 config", "8 numerical", "130"):
        assert number in " ".join(out.split())


@pytest.mark.parametrize("kind", KINDS)
def test_every_starter_passes_the_check(kind, monkeypatch, capsys):
    assert call(monkeypatch, capsys, "new", kind, "-o", "mine.toml")[0] == 0
    status, _, err = call(monkeypatch, capsys, "check", "mine.toml", "--json")
    assert (status, err) == (0, "")
    _, out, _ = call(monkeypatch, capsys, "new", kind)
    assert out == Path("mine.toml").read_text()
    assert strict(call(monkeypatch, capsys, "new", kind, "--json")[1])["text"] == out


@pytest.mark.parametrize("path", sorted((ROOT / "configs").glob("*.toml")), ids=lambda p: p.stem)
def test_every_example_config_passes_the_check(path, monkeypatch, capsys):
    status, _, err = call(monkeypatch, capsys, "check", path)
    assert (status, err) == (0, "")


@pytest.mark.parametrize(
    "words",
    [
        ["nonsense"],
        ["check"],
        ["check", "job.toml", "--nonsense"],
        ["run", "job.toml", "--seed", "-1"],
        ["run", "job.toml", "--seed", str(2**32)],
        ["new", "gird"],
        ["evaluate", "job.toml", "--as", "depth"],
    ],
    ids=" ".join,
)
def test_a_wrong_command_line_exits_with_2(words, monkeypatch, capsys):
    status, out, err = call(monkeypatch, capsys, *words)
    assert (status, out) == (2, "")
    assert "error: " in err
    assert "Traceback" not in err
    status, out, _ = call(monkeypatch, capsys, *words, "--json")
    told = strict(out)
    assert (status, told["status"], told["exit"]) == (2, "error", 2)
    assert set(told["errors"][0]) == {
        "file", "line", "key", "value", "problem", "allowed", "fix",
    }  # fmt: skip


def test_a_limit_missed_exits_with_1_and_met_with_0(monkeypatch, capsys):
    # The bare aperture leaves all the light in one of nine spots: a uniformity error of 1.
    for asked, expected, verdict in (("<= 90 %", 1, "missed"), ("<= 100 %", 0, "met")):
        path = job(limits={"uniformity_error": asked})
        status, out, _ = call(monkeypatch, capsys, "evaluate", path, "--json")
        told = strict(out)
        assert (status, told["status"]) == (expected, verdict)
        (limit,) = told["limits"]
        assert set(limit) == {"name", "limit", "value", "met"}
        assert (limit["name"], limit["met"]) == ("uniformity_error", verdict == "met")
    status, out, _ = call(monkeypatch, capsys, "evaluate", job(), "--json")
    assert (status, strict(out)["status"]) == (0, "not judged")


def test_a_limit_beyond_a_proved_bound_fails_the_check(monkeypatch, capsys):
    target = {"kind": "orders", "orders": [[0, 8]]}
    path = job(target=target, limits={"efficiency": ">= 95 %"})
    status, out, _ = call(monkeypatch, capsys, "check", path, "--json")
    told = strict(out)
    assert status == 1
    assert (told["feasible"], told["status"]) == (False, "missed")
    assert {"status", "warnings", "limits", "bound", "feasible"} <= set(told)


def test_a_pattern_without_any_light_has_null_scores(monkeypatch, capsys):
    """The bare aperture sends nothing into odd orders, so that no ratio to their mean exists."""
    path = job(target={"kind": "grid", "shape": [2, 2]})
    status, out, err = call(monkeypatch, capsys, "evaluate", path, "--json")
    assert status == 0, err
    scores = strict(out)["scores"]
    assert scores["efficiency"] == pytest.approx(0, abs=1e-12)
    assert scores["zero_order"] == pytest.approx(1)
    status, out, err = call(monkeypatch, capsys, "evaluate", path)
    assert status == 0, err
    assert "nan" not in out.lower()


def test_the_json_of_a_run_has_the_stated_keys(finished):
    _, told = finished
    keys = {
        "status",
        "record",
        "seconds",
        "seed",
        "warnings",
        "limits",
        "scores",
        "bound",
        "orders",
    }
    assert keys <= set(told)
    assert (told["status"], told["seed"], told["record"]) == ("met", 1, "out/record.h5")
    assert set(told["scores"]) == SCORES
    assert told["scores"]["position_error"] is None
    bound = told["bound"]
    assert {"efficiency", "levels_factor", "kind", "fraction_reached"} <= set(bound)
    reached = told["scores"]["efficiency"] / bound["efficiency"]
    assert bound["fraction_reached"] == pytest.approx(reached)
    wanted = [order for order in told["orders"] if order["target"] is not None]
    assert len(wanted) == 9
    assert sum(order["power"] for order in wanted) == pytest.approx(told["scores"]["efficiency"])
    assert all(order["power"] > 1e-4 or order["target"] for order in told["orders"])


def test_a_run_leaves_record_trace_and_picture_and_nothing_else(finished):
    folder, told = finished
    assert sorted(os.listdir(folder / "out")) == ["overview.png", "record.h5", "trace.jsonl"]
    lines = [strict(line) for line in (folder / "out/trace.jsonl").read_text().splitlines()]
    assert [line["step"] for line in lines] == [10, 20, 30, 40]
    with h5py.File(folder / "out/record.h5", "r") as file:
        np.testing.assert_allclose(
            file["trace/loss"][()], [line["loss"] for line in lines], rtol=1e-6
        )
        assert file["scores"].attrs["efficiency"] == told["scores"]["efficiency"]
        assert file["config"].attrs["given"] == (folder / "job.toml").read_text()


def test_resuming_a_finished_run_shows_its_verdict_and_leaves_its_bytes(finished, monkeypatch):
    folder, told = finished
    monkeypatch.chdir(folder)
    before = {path.name: path.read_bytes() for path in Path("out").iterdir()}
    status, out, err = quiet_call("run", "job.toml", "--out", "out", "--resume", "--json")
    assert (status, err) == (0, "")
    assert strict(out) == told
    assert {path.name: path.read_bytes() for path in Path("out").iterdir()} == before
    status, out, _ = quiet_call("run", "job.toml", "--out", "out", "--resume")
    assert status == 0
    assert "met" in out


def test_a_finished_run_is_not_repeated(finished, monkeypatch):
    folder, _ = finished
    monkeypatch.chdir(folder)
    status, out, err = quiet_call("run", "job.toml", "--out", "out", "--json")
    assert status == 5
    assert strict(out)["errors"][0]["file"] == "out/record.h5"
    assert err == ""


def test_resuming_with_another_config_is_refused(finished, monkeypatch):
    """Else the verdict of one job would be shown as that of another."""
    folder, _ = finished
    other = job(element__pixels=16, limits={"efficiency": ">= 99 %"}).resolve()
    monkeypatch.chdir(folder)
    status, _, err = quiet_call("run", other, "--out", "out", "--resume")
    assert status == 4
    assert "another config" in err


def test_another_seed_is_another_job(finished, monkeypatch):
    folder, _ = finished
    monkeypatch.chdir(folder)
    status, _, _ = quiet_call("run", "job.toml", "--out", "out", "--resume", "--seed", "2")
    assert status == 4


def test_the_record_evaluates_to_its_own_scores(finished, monkeypatch):
    folder, told = finished
    monkeypatch.chdir(folder)
    status, out, err = quiet_call("evaluate", "job.toml", "out/record.h5", "--json")
    assert status == 0, err
    again = strict(out)["scores"]
    for name, value in told["scores"].items():
        assert again[name] == (None if value is None else pytest.approx(value, rel=1e-12))


def test_the_record_is_exported(finished, monkeypatch, tmp_path):
    folder, _ = finished
    monkeypatch.chdir(folder)
    out_folder = tmp_path / "foundry"
    status, out, err = quiet_call("export", "out/record.h5", "--out", out_folder, "--json")
    assert (status, err) == (0, "")
    told = strict(out)
    assert {"status", "warnings", "limits", "files"} <= set(told)
    assert sorted(told["files"]) == sorted(str(path) for path in out_folder.iterdir())


def test_a_missing_record_is_told(monkeypatch, capsys):
    status, out, _ = call(monkeypatch, capsys, "export", "nowhere.h5", "--json")
    assert status == 4
    assert strict(out)["errors"][0]["file"] == "nowhere.h5"


def test_output_that_is_no_terminal_has_no_colours(finished, monkeypatch):
    folder, _ = finished
    monkeypatch.chdir(folder)
    for words in (["check", "job.toml"], ["run", "job.toml", "--out", "out", "--resume"]):
        assert "\x1b" not in quiet_call(*words)[1]


def test_a_title_with_markup_is_shown_as_it_stands(monkeypatch, capsys):
    path = job(title="[red]hot[/red] [link=x]y")
    status, out, _ = call(monkeypatch, capsys, "check", path)
    assert status == 0
    assert "[red]hot[/red] [link=x]y" in out


def test_a_comparison_holds_every_method(monkeypatch, capsys):
    methods = ["weighted", "gerchberg-saxton"]
    path = job(element__pixels=16, solver__methods=methods, limits=LIMITS)
    status, out, err = call(
        monkeypatch, capsys, "compare", path, "--out", "both", "--json", "--quiet"
    )
    assert (status, err) == (0, "")
    told = strict(out)
    assert {"status", "warnings", "limits", "methods"} <= set(told)
    assert [row["name"] for row in told["methods"]] == methods
    assert not any(row["refined"] for row in told["methods"]), "the job forbids it"
    for row in told["methods"]:
        assert {"name", "refined", "efficiency", "uniformity_error", "seconds", "steps"} <= set(row)
        with h5py.File(f"both/{row['name']}-as-published/record.h5", "r") as file:
            assert file["scores"].attrs["efficiency"] == row["efficiency"]
            assert file["made_by"].attrs["method"] == row["name"]
    table = list(csv.DictReader(Path("both/comparison.csv").read_text().splitlines()))
    assert [float(row["efficiency"]) for row in table] == [
        row["efficiency"] for row in told["methods"]
    ]
    best = max(told["methods"], key=lambda row: row["efficiency"])
    assert told["record"] == f"both/{best['name']}-as-published/record.h5"
    assert call(monkeypatch, capsys, "compare", path, "--out", "both")[0] == 5
    _, again, _ = call(monkeypatch, capsys, "compare", path, "--out", "both", "--resume", "--json")
    assert strict(again)["methods"] == told["methods"]


def levels_of(path: str) -> np.ndarray:
    """The levels in a record."""
    with h5py.File(path, "r") as file:
        return file["mask/levels"][()]


def stopped(path: Path, monkeypatch, capsys) -> tuple[int, str]:
    """Exit status and stderr of a run that gets Ctrl-C after its first chunk of 50 steps."""
    from doe.solvers import driver

    told = driver.tell

    def tell_and_stop(run: Any, plan: Any, hooks: Any) -> None:
        told(run, plan, hooks)
        os.kill(os.getpid(), signal.SIGINT)

    with monkeypatch.context() as patch:
        patch.setattr(driver, "tell", tell_and_stop)
        status, _, err = call(patch, capsys, "run", path, "--out", "out")
    return status, err


def test_a_stopped_run_goes_on_to_the_same_mask(monkeypatch, capsys):
    path = job(element__pixels=16, solver__steps=100, solver__methods=["weighted"])
    status, err = stopped(path, monkeypatch, capsys)
    assert status == 130
    assert "--resume" in err
    assert sorted(os.listdir("out")) == ["checkpoint.0", "stopped.h5"]
    status, _, err = call(monkeypatch, capsys, "run", path, "--out", "out", "--resume")
    assert status == 0, err
    assert sorted(os.listdir("out")) == ["overview.png", "record.h5", "trace.jsonl"]
    assert call(monkeypatch, capsys, "run", path, "--out", "whole")[0] == 0
    np.testing.assert_array_equal(levels_of("out/record.h5"), levels_of("whole/record.h5"))
    assert Path("out/trace.jsonl").read_bytes() == Path("whole/trace.jsonl").read_bytes()


def test_the_trace_of_a_stopped_run_ends_where_it_stopped(monkeypatch, capsys):
    path = job(element__pixels=16, solver__steps=100, solver__methods=["weighted"])
    stopped(path, monkeypatch, capsys)
    with h5py.File("out/stopped.h5", "r") as file:
        assert list(file["trace/step"]) == [10, 20, 30, 40, 50]
        assert (file["trace/efficiency"][()] > 0).all()


def process(*words: str, **options: Any) -> subprocess.Popen[str]:
    """A `doe` command as a process of its own."""
    return subprocess.Popen([sys.executable, "-m", "doe", *words], text=True, **options)


@pytest.mark.slow
@pytest.mark.parametrize(("number", "expected"), [(signal.SIGINT, 130), (signal.SIGTERM, 143)])
def test_a_signal_from_outside_stops_a_run_that_can_be_resumed(number, expected):
    job(element__pixels=16, solver__steps=100_000)
    code = "import sys; import doe.cli.session as s; s.PROGRESS_SECONDS = 0; import doe.cli\n"
    code += "sys.argv = ['doe', 'run', 'job.toml', '--out', 'out']; doe.cli.main()"
    with subprocess.Popen([sys.executable, "-c", code], stderr=subprocess.PIPE, text=True) as run:
        first = run.stderr.readline()
        run.send_signal(number)
        _, err = run.communicate(timeout=60)
    assert "efficiency" in first
    assert run.returncode == expected
    assert "Traceback" not in err
    assert {"stopped.h5", "checkpoint.0"} <= set(os.listdir("out"))


@pytest.mark.slow
def test_a_killed_run_goes_on_to_the_same_mask():
    """kill -9 leaves the last checkpoint whole and no lock behind."""
    job(element__pixels=16, solver__steps=3000)
    code = "import os, sys; import doe.cli.session as s; s.CHECKPOINT_SECONDS = 0; import doe.cli\n"
    code += "from doe.store import checkpoint as c\nplain = c.write\n"
    code += "def write(folder, turn, *rest):\n    plain(folder, turn, *rest)\n"
    code += "    turn == 7 and os.kill(os.getpid(), 9)\nc.write = write\n"
    code += "sys.argv = ['doe', 'run', 'job.toml', '--out', 'out']; doe.cli.main()"
    run = subprocess.run([sys.executable, "-c", code], capture_output=True, check=False)
    assert run.returncode == -9
    assert sorted(os.listdir("out")) == ["checkpoint.0", "checkpoint.1"]
    assert quiet_call("run", "job.toml", "--out", "out", "--resume")[0] == 0
    assert quiet_call("run", "job.toml", "--out", "whole")[0] == 0
    np.testing.assert_array_equal(levels_of("out/record.h5"), levels_of("whole/record.h5"))


@pytest.mark.parametrize("option", [[], ["--json"]], ids=["text", "json"])
def test_a_reader_that_has_gone_is_no_error(option):
    """As with `doe check job.toml | head -1`: nothing is left to tell, and nothing went wrong."""
    job()
    reader, writer = os.pipe()
    os.close(reader)
    with process("check", "job.toml", *option, stdout=writer, stderr=subprocess.PIPE) as run:
        os.close(writer)
        _, err = run.communicate(timeout=60)
    assert "Traceback" not in err
    assert "Exception ignored" not in err
    assert run.returncode == 0


def test_a_full_disk_behind_stdout_is_told_without_a_traceback():
    job()
    with (
        open("/dev/full", "w") as full,
        process("check", "job.toml", stdout=full, stderr=subprocess.PIPE) as run,
    ):
        _, err = run.communicate(timeout=60)
    assert "Traceback" not in err
    assert run.returncode == 6
