"""TOML text of a config file: read under limits, parsed, and every key found again by its line."""

import re
import stat
import tomllib
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from doe.errors import ConfigError, Fault

LARGEST = 256 * 1024  # bytes; a job fits in two
SHOWN = 160  # characters of a faulty line that are shown
DEEPEST = 16  # tables within tables; more makes the parser slow or recurse without end

PLACE = re.compile(r"\(at line (\d+), column (\d+)\)")

KeyPath = tuple[str, ...]


@dataclass(frozen=True)
class Document:
    """A parsed file: its name, text, tables, and the line of each key."""

    file: str
    text: str
    tables: dict[str, Any]
    lines: dict[KeyPath, int]

    def at(self, path: KeyPath) -> Any:
        """The value at a path of keys; None where there is none."""
        value: Any = self.tables
        for part in path:
            value = value.get(part) if isinstance(value, dict) else None
        return value

    def line_of(self, path: KeyPath) -> int | None:
        """Line of a key, or of the closest table or key around it; None where there is none."""
        for end in range(len(path), 0, -1):
            if path[:end] in self.lines:
                return self.lines[path[:end]]
        return None


def read(path: Path) -> Document:
    """The document in a file; raises ConfigError naming file and line."""
    return parse(read_text(path), str(path))


def parse(text: str, file: str) -> Document:
    """The document in a text; raises ConfigError naming file and line."""
    check_depth(text, file)
    try:
        lines = {path: found[0] for path, found in key_lines(text).items()}
        return Document(file, text, tomllib.loads(text), lines)
    except tomllib.TOMLDecodeError as error:
        raise ConfigError(syntax_fault(str(error), text, file)) from None
    except (RecursionError, ValueError):
        raise refusal(file, "a number or a nesting is too long to read", "shorten it") from None


def read_text(path: Path) -> str:
    """Text of a regular UTF-8 file of at most 256 KB, a byte-order mark at its start left out."""
    file = str(path)
    try:
        info = path.stat()
    except (OSError, ValueError):
        raise refusal(file, "there is no such file, or it cannot be read", "check path") from None
    if not stat.S_ISREG(info.st_mode):
        raise refusal(file, "this is not a regular file", "give the path of a TOML file")
    if info.st_size > LARGEST:
        raise refusal(file, f"the file has {info.st_size} bytes", "remove what is no config")
    try:
        return path.read_bytes().decode("utf-8-sig")
    except UnicodeDecodeError as error:
        raise refusal(file, f"byte {error.start} is not UTF-8", "save the file as UTF-8") from None
    except OSError as error:
        raise refusal(file, f"cannot be read: {error.strerror}", "check permissions") from None


def refusal(file: str, problem: str, fix: str) -> ConfigError:
    """The error of a file that is no config at all."""
    allowed = f"a TOML file of at most {LARGEST // 1024} KB, UTF-8, nested at most {DEEPEST} deep"
    return ConfigError(Fault(problem, allowed, fix, file=file))


def check_depth(text: str, file: str) -> None:
    """Refuse nesting and dotted keys beyond DEEPEST before the parser meets them."""
    bare = re.sub(r'"(?:[^"\\\n]|\\.)*"|\'[^\'\n]*\'|#[^\n]*', "", text)
    depth = 0
    for sign in re.findall(r"[\[\]{}]", bare):
        depth += 1 if sign in "[{" else -1
        if depth > DEEPEST:
            raise refusal(file, f"nested deeper than {DEEPEST}", "flatten the tables")
    if any(line.partition("=")[0].count(".") >= DEEPEST for line in bare.splitlines()):
        raise refusal(file, f"nested deeper than {DEEPEST} by a dotted key", "shorten the key")


def syntax_fault(message: str, text: str, file: str) -> Fault:
    """The parser's complaint with the line itself and a caret, or both lines of a double key."""
    place = PLACE.search(message)
    problem = PLACE.sub("", message).strip()
    if place is None:
        return Fault(f"TOML syntax: {problem}", "TOML 1.0", "mend the end of the file", file=file)
    line, column = int(place[1]), int(place[2])
    source = text.splitlines()[line - 1] if line <= len(text.splitlines()) else ""
    for path, found in key_lines(text).items():
        if len(found) > 1 and found[-1] <= line and "overwrite" in problem.lower():
            name = ".".join(path)
            problem = f"the key stands twice, in lines {found[0]} and {found[-1]}"
            return Fault(problem, "each key once", "remove one", file, found[-1], name)
    start = max(0, column - SHOWN // 2)
    part, caret = source[start : start + SHOWN], " " * (column - 1 - start) + "^"
    shown = f"TOML syntax: {problem}\n    {part}\n    {caret}\n"
    return Fault(shown, "TOML 1.0", "mend this line", file=file, line=line)


def key_lines(text: str) -> dict[KeyPath, list[int]]:
    """Lines on which each table and key stands, by its path."""
    found: dict[KeyPath, list[int]] = {}
    table: KeyPath = ()
    for number, line in enumerate(text.splitlines(), start=1):
        bare = line.strip()
        if bare.startswith("[") and "]" in bare:
            table = split(bare.lstrip("[").partition("]")[0])
            found.setdefault(table, []).append(number)
        elif "=" in bare and not bare.startswith("#"):
            found.setdefault(table + split(bare.partition("=")[0]), []).append(number)
    return found


def split(dotted: str) -> KeyPath:
    """The parts of a dotted key."""
    return tuple(part.strip().strip("\"'") for part in dotted.split("."))
