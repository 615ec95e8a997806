"""What README and guide say can be done."""

import re
import shlex
import tomllib
from pathlib import Path

import pytest
from helpers import ROOT, call

README = (ROOT / "README.md").read_text()
BLOCK = re.search(r"```\n(doe new.*?)```", README, re.DOTALL)[1]
COMMANDS = [line.partition("#")[0].strip() for line in BLOCK.splitlines()]


def test_the_two_commands_are_single_lines_and_ci_runs_the_second():
    first, second = re.findall(r"```\n(python3 -m venv.*?)\n```", README)
    assert first.endswith(".venv/bin/doe run configs/needle_mill.toml")
    assert second.endswith(".venv/bin/python -m pytest")
    script = (ROOT / ".ci" / "run").read_text()
    install, test = second.rsplit(" && ", 1)
    assert install in script
    assert test in script


def test_every_command_has_its_line_in_the_readme():
    from doe.cli import doe

    assert {command.split()[1] for command in COMMANDS} == set(doe.commands)


def test_every_picture_and_config_named_in_the_readme_is_there():
    for name in re.findall(r"(?:configs|experiments)/[\w/]+\.(?:toml|png)", README):
        assert (ROOT / name).is_file(), name


@pytest.mark.parametrize("path", sorted((ROOT / "configs").glob("*.toml")), ids=lambda p: p.stem)
def test_every_config_passes_its_check(path, monkeypatch, capsys):
    tomllib.loads(path.read_text())
    status, _, err = call(monkeypatch, capsys, "check", path, "--json")
    assert status == 0, err


@pytest.mark.slow
def test_the_commands_of_the_readme_run_one_after_the_other(monkeypatch, capsys):
    """Word for word, with a mask that the line on `evaluate` supposes to be there."""
    import numpy as np

    for command in COMMANDS:
        _, *words = shlex.split(command)
        np.save("mask.npy", np.zeros((128, 128), np.uint8))
        status, _, err = call(monkeypatch, capsys, *words, "--quiet")
        assert status == (1 if words[0] == "evaluate" else 0), (command, err)
        assert "Traceback" not in err
    assert Path("job/foundry/mask.gds").is_file()
