"""Members that are keyed by the id of an asset, a site, a meter, a commitment or a product."""

from typing import Annotated, Any, TypeVar

from pydantic import Field, ValidationError, ValidationInfo, ValidatorFunctionWrapHandler, WrapValidator
from pydantic_core import PydanticCustomError

from schemas.document import FaultBudget, without_nulls
from schemas.quantities import MAX_ASSETS, MAX_COMMITMENTS, MAX_RESERVE_PRODUCTS, MAX_SITES, Id

MAX_METERS = MAX_SITES + MAX_ASSETS + 1
"""Every site, every asset without one, and `fleet`."""


def _at_most(most: int) -> WrapValidator:
    """Drop nulls, and count the members before each of them is read and may be at fault."""

    def read_members(value: Any, read: ValidatorFunctionWrapHandler, info: ValidationInfo) -> Any:
        budget, members = info.context, without_nulls(value)
        if isinstance(members, dict) and len(members) > most:
            raise PydanticCustomError("too_many_entries", "more entries than the limit of {most}", {"most": most})
        if not isinstance(budget, FaultBudget):
            return read(members)
        if budget.left <= 0:
            return {}
        try:
            return read(members)
        except ValidationError as wrong:
            budget.spend(wrong)
            raise

    return WrapValidator(read_members)


T = TypeVar("T")
ByAsset = Annotated[dict[Id, T], Field(max_length=MAX_ASSETS), _at_most(MAX_ASSETS)]
BySite = Annotated[dict[Id, T], Field(max_length=MAX_SITES), _at_most(MAX_SITES)]
ByMeter = Annotated[dict[Id, T], Field(max_length=MAX_METERS), _at_most(MAX_METERS)]
ByCommitment = Annotated[dict[Id, T], Field(max_length=MAX_COMMITMENTS), _at_most(MAX_COMMITMENTS)]
ByProduct = Annotated[dict[Id, T], Field(max_length=MAX_RESERVE_PRODUCTS), _at_most(MAX_RESERVE_PRODUCTS)]
