"""Settings for all tests: CPU only, no silent promotion of ranks, array shapes checked."""

from pathlib import Path

import jax
import jaxtyping
import pytest

PACKAGE = Path(__file__).parent.parent / "doe"

# Every module but those compiled by numba, which cannot compile a wrapped function.
CHECKED = [
    ".".join(path.relative_to(PACKAGE.parent).with_suffix("").parts)
    for path in PACKAGE.rglob("*.py")
    if path.name != "__init__.py" and path.parent.name != "search"
]
jaxtyping.install_import_hook(CHECKED, "shapes.checker")

jax.config.update("jax_platforms", "cpu")
jax.config.update("jax_numpy_rank_promotion", "raise")


@pytest.fixture(autouse=True)
def _in_a_folder_of_its_own(tmp_path, monkeypatch):
    """No test can leave anything in the tree."""
    monkeypatch.chdir(tmp_path)
