"""Wanted patterns: `build` makes the arrays of any kind of target there is."""

from collections.abc import Callable
from typing import Any

from doe.config.schema import Config
from doe.config.target import Angles, Grid, OrderList
from doe.targets.spots import SpotTarget, spots

BUILDERS: dict[type, Callable[[Config, Any], SpotTarget]] = {
    Grid: spots,
    OrderList: spots,
    Angles: spots,
}


def build(config: Config) -> SpotTarget:
    """The wanted pattern of a job as NumPy arrays."""
    return BUILDERS[type(config.target)](config, config.target)
