"""Ask for the faults of a document."""

from typing import Any

import pytest

from schemas.problems import Fault, InvalidRequest
from schemas.reading import read_job


def faults_of(document: Any) -> tuple[Fault, ...]:
    """Return what is wrong with a document; nothing for a valid one."""
    try:
        read_job(document)
    except InvalidRequest as refused:
        return refused.faults
    return ()


def faults_named(document: Any) -> set[tuple[str, str]]:
    """Return pointers and codes of an invalid document; fails where one of them is named twice."""
    with pytest.raises(InvalidRequest) as refused:
        read_job(document)
    named = [(fault.pointer, fault.code) for fault in refused.value.faults]
    assert len(named) == len(set(named)), named
    return set(named)
