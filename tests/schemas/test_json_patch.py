"""Patches are applied as RFC 6902 says, and as a library of others applies them."""

from copy import deepcopy
from typing import Any

import jsonpatch
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from schemas.json_patch import PatchRefused, patched

# RFC 6902, appendix A, with the number of each example.
EXAMPLES: dict[str, tuple[Any, tuple[Any, ...], Any]] = {
    "A.1": ({"foo": "bar"}, ("add", "/baz", "qux"), {"baz": "qux", "foo": "bar"}),
    "A.2": ({"foo": ["bar", "baz"]}, ("add", "/foo/1", "qux"), {"foo": ["bar", "qux", "baz"]}),
    "A.3": ({"baz": "qux", "foo": "bar"}, ("remove", "/baz"), {"foo": "bar"}),
    "A.4": ({"foo": ["bar", "qux", "baz"]}, ("remove", "/foo/1"), {"foo": ["bar", "baz"]}),
    "A.5": ({"baz": "qux", "foo": "bar"}, ("replace", "/baz", "boo"), {"baz": "boo", "foo": "bar"}),
    "A.10": ({"foo": "bar"}, ("add", "/child", {"grandchild": {}}), {"foo": "bar", "child": {"grandchild": {}}}),
    "A.16": ({"foo": ["bar"]}, ("add", "/foo/-", ["abc", "def"]), {"foo": ["bar", ["abc", "def"]]}),
}

names = st.sampled_from(["a", "b", "c/d", "e~f", "0", "-"])
documents = st.recursive(
    st.none() | st.booleans() | st.integers(-3, 3) | st.text("xy", max_size=2),
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(names, inner, max_size=4),
    max_leaves=12,
)


def operation(name: str, path: str, *value: Any) -> dict[str, Any]:
    return {"op": name, "path": path, **({"value": value[0]} if value else {})}


@pytest.mark.parametrize("example", EXAMPLES)
def test_the_examples_of_the_standard_come_out_as_it_says(example: str) -> None:
    before, parts, after = EXAMPLES[example]
    kept = deepcopy(before)
    assert patched(before, [operation(*parts)]) == after
    assert before == kept


@pytest.mark.parametrize(
    "wrong",
    [
        operation("add", "/baz/bat", "qux"),  # A.12
        operation("replace", "/baz", 1),
        operation("remove", "/baz"),
        operation("remove", "/list/2"),
        operation("remove", "/list/-"),
        operation("add", "/list/3", 1),
        operation("add", "/list/01", 1),
        operation("add", "/list/-1", 1),
        operation("add", "/list/one", 1),
        operation("add", "/foo/x", 1),
        operation("add", "foo", 1),
        operation("test", "/foo", "bar"),
        operation("add", "/foo"),
        {"op": "add", "value": 1},
    ],
)
def test_what_does_not_fit_is_refused_and_nothing_is_changed(wrong: dict[str, Any]) -> None:
    document = {"foo": "bar", "list": [1, 2]}
    with pytest.raises(PatchRefused, match="does not fit"):
        patched(document, [operation("remove", "/list/0"), operation("add", "/list/-", 3), wrong])
    assert document == {"foo": "bar", "list": [1, 2]}


@given(documents, documents)
def test_a_patch_that_a_library_makes_leads_where_it_says(before: Any, after: Any) -> None:
    made = jsonpatch.make_patch(before, after).patch
    assume({step["op"] for step in made} <= {"add", "replace", "remove"})
    assert patched(before, made) == after


def test_a_value_is_not_shared_with_the_patch() -> None:
    patch = [operation("add", "/a", {}), operation("add", "/a/b", 1)]
    assert patched({}, patch) == {"a": {"b": 1}}
    assert patch[0]["value"] == {}
