"""Where in the document sent a fault of pydantic's lies: its `loc` turned into the steps of a JSON pointer.

A `loc` holds more than the steps: the tags of unions, and `[key]` behind a member name that is itself at fault. Both
could be a caller's member names too, so the contract's own types are followed along with the `loc`.
"""

from types import NoneType, UnionType
from typing import Annotated, Any, NamedTuple, Union, get_args, get_origin

from pydantic import Tag

from schemas.document import Document
from schemas.problems import LONGEST_ECHO

NAMES_ITSELF = {"extra_forbidden", "missing"}
"""Errors whose `loc` ends with the name of the member they speak of."""

_FAULTY_NAME = "[key]"


class Place(NamedTuple):
    """Steps from the document to a member, and the fields of the contract in the object that holds it."""

    steps: tuple[str | int, ...]
    fields: tuple[str, ...]


def place_of(contract: Any, loc: tuple[str | int, ...], kind: str) -> Place:
    """Follow `loc` through the types of `contract`; a name too long to be given back ends the steps before it."""
    steps: list[str | int] = []
    fields: tuple[str, ...] = ()
    inside = contract
    for position, part in enumerate(loc):
        branches = _tagged_branches(inside)
        if branches:
            inside = branches.get(str(part))
            continue
        last = position == len(loc) - 1
        if part == _FAULTY_NAME and last and kind not in NAMES_ITSELF:
            break
        fields, inside = _step(inside, part)
        if isinstance(part, str) and len(part) > LONGEST_ECHO:
            break
        steps.append(part)
    return Place(tuple(steps), fields)


def _step(inside: Any, part: str | int) -> tuple[tuple[str, ...], Any]:
    """Enter a member: the names its holder has fields for, and the type of what lies there."""
    kind = _bare(inside)
    if isinstance(kind, type) and issubclass(kind, Document):
        by_name = {field.alias or name: field for name, field in kind.model_fields.items()}
        field = by_name.get(str(part))
        return tuple(by_name), None if field is None else field.annotation
    arguments = get_args(kind)
    return (), arguments[-1] if arguments else None


def _bare(kind: Any) -> Any:
    """Strip notes and `| None`."""
    while get_origin(kind) is Annotated:
        kind = get_args(kind)[0]
    if get_origin(kind) in (Union, UnionType):
        others = [branch for branch in get_args(kind) if branch is not NoneType]
        if len(others) == 1:
            return _bare(others[0])
    return kind


def _tagged_branches(kind: Any) -> dict[str, Any]:
    """Branches of a union by their tags; none where there is no choice to be made."""
    kind = _bare(kind)
    if get_origin(kind) not in (Union, UnionType):
        return {}
    return {
        note.tag: branch
        for branch in get_args(kind)
        if get_origin(branch) is Annotated
        for note in get_args(branch)[1:]
        if isinstance(note, Tag)
    }
