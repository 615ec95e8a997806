"""Imports run one way: a room imports only from a lower rank or from itself."""

import ast
import subprocess
import sys

import pytest
from helpers import ROOT

LAYERS = [
    "errors sampling machine",
    "units files",
    "material",
    "config",
    "result",
    "targets bound direct_sum",
    "store",
    "optics fabrication",
    "metrics",
    "problem",
    "solvers scoring planes",
    "pipeline referee",
    "feasibility export signoff report",
    "cli",
]
RANK = {name: rank for rank, names in enumerate(LAYERS) for name in names.split()}
MAY_USE_JAX = {"optics", "fabrication", "metrics", "problem", "solvers", "pipeline"}
MAY_USE_JAX |= {"scoring", "planes", "referee"}
DRY = sorted(set(RANK) - MAY_USE_JAX)
LIGHT = ["errors", "units", "sampling", "material", "machine", "files", "cli"]
HEAVY = {"jax", "optax", "numpy", "scipy", "h5py", "matplotlib", "gdstk", "numba", "rich"}


def imports_of(source: str) -> list[str]:
    """Dotted names a module imports, at its head or inside functions."""
    found = []
    for node in ast.walk(ast.parse(source)):
        if isinstance(node, ast.Import):
            found += [alias.name for alias in node.names]
        elif isinstance(node, ast.ImportFrom) and node.level == 0 and node.module:
            found += [f"{node.module}.{alias.name}" for alias in node.names]
    return found


def breaches(room: str, source: str) -> list[str]:
    """Imports of a module in `room` that run the wrong way, or load JAX where it may not be."""
    found = []
    for name in imports_of(source):
        first, *rest = name.split(".")
        other = rest[0] if rest else ""
        if first == "doe" and other in RANK and other != room and RANK[other] >= RANK[room]:
            found.append(name)
        if first in ("jax", "optax") and room not in MAY_USE_JAX:
            found.append(name)
    return found


MODULES = sorted((ROOT / "doe").rglob("*.py"))


@pytest.mark.parametrize("path", MODULES, ids=lambda p: str(p.relative_to(ROOT)))
def test_a_module_imports_only_from_below(path):
    parts = path.relative_to(ROOT / "doe").with_suffix("").parts
    if parts[0] in ("__init__", "__main__"):
        return
    assert breaches(parts[0], path.read_text()) == []


def test_a_planted_upward_import_is_caught():
    assert breaches("optics", "from doe.solvers import METHODS") == ["doe.solvers.METHODS"]
    assert breaches("store", "def f():\n    import jax") == ["jax"]


def loaded_by(code: str) -> set[str]:
    """Top-level packages in a fresh process after running `code`."""
    text = f"import sys\n{code}\nprint(*{{name.split('.')[0] for name in sys.modules}})"
    run = subprocess.run([sys.executable, "-c", text], capture_output=True, text=True, check=True)
    return set(run.stdout.splitlines()[-1].split())


@pytest.mark.parametrize("room", DRY)
def test_a_dry_room_does_not_load_jax(room):
    assert "jax" not in loaded_by(f"import pkgutil, doe.{room}")


def test_help_loads_no_heavy_library():
    code = "import contextlib, io, doe.cli\nsys.argv = ['doe', '--help']\n"
    code += "with contextlib.suppress(SystemExit), contextlib.redirect_stdout(io.StringIO()):\n"
    code += "    doe.cli.main()"
    assert loaded_by(code) & HEAVY == set()


def test_check_does_not_load_jax():
    config = ROOT / "configs" / "needle_mill.toml"
    code = "import contextlib, io, doe.cli\n"
    code += f"sys.argv = ['doe', 'check', {str(config)!r}]\n"
    code += "with contextlib.suppress(SystemExit), contextlib.redirect_stdout(io.StringIO()):\n"
    code += "    doe.cli.main()"
    loaded = loaded_by(code)
    assert "rich" in loaded, "the command did not run"
    assert "jax" not in loaded
