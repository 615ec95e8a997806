"""Everything an export holds, and the manifest that says what each file is."""

import json
from typing import Any

from doe import files, units
from doe.config import derived
from doe.errors import ConfigError, Fault
from doe.export import height, layout, orders
from doe.result import Result

MANIFEST = "manifest.json"


def contents(result: Result, form: layout.Form) -> dict[str, bytes]:
    """Name and bytes of each file, the manifest last. Error: ConfigError without binary layers."""
    if result.mask.layers is None:
        raise ConfigError(
            Fault(
                "a continuous profile has no binary mask layers",
                "a record with 2, 4, 8 or 16 levels",
                "set element.levels and run the design again",
                key="element.levels",
                value=str(result.config.element.levels),
            )
        )
    package = {
        layout.NAMES[form]: layout.layout(result, form),
        height.NAME: height.height_tiff(result),
        orders.NAME: orders.order_csv(result),
    }
    hashes = {name: files.sha256(data) for name, data in package.items()}
    text = json.dumps(manifest(result, hashes), indent=2, allow_nan=False) + "\n"
    return package | {MANIFEST: text.encode()}


def manifest(result: Result, hashes: dict[str, str]) -> dict[str, Any]:
    """What a mask shop must know: meaning of each layer, sizes in m, orientation, hashes."""
    config = result.config
    place = layout.placement_of(config)
    depths = enumerate(derived.layer_depths(config), start=1)
    return {
        "title": config.title,
        "config_digest": result.made_by["config_digest"],
        "layers": [
            {
                "layer": etch,
                "datatype": 0,
                "etch": etch,
                "depth_m": depth,
                "drawn": config.process.drawn,
                "meaning": meaning(config.process.drawn),
            }
            for etch, depth in depths
        ],
        "period_m": [units.from_nm(length) for length in place.period],
        "period_rounding_m": [
            units.from_nm(length) - wanted if count > 1 else 0.0
            for length, wanted, count in zip(
                place.period, derived.period(config), config.element.pixels, strict=True
            )
        ],
        "pixel_pitch_m": list(derived.pixel_pitch(config)),
        "pixels": list(config.element.pixels),
        "copies": list(place.copies),
        "row_0": "smallest y",
        "axes": "pairs are (y, x); y up, seen from the structured side",
        "orientation": {
            "layer": layout.ORIENTATION_LAYER,
            "mark": "a letter F beyond the upper right corner, readable and upright",
        },
        "cells": {"top": "ELEMENT", "unit": "UNIT_CELL"},
        "files": hashes,
    }


def meaning(drawn: str) -> str:
    """The polarity of a layer in words."""
    if drawn == "etched":
        return "what is drawn is etched, what is not drawn stays"
    return "what is drawn stays standing, what is not drawn is etched"
