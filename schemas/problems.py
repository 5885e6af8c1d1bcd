"""Refusals: what is wrong with a request, where, and how that travels (RFC 9457, RFC 6901)."""

from collections.abc import Iterable
from dataclasses import dataclass
from typing import ClassVar, Literal, NamedTuple

from schemas.document import Answer

MAX_REPORTED_FAULTS = 100
LONGEST_ECHO = 100
"""No text of the caller's longer than this, in characters, is given back to them."""

ProblemType = Literal["malformed-json", "invalid-request", "unsupported"]

Code = Literal[
    # The text is no JSON document that two readers would read alike.
    "not-utf-8",
    "not-json",
    "duplicate-name",
    "number-too-large",
    "too-deep",
    "lone-surrogate",
    # A member on its own.
    "missing",
    "unknown-field",
    "wrong-type",
    "out-of-range",
    "too-large",
    "too-few",
    "too-long",
    "not-allowed",
    "bad-format",
    # Members together.
    "exactly-one",
    "wrong-length",
    "duplicate",
    "unknown-reference",
    "wrong-kind",
    "inconsistent",
    "off-border",
    "overlap",
    "coupled",
    "coupled",
    # Asked for by the contract, not offered by this version.
    "unsupported",
]
"""Stable words for what is wrong; `too-large` is a limit on counts, `out-of-range` one on a value."""


class ProblemMeaning(NamedTuple):
    """What a problem type stands for."""

    status: int
    title: str


PROBLEM_TYPES: dict[ProblemType, ProblemMeaning] = {
    "malformed-json": ProblemMeaning(400, "The body is not one JSON document"),
    "invalid-request": ProblemMeaning(422, "The request breaks a rule of the contract"),
    "unsupported": ProblemMeaning(422, "The request asks for what this version does not do yet"),
}


@dataclass(frozen=True)
class Fault:
    """One thing wrong with a request, at an RFC 6901 pointer into the document sent (absent there if `missing`)."""

    pointer: str
    code: Code
    detail: str


class Problem(Answer):
    """An error answer (RFC 9457); `type` is resolved against the service's own address."""

    type: str
    title: str
    status: int
    detail: str
    errors: list[Fault] = []
    errors_truncated: bool = False


class RefusedError(Exception):
    """A request that is not taken; `faults` holds everything found wrong with it, in reading order."""

    problem_type: ClassVar[ProblemType]

    def __init__(self, faults: Iterable[Fault]) -> None:
        self.faults = tuple(faults)
        super().__init__(self.faults)

    def __str__(self) -> str:
        shown = "; ".join(f"{fault.pointer or '(whole document)'}: {fault.detail}" for fault in self.faults[:3])
        return f"{shown}; and {len(self.faults) - 3} more" if len(self.faults) > 3 else shown

    def problem(self) -> Problem:
        """Write the refusal as an error answer, with the first 100 faults."""
        meaning = PROBLEM_TYPES[self.problem_type]
        count = len(self.faults)
        is_cut = count > MAX_REPORTED_FAULTS
        several = f"{count} faults were found" if not is_cut else f"the first {MAX_REPORTED_FAULTS} faults are listed"
        return Problem(
            type=f"/problems/{self.problem_type}",
            title=meaning.title,
            status=meaning.status,
            detail=self.faults[0].detail if count == 1 else several,
            errors=list(self.faults[:MAX_REPORTED_FAULTS]),
            errors_truncated=is_cut,
        )


class MalformedJson(RefusedError):  # noqa: N818 - a word of the contract's own problem types
    """The body is not one JSON document that every reader would read alike."""

    problem_type = "malformed-json"


class InvalidRequest(RefusedError):  # noqa: N818 - a word of the contract's own problem types
    """The document breaks a rule of the contract."""

    problem_type = "invalid-request"


class Unsupported(RefusedError):  # noqa: N818 - a word of the contract's own problem types
    """The document is valid, but asks for what this version does not do yet."""

    problem_type = "unsupported"


def pointer(*parts: str | int) -> str:
    """Join the steps to a place in a document into an RFC 6901 pointer; no steps: the document itself.

    >>> pointer("fleet", "assets", 3, "a/b~c")
    '/fleet/assets/3/a~1b~0c'
    """
    return "".join(f"/{str(part).replace('~', '~0').replace('/', '~1')}" for part in parts)


def shown(text: str) -> str:
    """Quote a text of the caller's in a message, unless it is too long to give back."""
    return f"`{text}`" if len(text) <= LONGEST_ECHO else f"a name of {len(text)} characters"
