"""Made parts against the formulas of their errors."""

import jax
import jax.numpy as jnp
import numpy as np
import pytest
from helpers import evaluate, power_of

from doe.config.made_part import Errors
from doe.fabrication.as_made import made_layers, made_phase
from doe.fabrication.levels import layers_of

LEVEL = np.random.default_rng(8).integers(0, 8, (16, 16)).astype(np.uint8)
LAYERS = layers_of(LEVEL, 8)


def test_without_errors_layers_make_the_drawn_phase():
    phase = made_layers(jnp.asarray(LAYERS), Errors())
    np.testing.assert_allclose(phase, LEVEL * (2 * np.pi / 8), rtol=1e-6)


def test_each_etch_has_a_depth_error_of_its_own():
    """Phase = sum over m of pi / 2^(m-1) (1 + depth + depth_m), where the glass stands."""
    errors = Errors(depth=0.03, etch_depth=(0.02, -0.05, 0.1))
    expected = sum(LAYERS[m] * np.pi / 2**m * (1 + 0.03 + errors.etch_depth[m]) for m in range(3))
    with jax.enable_x64(True):
        phase = made_layers(jnp.asarray(LAYERS), errors)
    np.testing.assert_allclose(phase, expected, rtol=1e-12)


def test_a_relief_scales_as_a_whole():
    phase = jnp.linspace(0.0, 6.0, 12).reshape(3, 4)
    np.testing.assert_allclose(made_phase(phase, Errors(depth=-0.04)), phase * 0.96, rtol=1e-6)
    assert (made_phase(phase, Errors()) == phase).all()


@pytest.mark.parametrize("error", [0.0, 0.03, -0.1])
def test_a_binary_grating_made_too_deep_has_the_closed_form(error, monkeypatch, capsys):
    """Half the period pi (1 + e) deep: zero order sin^2(pi e / 2), orders 1 (2/pi)^2 cos^2.

    Source: the Fourier series of a two-level grating.
    """
    mask = np.zeros((32, 32), np.uint8)
    mask[:, 16:] = 1
    changes = {"element__levels": 2, "target": {"kind": "orders", "orders": [[0, 1], [0, -1]]}}
    option = ("--error", f"depth={error * 100} %")
    result = evaluate(monkeypatch, capsys, mask, *option, **changes)
    zero = np.sin(np.pi * error / 2) ** 2
    assert result["scores"]["zero_order"] == pytest.approx(zero, abs=1e-12)
    first = (2 / np.pi) ** 2 * np.cos(np.pi * error / 2) ** 2
    # The pixel's envelope and the series of 32 samples together are those of a sharp edge.
    assert power_of(result, 0, 1) == pytest.approx(first, rel=1e-9)


def test_an_error_of_the_only_etch_is_an_error_of_all(monkeypatch, capsys):
    mask = np.zeros((32, 32), np.uint8)
    mask[:, 16:] = 1
    changes = {"element__levels": 2}
    by_etch = evaluate(monkeypatch, capsys, mask, "--error", "depth_1=4%", **changes)
    by_whole = evaluate(monkeypatch, capsys, mask, "--error", "depth=4%", **changes)
    assert by_etch["scores"]["zero_order"] == pytest.approx(by_whole["scores"]["zero_order"])
    assert by_etch["scores"]["zero_order"] == pytest.approx(np.sin(0.02 * np.pi) ** 2)
