"""A mask to a Result: light in float64, scores, limits, rule, and how it was made."""

import platform
import time
from dataclasses import replace
from importlib.metadata import version
from typing import Any

import jax
import jax.numpy as jnp
import numpy as np
from jaxtyping import Float, UInt8

from doe import __version__, machine
from doe.bound import bound
from doe.config import derived, load
from doe.config.advice import warnings
from doe.config.made_part import Errors
from doe.config.schema import Config
from doe.errors import ConfigError, Fault
from doe.fabrication.as_made import made_layers, made_phase
from doe.fabrication.features import measure
from doe.fabrication.levels import layers_of, nearest_level
from doe.metrics import Scores, scores
from doe.optics.orders import order_numbers, order_table
from doe.optics.phasor import phasor
from doe.problem import DRAWN, wanted_of
from doe.result import FeatureReport, Mask, OrderTable, Result, Trace, judge_limits
from doe.targets import build
from doe.targets.spots import position_error

OFF_LEVEL = 1e-3  # rad; a phase further from every level is no relief of the config's levels


def evaluate(config: Config, text: str, phase: Float[np.ndarray, "y x"], errors: Errors) -> Result:
    """A mask from elsewhere scored as it is, made with `errors`.

    phase: rad. Error: ConfigError where an etch is in error and the mask has no etches.
    """
    begun = time.monotonic()
    mask = mask_as_given(phase, config)
    off_levels = config.element.levels > 0 and mask.levels is None
    if off_levels and any(errors.etch_depth):
        raise ConfigError(
            Fault(
                "the mask does not lie on the levels, so it has no single etches",
                "depth",
                "use `depth`, or a mask on the levels",
                key="--error",
            )
        )
    empty = np.zeros(0)
    trace = Trace(empty.astype(int), empty, empty, empty)
    result = finish(config, text, "evaluate", mask, trace, time.monotonic() - begun, errors)
    if not off_levels:
        return result
    note = "the mask lies off the levels of the config and is scored as it is"
    return replace(result, warnings=(*result.warnings, note))


def finish(
    config: Config,
    text: str,
    method: str,
    mask: Mask,
    trace: Trace,
    seconds: float,
    errors: Errors = DRAWN,
) -> Result:
    """A mask scored in float64, made with `errors`, and joined with all that a record holds."""
    table = order_powers(mask, config, errors)
    values = scores_of(table, config)
    target = build(config)
    features = () if mask.layers is None else measure(mask.layers, *derived.rule_pixels(config))
    return Result(
        config=config,
        config_text=text,
        method=method,
        mask=mask,
        features=features,
        orders=table,
        scores=values,
        bound=bound(
            target.m_y, target.m_x, target.share, config.element.pixels, config.element.levels
        ),
        limits=judge_limits(config.limits, values),
        trace=trace,
        warnings=(*rule_warnings(config, features), *warnings(config)),
        seconds=seconds,
        steps=config.solver.steps,
        made_by=made_by(config),
    )


def rule_warnings(config: Config, features: tuple[FeatureReport, ...]) -> list[str]:
    """What of the mask rule is left undone."""
    contacts = config.process.corner_contacts == "forbid"
    return [
        f"mask {number} breaks the rule: {found.breaches} pixels and, where forbidden, "
        f"{found.corner_contacts if contacts else 0} corner contacts; give the search more blocks"
        for number, found in enumerate(features, start=1)
        if not found.keeps_rule(contacts_forbidden=contacts)
    ]


def mask_of_phase(phase: Float[np.ndarray, "y x"], config: Config) -> Mask:
    """The relief drawn from a design phase [rad], rounded to the levels of the config."""
    count = config.element.levels
    turned = np.mod(phase.astype(float), 2 * np.pi)
    per_radian = derived.phase_height(config)
    if count == 0:
        return Mask(phase=turned, height=turned * per_radian, levels=None, layers=None)
    with jax.enable_x64(True):
        levels = np.asarray(nearest_level(jnp.asarray(turned), count)).astype(np.uint8)
    return Mask(phase=turned, **relief(levels, config))


def relief(levels: UInt8[np.ndarray, "y x"], config: Config) -> dict[str, Any]:
    """Levels, mask layers and height [m] of a relief."""
    count = config.element.levels
    height = levels * (2 * np.pi / count * derived.phase_height(config))
    return {"levels": levels, "layers": layers_of(levels, count), "height": height}


def mask_as_given(phase: Float[np.ndarray, "y x"], config: Config) -> Mask:
    """A mask from elsewhere, kept as it is: levels only where every phase lies on one."""
    rounded = mask_of_phase(phase, config)
    if rounded.levels is None:
        return rounded
    step = 2 * np.pi / config.element.levels
    off = np.abs(rounded.phase - rounded.levels * step)
    if np.minimum(off, 2 * np.pi - off).max() <= OFF_LEVEL:
        return rounded
    height = rounded.phase * derived.phase_height(config)
    return Mask(phase=rounded.phase, height=height, levels=None, layers=None)


def order_powers(mask: Mask, config: Config, errors: Errors) -> OrderTable:
    """Power of every addressed order of a mask made with `errors`, in float64."""
    target = build(config)
    rows, columns = config.element.pixels
    with jax.enable_x64(True):
        if mask.layers is not None:
            phase = made_layers(jnp.asarray(mask.layers), errors)
        else:
            phase = made_phase(jnp.asarray(mask.phase), errors)
        power = np.asarray(order_table(phasor(phase.astype(jnp.float64))))
    wanted = np.zeros((rows, columns))
    wanted[target.m_y + rows // 2, target.m_x + columns // 2] = target.share
    return OrderTable(order_numbers(rows), order_numbers(columns), power, wanted)


def scores_of(table: OrderTable, config: Config) -> dict[str, float | None]:
    """All scores of an order table by name; None where one does not apply, as without light."""
    with jax.enable_x64(True):
        found: Scores = scores(jnp.asarray(table.power), wanted_of(config))
    values: dict[str, float | None] = {
        name: float(value) if np.isfinite(value) else None
        for name, value in found._asdict().items()
    }
    values["position_error"] = position_error(config, build(config))
    return values


def made_by(config: Config) -> dict[str, str]:
    """Versions, seed and machine: what decides the bits of a result."""
    libraries = ("jax", "jaxlib", "numpy", "optax", "scipy", "h5py")
    return {
        "doe": __version__,
        "python": platform.python_version(),
        **{name: version(name) for name in libraries},
        "seed": str(config.run.seed),
        "threads": str(machine.cores()),
        "instruction_set": machine.instruction_set(),
        "config_digest": load.digest(config),
    }
