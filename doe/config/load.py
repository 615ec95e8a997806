"""TOML file to Config, or one error that tells every fault of the file."""

import hashlib
import json
from pathlib import Path
from typing import Any

from pydantic import TypeAdapter, ValidationError

from doe import machine, units
from doe.config import check, fit, toml
from doe.config.faults import schema_faults, shorten
from doe.config.schema import Config, Process
from doe.config.single import FWHM_TO_DIAMETER
from doe.config.toml import Document
from doe.errors import BudgetError, ConfigError, Fault
from doe.material import MATERIALS


def load(path: Path) -> tuple[Config, str]:
    """The job in a config file and the file's text.

    Error: ConfigError with every fault of the file; BudgetError where the pixels do not fit memory.
    """
    document = toml.read(path)
    faults: list[Fault] = []
    raw, shop = with_process_file(document, path, faults)
    sections = sound_sections(raw, document, faults)
    faults += [placed(trouble, document, shop) for trouble in check.run(sections)]
    if faults:
        raise ConfigError(
            *sorted(set(faults), key=lambda fault: (fault.line or 0, fault.key or ""))
        )
    config = resolve(Config.model_validate(raw))
    check_memory(config, document)
    return config, document.text


def check_designable(config: Config, path: Path) -> None:
    """Refuse to design where nothing is wanted. Error: ConfigError."""
    if config.target.kind == "none":
        raise ConfigError(
            Fault(
                "there is nothing to design: no target",
                "a unit cell with spots",
                "look at a mask with `doe evaluate`, or state a target",
                str(path),
                key="target.kind",
                value='"none"',
            )
        )


def from_record(text: str) -> Config:
    """The config that a record holds as resolved JSON, in SI numbers."""
    return Config.model_validate(json.loads(text), context={"resolved": True})


def resolved_json(config: Config) -> str:
    """A config as JSON in SI numbers, keys in the order of the schema."""
    return config.model_dump_json(by_alias=True)


def seeded(config: Config, seed: int | None) -> Config:
    """The config with another seed, unchanged for None."""
    if seed is None:
        return config
    return config.model_copy(update={"run": config.run.model_copy(update={"seed": seed})})


def digest(config: Config) -> str:
    """SHA-256 of the resolved config: two files with one digest are the same job."""
    return hashlib.sha256(resolved_json(config).encode()).hexdigest()


def resolve(config: Config) -> Config:
    """The config with its period and index filled in and its process file no longer needed."""
    period = fit.resolved_period(config.beam, config.element, config.plane, config.target)
    name = config.material.name
    index = MATERIALS[name].index(config.beam.wavelength) if name else config.material.index
    process, beam = config.process, config.beam
    diameter = beam.diameter or tuple(size * FWHM_TO_DIAMETER for size in beam.fwhm or ())
    gap = process.min_gap or process.min_feature
    return config.model_copy(
        update={
            "beam": beam.model_copy(update={"diameter": diameter}),
            "element": config.element.model_copy(update={"period": period}),
            "material": config.material.model_copy(update={"index": index}),
            "process": process.model_copy(update={"file": None, "min_gap": gap}),
        }
    )


def with_process_file(
    document: Document, path: Path, faults: list[Fault]
) -> tuple[dict[str, Any], Document | None]:
    """The tables with the process file's keys beneath the inline ones, and that file."""
    raw = dict(document.tables)
    inline = raw.get("process")
    if not isinstance(inline, dict) or not isinstance(inline.get("file"), str):
        return raw, None
    try:
        other = toml.read(path.parent / inline["file"])
        Process.model_validate(other.tables)
    except ConfigError as error:
        faults += error.faults
    except ValidationError as error:
        faults += schema_faults(error.errors(), other, prefix="process")
    else:
        raw["process"] = other.tables | inline
        return raw, other
    return raw, None


def sound_sections(raw: dict[str, Any], document: Document, faults: list[Fault]) -> dict[str, Any]:
    """The tables that are right by themselves; the faults of the others join `faults`."""
    bad: set[str] = set()
    try:
        Config.model_validate(raw)
    except ValidationError as error:
        bad = {str(detail["loc"][0]) for detail in error.errors()}
        faults += schema_faults(error.errors(), document, prefix="")
    sound = {}
    for name, field in Config.model_fields.items():
        if name in bad:
            continue
        if name in raw:
            sound[name] = section(name, raw[name])
        elif not field.is_required():
            sound[name] = field.default
    return sound


def section(name: str, table: Any) -> Any:
    """One table, known to be sound, as its model."""
    adapter: TypeAdapter[Any] = TypeAdapter(Config.model_fields[name].rebuild_annotation())
    return adapter.validate_python(table)


def placed(trouble: fit.Trouble, document: Document, shop: Document | None) -> Fault:
    """A fault of a check with file, line and value of its key; `shop` is the process file."""
    path = tuple(trouble.key.split("."))
    at = path
    if shop is not None and path[0] == "process" and document.at(path) is None:
        document, at = shop, path[1:]
    value = document.at(at)
    shown = None if value is None or isinstance(value, dict) else shorten(value)
    line = document.line_of(at)
    return Fault(
        trouble.problem, trouble.allowed, trouble.fix, document.file, line, trouble.key, shown
    )


def check_memory(config: Config, document: Document) -> None:
    """Refuse an element whose pixels need more memory than the budget."""
    rows, columns = config.element.pixels
    needed, budget = machine.memory_needed(rows * columns), machine.memory_budget()
    if needed <= budget:
        return
    side = int(machine.pixels_that_fit(budget) ** 0.5)
    raise BudgetError(
        Fault(
            f"the design needs {units.gigabytes(needed)}, the budget is {units.gigabytes(budget)}",
            f"at most {side} x {side} pixels here",
            "use fewer pixels or a machine with more memory",
            document.file,
            document.line_of(("element", "pixels")),
            "element.pixels",
            f"[{rows}, {columns}]",
        )
    )
