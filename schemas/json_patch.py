"""Apply a JSON Patch (RFC 6902) to a document: the three operations that a repair is written in.

Places are JSON Pointers (RFC 6901): `/a/0/b`, with `~1` for a slash and `~0` for a tilde within a name.
"""

from collections.abc import Iterable, Mapping
from copy import deepcopy
from typing import Any

AFTER_THE_LAST = "-"


class PatchRefused(ValueError):  # noqa: N818 - says what it is
    """The patch does not fit the document; the message says which operation, and why."""


def patched(document: Any, patch: Iterable[Mapping[str, Any]]) -> Any:
    """Return the document as the operations leave it, one after the other; what was given stays as it is.

    Raises PatchRefused at the first operation that cannot be applied: then there is no half of it.
    """
    changed = deepcopy(document)
    for operation in patch:
        try:
            changed = _applied(changed, operation)
        except (KeyError, IndexError, TypeError, ValueError) as fault:
            raise PatchRefused(f"{dict(operation)} does not fit: {fault}") from fault
    return changed


def _applied(document: Any, operation: Mapping[str, Any]) -> Any:
    name, steps = operation["op"], _steps(operation["path"])
    if name not in ("add", "replace", "remove"):
        raise ValueError(f"`{name}` is none of add, replace and remove")
    value = None if name == "remove" else deepcopy(operation["value"])
    if not steps:
        return value
    *parents, last = steps
    here = document
    for step in parents:
        here = here[_key(here, step)]
    if name == "add" and isinstance(here, list):
        here.insert(len(here) if last == AFTER_THE_LAST else _index(last, len(here)), value)
        return document
    key = last if name == "add" else _key(here, last)
    if name == "remove":
        del here[key]
    else:
        here[key] = value
    return document


def _steps(pointer: str) -> list[str]:
    """Read a pointer; the empty one is the whole document."""
    if pointer and not pointer.startswith("/"):
        raise ValueError(f"`{pointer}` is no JSON Pointer")
    return [step.replace("~1", "/").replace("~0", "~") for step in pointer.split("/")[1:]]


def _key(here: Any, step: str) -> str | int:
    """Name a member that is there."""
    if isinstance(here, list):
        return _index(step, len(here) - 1)
    if step not in here:
        raise KeyError(step)
    return step


def _index(step: str, most: int) -> int:
    """Read a place in a list: digits without a leading zero (RFC 6901, section 4)."""
    if not (step.isascii() and step.isdigit()) or (step[0] == "0" and step != "0"):
        raise ValueError(f"`{step}` is no place in a list")
    if int(step) > most:
        raise IndexError(f"there is no place {step}")
    return int(step)
