"""What the schema found wrong, told as faults: problem, allowed values and what to do."""

from collections.abc import Callable
from typing import Any, get_args

from pydantic import BaseModel
from pydantic.fields import FieldInfo
from pydantic_core import ErrorDetails

from doe.config.schema import Config
from doe.config.toml import Document
from doe.errors import Fault, listing, nearest

Parts = tuple[str, str, str]  # problem, allowed, fix


def schema_faults(errors: list[ErrorDetails], document: Document, prefix: str) -> list[Fault]:
    """Every error of a validation, with file, line, key and value.

    prefix: the table the document holds, where it is not the whole config ("process").
    """
    faults = [schema_fault(error, document, prefix) for error in errors]
    # One value that stands for a pair is wrong twice; it is told once.
    return list({(fault.line, fault.problem, fault.value): fault for fault in faults}.values())


def schema_fault(error: ErrorDetails, document: Document, prefix: str) -> Fault:
    """One error as a fault."""
    path = key_path(error["loc"], prefix)
    given = error["input"]
    if error["type"] == "union_tag_invalid":
        path, given = (*path, "kind"), given["kind"]
    found = path[1:] if prefix else path
    if found and found[-1].isdigit() and not isinstance(document.at(found[:-1]), list):
        path, found = path[:-1], found[:-1]  # one value that stands for a pair
    translate = TRANSLATORS.get(error["type"], plain)
    problem, allowed, fix = translate(error, path)
    show_value = error["type"] not in ("missing", "extra_forbidden")
    value = shorten(given) if show_value else None
    line = document.line_of(found)
    return Fault(problem, allowed, fix, document.file, line, ".".join(path), value)


def key_path(location: tuple[int | str, ...], prefix: str) -> tuple[str, ...]:
    """Config path of an error; the tag of a target kind, which pydantic adds, is left out."""
    path = ((prefix,) if prefix else ()) + location
    if len(path) > 1 and path[0] == "target" and path[1] in target_kinds():
        path = path[:1] + path[2:]
    return tuple(str(part) for part in path)


def shorten(value: Any) -> str:
    """A value as the user wrote it, cut to a line."""
    text = f'"{value}"' if isinstance(value, str) and value.isprintable() else repr(value)
    text = {"True": "true", "False": "false"}.get(text, text)
    return text if len(text) <= 60 else text[:57] + "..."


def target_kinds() -> dict[str, type[BaseModel]]:
    """The kinds of target and their models."""
    models: tuple[type[BaseModel], ...] = get_args(Config.model_fields["target"].annotation)
    return {get_args(model.model_fields["kind"].annotation)[0]: model for model in models}


def tables() -> dict[str, dict[str, FieldInfo]]:
    """The fields of each table, those of all target kinds together."""
    found: dict[str, dict[str, FieldInfo]] = {}
    for name, field in Config.model_fields.items():
        kind = field.annotation
        if name == "target":
            models = target_kinds().values()
            found[name] = {key: f for model in models for key, f in model.model_fields.items()}
        elif isinstance(kind, type) and issubclass(kind, BaseModel):
            found[name] = dict(kind.model_fields)
    return found


def names(fields: dict[str, FieldInfo]) -> list[str]:
    """Keys as they stand in a file."""
    return [field.alias or name for name, field in fields.items()]


def missing(error: ErrorDetails, path: tuple[str, ...]) -> Parts:
    """A required table or key that is not there."""
    if len(path) == 1 and path[0] in tables():
        needed = [name for name, field in Config.model_fields.items() if field.is_required()]
        return f"the section [{path[0]}] is missing", listing(needed), f"add [{path[0]}]"
    table = ".".join(path[:-1])
    return (
        "this key is required",
        "a value",
        f"add `{path[-1]} = ...`" + (f" to [{table}]" if table else " at the top of the file"),
    )


def unknown(error: ErrorDetails, path: tuple[str, ...]) -> Parts:
    """A table or key that does not exist: the nearest name, or the table it belongs in."""
    if len(path) == 1:
        known = list(Config.model_fields)
        what = "section or key"
    else:
        known = names(tables().get(path[0], {}))
        what = "key"
        if len(path) > 2:
            known = ["the options of this method"] if path[0] == "solver" else ["none below"]
    home = next((t for t, fields in tables().items() if path[-1] in names(fields)), None)
    guess = nearest(path[-1], known)
    if guess:
        fix = f"did you mean `{guess}`?"
    elif home and home != path[0]:
        fix = f"it belongs in [{home}]"
    else:
        fix = "remove it"
    return f"unknown {what} `{path[-1]}`", ", ".join(known), fix


def own(error: ErrorDetails, path: tuple[str, ...]) -> Parts:
    """An error that a field type of this project raised."""
    parts = error["ctx"]
    return parts["problem"], parts["allowed"], parts["fix"]


def choice(error: ErrorDetails, path: tuple[str, ...]) -> Parts:
    """A text that is none of the listed ones."""
    context = error["ctx"]
    expected = str(context.get("expected") or context.get("expected_tags"))
    options = [word.strip(" '") for word in expected.replace(" or ", ",").split(",")]
    given = error["ctx"].get("tag", error["input"])
    guess = nearest(str(given), options)
    fix = f'did you mean "{guess}"?' if guess else "choose one of these"
    return "this choice does not exist", ", ".join(options), fix


def kind_missing(error: ErrorDetails, path: tuple[str, ...]) -> Parts:
    """A target without its kind."""
    kinds = list(target_kinds())
    return "the key `kind` is missing", listing(kinds), f'add `kind = "{kinds[0]}"`'


def bound(error: ErrorDetails, path: tuple[str, ...]) -> Parts:
    """A number outside its range."""
    text = error["msg"].replace("Input should be ", "")
    return "the value is out of range", text, "choose a value in this range"


def number(error: ErrorDetails, path: tuple[str, ...]) -> Parts:
    """Something that is no number of the right sort."""
    whole = "int" in error["type"]
    sort = "a whole number" if whole else "a number"
    return f"this is not {sort}", sort, "write it without quotes, true or false"


def empty(error: ErrorDetails, path: tuple[str, ...]) -> Parts:
    """A list without entries."""
    return "the list is empty", "at least one entry", "give one"


def plain(error: ErrorDetails, path: tuple[str, ...]) -> Parts:
    """Any other error, in the words of the schema."""
    text = error["msg"].replace("Input should be ", "")
    return "this does not fit here", text, "mend the value"


Translator = Callable[[ErrorDetails, tuple[str, ...]], Parts]

# Error types of the schema library and how each is told; all others are told as `plain`.
TRANSLATORS: dict[str, Translator] = {
    "missing": missing,
    "extra_forbidden": unknown,
    "field": own,
    "literal_error": choice,
    "union_tag_invalid": choice,
    "union_tag_not_found": kind_missing,
    "greater_than": bound,
    "greater_than_equal": bound,
    "less_than": bound,
    "less_than_equal": bound,
    "too_short": empty,
    "int_type": number,
    "int_from_float": number,
    "float_type": number,
    "finite_number": bound,
}
