"""What every document of the contract has in common."""

from collections.abc import Mapping
from typing import Any, Self, cast

from pydantic import (
    BaseModel,
    ConfigDict,
    Discriminator,
    ModelWrapValidatorHandler,
    ValidationError,
    ValidationInfo,
    model_validator,
)
from pydantic_core import PydanticCustomError

MAX_MEMBERS = 60
"""An object with more members than this is refused as a whole: no part of the contract has as many fields."""


def without_nulls(value: Any) -> Any:
    """Drop the null members of an object: on this wire `null` means absent. Anything else passes through."""
    if isinstance(value, dict) and None in value.values():
        return {key: member for key, member in value.items() if member is not None}
    return value


class FaultBudget:
    """How many more faults are worth looking for; given to pydantic as the context of a validation.

    A hostile body holds millions of faults, and each costs a kilobyte. Once the budget is spent, what is still to come
    is passed over unread: the document is refused already.
    """

    def __init__(self, faults: int) -> None:
        self.left = faults

    def spend(self, wrong: ValidationError) -> None:
        """Take off what a part of the document has shown."""
        self.left -= wrong.error_count()


class Document(BaseModel):
    """A part of the contract: strict types, no unknown members, no NaN, and not to be changed once read."""

    model_config = ConfigDict(extra="forbid", strict=True, frozen=True, allow_inf_nan=False)

    @model_validator(mode="wrap")
    @classmethod
    def _null_means_absent(cls, value: Any, read: ModelWrapValidatorHandler[Self], info: ValidationInfo) -> Self:
        budget = info.context
        if isinstance(value, dict) and len(value) > MAX_MEMBERS:
            raise PydanticCustomError("too_many_members", "more members than any object of the contract has")
        if not isinstance(budget, FaultBudget):
            return read(without_nulls(value))
        if budget.left <= 0:
            return cast(Self, cls.model_construct())
        try:
            return read(without_nulls(value))
        except ValidationError as wrong:
            budget.spend(wrong)
            raise


class Answer(BaseModel):
    """A part of what the service returns; made by us, so only its shape is declared."""

    model_config = ConfigDict(frozen=True, allow_inf_nan=False)


def tag(word: str) -> str:
    """Mark a union's tag, so that it can be told from a member's name where an error's place is read.

    >>> tag("storage")
    '<storage>'
    """
    return f"<{word}>"


def tagged_by(member: str, default: str | None = None) -> Discriminator:
    """Choose a union's branch by the word that `member` holds; `default` when it is absent or null."""

    def read(value: Any) -> str | None:
        word = value.get(member) if isinstance(value, Mapping) else getattr(value, member, None)
        word = default if word is None else word
        return None if word is None else tag(str(word))

    return Discriminator(read)
