"""What pydantic found wrong, in the contract's words: one table from its error types to codes and details.

A type that pydantic may learn later and that is not in the table is a defect of ours, never passed on as it is.
"""

from collections.abc import Callable, Mapping
from typing import Any

from pydantic_core import ErrorDetails

from schemas.problems import Code

Context = Mapping[str, Any]
_Detail = str | Callable[[Context], str]


def code_and_detail(error: ErrorDetails) -> tuple[Code, str]:
    """Translate one pydantic error; raises `KeyError` for a type the table does not hold."""
    kind = error["type"]
    code, detail = WORDS[kind]
    return code, detail(error.get("ctx", {})) if callable(detail) else detail


def _limit(words: str, name: str) -> Callable[[Context], str]:
    return lambda context: f"{words} {_number(context[name])}"


def _number(value: Any) -> str:
    return f"{value:.10g}" if isinstance(value, float) else str(value)


def _at_most(context: Context) -> str:
    return f"more entries than the limit of {context['max_length']}"


def _at_least(context: Context) -> str:
    return f"fewer entries than the least of {context['min_length']}"


def _pattern(context: Context) -> str:
    return f"does not match the pattern {context['pattern']}"


def _choices(context: Context) -> str:
    return f"must be {context['expected']}"


def _tags(context: Context) -> str:
    return f"must be one of {context['expected_tags'].replace('<', '').replace('>', '')}"


# Raised by the contract's own readers, whose words stand as they are.
OWN_WORDS: dict[str, Code] = {
    "not_text": "wrong-type",
    "not_true": "wrong-type",
    "no_offset": "bad-format",
    "not_a_timestamp": "bad-format",
    "not_a_duration": "bad-format",
    "not_a_time_of_day": "bad-format",
    "unknown_zone": "not-allowed",
    "out_of_range": "out-of-range",
    "too_many_members": "too-large",
    "too_many_entries": "too-large",
}

_OBJECT = "must be an object"
_ARRAY = "must be an array"
_NUMBER = "must be a number"
_WHOLE = "must be a whole number, without quotes, decimal point or exponent"
_TEXT = "must be a string"
_TRUTH = "must be true or false"
_MOMENT = "must be an RFC 3339 timestamp such as 2027-03-14T00:00:00+00:00"
_OTHER = "is not of the type asked for"
_FORM = "is not in the form asked for"

_SINGLE: dict[str, tuple[Code, _Detail]] = {
    "missing": ("missing", "is required"),
    "extra_forbidden": ("unknown-field", "is no field of the contract here"),
    "unexpected_keyword_argument": ("unknown-field", "is no field of the contract here"),
    "unexpected_positional_argument": ("unknown-field", "is no field of the contract here"),
    "missing_argument": ("missing", "is required"),
    "missing_keyword_only_argument": ("missing", "is required"),
    "missing_positional_only_argument": ("missing", "is required"),
    "greater_than": ("out-of-range", _limit("must be greater than", "gt")),
    "greater_than_equal": ("out-of-range", _limit("must be at least", "ge")),
    "less_than": ("out-of-range", _limit("must be less than", "lt")),
    "less_than_equal": ("out-of-range", _limit("must be at most", "le")),
    "multiple_of": ("out-of-range", _limit("must be a multiple of", "multiple_of")),
    "finite_number": ("out-of-range", "must be a finite number"),
    "int_parsing_size": ("out-of-range", "has more digits than any limit allows"),
    "too_long": ("too-large", _at_most),
    "too_short": ("too-few", _at_least),
    "string_too_long": ("too-long", _limit("longer than the limit in characters of", "max_length")),
    "string_too_short": ("too-few", _limit("shorter than the least in characters of", "min_length")),
    "bytes_too_long": ("too-long", _limit("longer than the limit in bytes of", "max_length")),
    "bytes_too_short": ("too-few", _limit("shorter than the least in bytes of", "min_length")),
    "url_too_long": ("too-long", _limit("longer than the limit in characters of", "max_length")),
    "string_pattern_mismatch": ("bad-format", _pattern),
    "string_unicode": ("bad-format", "is not valid Unicode"),
    "string_not_ascii": ("bad-format", "holds characters beyond ASCII"),
    "literal_error": ("not-allowed", _choices),
    "enum": ("not-allowed", _choices),
    "union_tag_invalid": ("not-allowed", _tags),
    "union_tag_not_found": ("wrong-type", _OBJECT),
    "none_required": ("not-allowed", "must be null or absent"),
    "recursion_depth_exceeded": ("too-large", "is nested too deep"),
    "recursion_loop": ("not-allowed", "contains itself"),
}
_ALIKE: list[tuple[Code, str, str]] = [
    ("wrong-type", _OBJECT, "model_type model_attributes_type dataclass_type dataclass_exact_type dict_type"),
    ("wrong-type", _OBJECT, "frozen_dict_type ordered_dict_type counter_type mapping_type arguments_type"),
    ("wrong-type", _ARRAY, "list_type deque_type tuple_type set_type frozen_set_type iterable_type"),
    ("wrong-type", _ARRAY, "iteration_error named_tuple_type"),
    ("wrong-type", _NUMBER, "float_type float_parsing decimal_type decimal_parsing fraction_type complex_type"),
    ("wrong-type", _NUMBER, "fraction_parsing complex_str_parsing"),
    ("wrong-type", _WHOLE, "int_type int_parsing int_from_float"),
    ("wrong-type", _TEXT, "string_type string_sub_type bytes_type url_type uuid_type invalid_key"),
    ("wrong-type", _TRUTH, "bool_type bool_parsing"),
    ("wrong-type", _MOMENT, "datetime_type date_type time_type time_delta_type"),
    ("bad-format", _MOMENT, "datetime_parsing datetime_object_invalid datetime_from_date_parsing date_parsing"),
    ("bad-format", _MOMENT, "date_from_datetime_parsing date_from_datetime_inexact time_parsing"),
    ("bad-format", _MOMENT, "time_delta_parsing timezone_naive timezone_aware timezone_offset"),
    ("out-of-range", "lies on the wrong side of now", "date_past date_future datetime_past datetime_future"),
    ("out-of-range", "has too many digits", "decimal_max_digits decimal_max_places decimal_whole_digits"),
    ("bad-format", _FORM, "json_invalid json_type bytes_invalid_encoding url_parsing url_syntax_violation"),
    ("bad-format", _FORM, "url_scheme uuid_parsing uuid_version value_error assertion_error"),
    ("wrong-type", _OTHER, "is_instance_of is_subclass_of callable_type no_such_attribute get_attribute_error"),
    ("wrong-type", _OTHER, "needs_python_object frozen_field frozen_instance default_factory_not_called"),
    ("wrong-type", _OTHER, "set_item_not_hashable missing_sentinel_error ellipsis_error"),
    ("wrong-type", _OTHER, "multiple_argument_values"),
]
WORDS = _SINGLE | {kind: (code, detail) for code, detail, kinds in _ALIKE for kind in kinds.split()}
