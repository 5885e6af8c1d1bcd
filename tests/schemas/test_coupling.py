"""What couples assets is named, each thing at its own place, where they are to be planned one by one."""

from typing import Any

import pytest

from schemas.reading import read_job
from tests.schemas.documents import ABSENT, Json, edited, plain
from tests.schemas.refusals import faults_named
from tests.schemas.wrong_plain_requests import HOURS_ROW, SECOND_STORE


def two_behind_one_meter() -> Json:
    """Two stores on one site, planned one by one."""
    edits = {
        "/method": "per_asset",
        "/fleet/sites": [{"id": "s"}, {"id": "t"}],
        "/fleet/assets/0/site": "s",
        "/fleet/assets/1": {**SECOND_STORE, "site": "s"},
        "/initial/b2": {"stored_mwh": 1},
    }
    return edited(plain(), edits)


COUPLINGS: list[tuple[dict[str, Any], str]] = [
    ({"/fleet/export_limit_mw": 9}, "/fleet/export_limit_mw"),
    ({"/fleet/import_limit_mw": 9}, "/fleet/import_limit_mw"),
    ({"/fleet/lot_mw": 1}, "/fleet/lot_mw"),
    ({"/limits": {"fleet": {"export_limit_mw": 9}}}, "/limits/fleet"),
    ({"/limits": {"s": {"export_limit_mw": 9}}}, "/limits/s"),
    ({"/window/settled_at": "fleet"}, "/window/settled_at"),
    ({"/fleet/sites/0/export_limit_mw": 9}, "/fleet/sites/0/export_limit_mw"),
    ({"/fleet/sites/0/import_limit_mw": 9}, "/fleet/sites/0/import_limit_mw"),
    ({"/fleet/sites/0/lot_mw": 1}, "/fleet/sites/0/lot_mw"),
    ({"/fleet/sites/0/peak_import_charge_per_mw": 1}, "/fleet/sites/0/peak_import_charge_per_mw"),
    ({"/fleet/sites/0/import_fee_per_mwh": 1}, "/fleet/sites/0/import_fee_per_mwh"),
    ({"/fleet/sites/0/export_fee_per_mwh": 1}, "/fleet/sites/0/export_fee_per_mwh"),
    ({"/positions": {"s": 1}}, "/positions/s"),
    (
        {"/window/price_per_mwh": ABSENT, "/window/buy_price_per_mwh": [2, 2], "/window/sell_price_per_mwh": [1, 1]},
        "/window/buy_price_per_mwh",
    ),
    ({"/commitments": [{**HOURS_ROW, "applies_to": {"group": ["b1", "b2"]}}]}, "/commitments/0/applies_to"),
    ({"/commitments": [{**HOURS_ROW, "applies_to": {"site": "s"}}]}, "/commitments/0/applies_to"),
    ({"/commitments": [{**HOURS_ROW, "applies_to": {"fleet": True}}]}, "/commitments/0/applies_to"),
]


@pytest.mark.parametrize(("edits", "pointer"), COUPLINGS)
def test_what_couples_assets_is_named(edits: dict[str, Any], pointer: str) -> None:
    assert faults_named(edited(two_behind_one_meter(), edits)) == {(pointer, "coupled")}
    assert read_job(edited(two_behind_one_meter(), {**edits, "/method": "auto"})) is not None


@pytest.mark.parametrize(
    "edits",
    [
        {},
        {"/commitments": [HOURS_ROW]},
        {"/commitments": [{**HOURS_ROW, "applies_to": {"group": ["b1"]}}]},
        {"/fleet/sites/1/export_limit_mw": 9},
        {"/fleet/assets/1/site": "t", "/fleet/sites/0/export_limit_mw": 9, "/positions": {"t": 1}},
        {"/fleet/assets/1/standby_load_mw": 0.1},
    ],
)
def test_what_couples_nothing_is_read(edits: dict[str, Any]) -> None:
    assert read_job(edited(two_behind_one_meter(), edits)) is not None


def test_a_single_asset_is_coupled_to_nothing() -> None:
    edits = {
        "/method": "per_asset",
        "/fleet/export_limit_mw": 9,
        "/commitments": [{**HOURS_ROW, "applies_to": {"fleet": True}}],
    }
    assert read_job(edited(plain(), edits)) is not None
