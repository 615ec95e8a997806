"""Errors a user can meet: what is wrong, where, what is allowed and what to do about it."""

from collections.abc import Iterable
from dataclasses import asdict, dataclass
from difflib import get_close_matches
from typing import Any


@dataclass(frozen=True)
class Fault:
    """One thing that is wrong; `key` is a config path such as `element.levels`."""

    problem: str
    allowed: str
    fix: str
    file: str | None = None
    line: int | None = None
    key: str | None = None
    value: str | None = None

    def __str__(self) -> str:
        place = self.file or ""
        if self.line is not None:
            place += f":{self.line}"
        name = self.key or ""
        if self.value is not None:
            name += f" = {self.value}"
        where = " ".join(part for part in (place, name) if part)
        head = f"{where}: {self.problem}" if where else self.problem
        return f"{head}; allowed: {self.allowed}; try: {self.fix}"


class DoeError(Exception):
    """Base of all errors shown without a traceback; `exit_code` is the process's status."""

    exit_code = 8

    def __init__(self, *faults: Fault) -> None:
        self.faults = faults
        super().__init__("\n".join(str(fault) for fault in faults))

    def as_json(self) -> dict[str, Any]:
        """The error as the JSON object that `--json` prints."""
        faults = [asdict(fault) for fault in self.faults]
        return {"status": "error", "exit": self.exit_code, "errors": faults}


class ConfigError(DoeError):
    """The config or another input is wrong."""

    exit_code = 3


class FileError(DoeError):
    """A file is damaged or does not fit."""

    exit_code = 4


class OutputError(DoeError):
    """The output is in use or already there."""

    exit_code = 5


class DiskError(DoeError):
    """The disk refuses: full, read-only or failing."""

    exit_code = 6


class BudgetError(DoeError):
    """The job needs more memory than there is."""

    exit_code = 7


class NumericalError(DoeError):
    """A number stopped being finite; `best` is the best design till then, where there is one."""

    exit_code = 8
    best: Any = None


def nearest(name: str, known: Iterable[str]) -> str | None:
    """The known name most like `name`, or None where nothing is close."""
    found = get_close_matches(name, list(known), n=1, cutoff=0.6)
    return found[0] if found else None


def listing(names: Iterable[str]) -> str:
    """Names as readable text: `a, b or c`."""
    words = list(names)
    return words[0] if len(words) == 1 else f"{', '.join(words[:-1])} or {words[-1]}"
