"""Settings for all tests: CPU only, no silent promotion of ranks."""

import jax
import pytest

jax.config.update("jax_platforms", "cpu")
jax.config.update("jax_numpy_rank_promotion", "raise")


@pytest.fixture(autouse=True)
def _in_a_folder_of_its_own(tmp_path, monkeypatch):
    """No test can leave anything in the tree."""
    monkeypatch.chdir(tmp_path)
