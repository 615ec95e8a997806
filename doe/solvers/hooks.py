"""What the loops ask of their caller, who alone touches files and the screen."""

from collections.abc import Callable
from typing import Any, NamedTuple

from numpy.typing import NDArray

Saved = tuple[dict[str, Any], list[NDArray[Any]]]


class Hooks(NamedTuple):
    """Saving, stopping and progress of a loop; `saved` is where a stopped one goes on from."""

    saved: Saved | None
    save: Callable[[dict[str, Any], list[NDArray[Any]]], None]
    save_is_due: Callable[[], bool]
    stop: Callable[[], bool]
    report: Callable[[str, float, float, float], None]  # stage, share done, efficiency, U
