"""Small jobs as config files, and the command line called in this process."""

import copy
import json
import sys
from pathlib import Path
from typing import Any

import numpy as np

from doe.cli import main

ROOT = Path(__file__).parent.parent

SMALL_JOB: dict[str, Any] = {
    "title": "Test bench",
    "beam": {"wavelength": "633 nm", "diameter": "5 mm"},
    "element": {
        "kind": "unit-cell",
        "period": "640 um",
        "pixels": 32,
        "levels": 8,
        "aperture": "10 mm",
    },
    "material": {"index": 1.5},
    "plane": {"kind": "angles"},
    "target": {"kind": "grid", "shape": [3, 3]},
    "solver": {
        "methods": ["gradient"],
        "starts": 2,
        "hops": 0,
        "refine": False,
        "steps": 40,
    },
}


def job(**changes: Any) -> Path:
    """Write the small job with changed tables, `table__key=value`, None removing a key."""
    tables = copy.deepcopy(SMALL_JOB)
    for name, value in changes.items():
        table, _, key = name.partition("__")
        if not key:
            tables[table] = value
        elif value is None:
            tables[table].pop(key, None)
        else:
            tables.setdefault(table, {})[key.replace("__", ".")] = value
    path = Path("job.toml")
    path.write_text(toml(tables))
    return path


def toml(tables: dict[str, Any]) -> str:
    """Tables of plain values as TOML."""
    top = [f"{key} = {json.dumps(v)}" for key, v in tables.items() if not isinstance(v, dict)]
    for name, table in tables.items():
        if isinstance(table, dict):
            top += [f"[{name}]"] + [f"{key} = {json.dumps(v)}" for key, v in table.items()]
    return "\n".join(top) + "\n"


def call(monkeypatch, capsys, *words: object) -> tuple[int, str, str]:
    """Exit status, stdout and stderr of a `doe` command."""
    monkeypatch.setattr(sys, "argv", ["doe", *map(str, words)])
    try:
        main()
    except SystemExit as end:
        status = end.code
    out, err = capsys.readouterr()
    return status, out, err


def evaluate(monkeypatch, capsys, mask: np.ndarray | None, *options: str, **changes: Any):
    """The JSON of `doe evaluate` for a mask under the small job with changes."""
    config = job(**changes)
    words = [config]
    if mask is not None:
        np.save("mask.npy", mask)
        words.append("mask.npy")
    status, out, err = call(monkeypatch, capsys, "evaluate", *words, *options, "--json")
    assert status in (0, 1), err
    return json.loads(out)


def power_of(result: dict[str, Any], m_y: int, m_x: int) -> float:
    """Power of one order in the JSON of a result; 0 where it is too weak to be listed."""
    found = [o["power"] for o in result["orders"] if (o["m_y"], o["m_x"]) == (m_y, m_x)]
    return found[0] if found else 0.0
