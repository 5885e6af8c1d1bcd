"""Read what stands in the path, the query and the headers; whatever is not known is refused, never passed over."""

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import Any

from werkzeug.datastructures import MultiDict

from service.web.problems import HttpProblem, InputFault, invalid_parameters, malformed_header

ID_PATTERN = "^[A-Za-z0-9][A-Za-z0-9._-]{0,63}$"
_ID = re.compile(ID_PATTERN.removesuffix("$") + r"\Z")
_QUOTED_KEY = re.compile(r'"((?:[ !#-\[\]-~]|\\["\\]){1,255})"')
_BARE_KEY = re.compile(r"[A-Za-z0-9!#$%&'*+.^_`|~:/=-]{1,255}")
_WAIT = re.compile(r'wait[ \t]*=[ \t]*"?([0-9]{1,9})"?[ \t]*(?:;.*)?', re.IGNORECASE | re.DOTALL)


@dataclass(frozen=True)
class Parameter:
    """A parameter of a query: how it is written, and how it is read. `read` raises `ValueError` with a detail."""

    name: str
    description: str
    schema: Mapping[str, Any]
    read: Callable[[str], Any] = str
    default: Any = None
    repeatable: bool = field(default=False)


def read_query(given: "MultiDict[str, str]", known: tuple[Parameter, ...]) -> dict[str, Any]:
    """Read a query; raises HttpProblem (422) for unknown, repeated and invalid parameters, all at once."""
    by_name = {parameter.name: parameter for parameter in known}
    faults = [_unknown(name, by_name) for name in given if name not in by_name]
    found: dict[str, Any] = {}
    for parameter in known:
        texts = given.getlist(parameter.name)
        if len(texts) > 1 and not parameter.repeatable:
            faults.append(InputFault("parameter", parameter.name, "duplicate", "is given more than once"))
            continue
        try:
            values = [parameter.read(text) for text in texts]
        except ValueError as fault:
            faults.append(InputFault("parameter", parameter.name, "out-of-range", str(fault)))
            continue
        found[parameter.name] = values if parameter.repeatable else values[0] if values else parameter.default
    if faults:
        raise invalid_parameters(faults)
    return found


def _unknown(name: str, known: Mapping[str, Parameter]) -> InputFault:
    offered = ", ".join(f"`{name}`" for name in known) or "none"
    return InputFault("parameter", name[:100], "unknown-field", f"is no parameter here; offered: {offered}")


def read_limit(text: str) -> int:
    """Read how many entries of a list are asked for."""
    if not re.fullmatch(r"[0-9]{1,4}", text, re.ASCII) or not 1 <= int(text) <= 100:
        raise ValueError("must be a whole number from 1 to 100")
    return int(text)


def read_flag(text: str) -> bool:
    """Read a truth value."""
    if text not in ("true", "false"):
        raise ValueError("must be true or false")
    return text == "true"


def read_id(text: str) -> str:
    """Read an id."""
    if not is_id(text):
        raise ValueError(f"does not match the pattern {ID_PATTERN}")
    return text


def is_id(text: object) -> bool:
    """Tell whether a value is written as an id."""
    return isinstance(text, str) and _ID.match(text) is not None


def require_id(text: str) -> str:
    """Take an id from the path; raises HttpProblem (422) where it is none."""
    if not is_id(text):
        fault = InputFault("parameter", "id", "bad-format", f"does not match the pattern {ID_PATTERN}")
        raise invalid_parameters([fault])
    return text


def one_of(*words: str) -> Callable[[str], str]:
    """Read one of some words."""

    def read(text: str) -> str:
        if text not in words:
            raise ValueError(f"must be one of {', '.join(words)}")
        return text

    return read


def at_most(characters: int) -> Callable[[str], str]:
    """Read a text of limited length."""

    def read(text: str) -> str:
        if len(text) > characters:
            raise ValueError(f"longer than the limit in characters of {characters}")
        return text

    return read


def seconds_to_wait(prefer: str, longest: int) -> int | None:
    """Read `wait=N` of a `Prefer` header (RFC 7240), cut to the longest wait; other preferences are passed over."""
    for preference in prefer.split(","):
        if found := _WAIT.fullmatch(preference.strip()):
            return min(int(found[1]), longest)
    return None


def idempotency_key(header: str | None) -> str | None:
    """Read an `Idempotency-Key`: a quoted string, or the bare token; raises HttpProblem (400) for anything else."""
    if header is None:
        return None
    text = header.strip()
    if quoted := _QUOTED_KEY.fullmatch(text):
        return re.sub(r"\\(.)", r"\1", quoted[1])
    if _BARE_KEY.fullmatch(text):
        return text
    raise malformed_header("Idempotency-Key", "must be one quoted string of 1 to 255 printable characters")


def require_host(host: str | None, protocol: str, allowed: tuple[str, ...]) -> None:
    """Refuse a request without a well-formed `Host`, or for a host that is not served here."""
    if host is None:
        if protocol != "HTTP/1.0":
            raise HttpProblem("bad-request", "the `Host` header is missing")
        return
    found = re.fullmatch(r"(\[[0-9A-Fa-f:.]{2,45}\]|[A-Za-z0-9._-]{1,255})(:[0-9]{1,5})?", host)
    if not found:
        raise HttpProblem("bad-request", "the `Host` header is not well-formed")
    if allowed and found[1].lower() not in allowed:
        raise HttpProblem("bad-request", "the `Host` named is not served here")
