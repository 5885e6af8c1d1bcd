"""What the request becomes in arrays: each figure worked out by hand."""

from typing import Any

import numpy as np
import pytest

from tests.workers.planning.jobs import hours, indexed, job, store
from workers.planning.instance import Instance, instance_of
from workers.planning.rows import HoursRow, most_against, most_power

QUAY = store("quay-b1", site="quay", discharge_limit_mw=2.0, charge_limit_mw=1.5, standby_load_mw=0.125)
MOLE = store("mole-b1", site="mole", discharge_limit_mw=4.0, charge_limit_mw=3.0)
FREE = store("free-b1")
LOAD = {"id": "crane", "kind": "fixed_load", "site": "quay"}
SITES = [
    {"id": "quay", "export_limit_mw": 5.0, "import_limit_mw": 6.0, "peak_import_charge_per_mw": 9.0},
    {"id": "mole", "import_fee_per_mwh": 2.0, "export_fee_per_mwh": 1.0},
]


def of(prices: list[float], *assets: Any, **members: Any) -> Instance:
    return instance_of(indexed(job(prices, *assets, **members)))


def whole(**members: Any) -> Instance:
    return of([10.0, 20.0], QUAY, MOLE, FREE, LOAD, sites=SITES, forecasts={"crane": [0.5, 1.0]}, **members)


def rows(*commitments: Any, **members: Any) -> list[HoursRow]:
    found = whole(commitments=list(commitments), **members).rows
    assert all(isinstance(row, HoursRow) for row in found)
    return [row for row in found if isinstance(row, HoursRow)]


def test_meters_are_sites_and_assets_without_one_with_what_is_drawn_there() -> None:
    found = whole()
    assert [(meter.id, meter.units) for meter in found.meters] == [("quay", (0,)), ("mole", (1,)), ("free-b1", (2,))]
    assert [meter.load_mw.tolist() for meter in found.meters] == [[0.625, 1.125], [0.0, 0.0], [0.0, 0.0]]
    assert (found.fleet.id, found.fleet.units) == ("fleet", (0, 1, 2))
    assert found.fleet.load_mw.tolist() == [0.625, 1.125]


def test_limits_of_today_take_the_place_of_the_fleets_own() -> None:
    todays = {"quay": {"import_limit_mw": [1.0, 2.0]}, "fleet": {"export_limit_mw": 7.0}}
    found = whole(limits=todays, fleet={"export_limit_mw": 9.0, "import_limit_mw": 8.0})
    quay = found.meters[0]
    assert quay.export_limit_mw.tolist() == [5.0, 5.0]
    assert quay.import_limit_mw.tolist() == [1.0, 2.0]
    assert found.fleet.export_limit_mw.tolist() == [7.0, 7.0]
    assert found.fleet.import_limit_mw.tolist() == [8.0, 8.0]
    assert np.isinf(found.meters[1].export_limit_mw).all()


def test_positions_fees_and_peaks_go_to_their_meters() -> None:
    found = whole(positions={"quay": [1.0, -1.0]}, counted_before={"sites": {"quay": {"peak_import_mw": 3.0}}})
    quay, mole, _ = found.meters
    assert quay.position_mw.tolist() == [1.0, -1.0]
    assert (quay.peak_import_charge_per_mw, quay.peak_so_far_mw) == (9.0, 3.0)
    assert (mole.import_fee_per_mwh, mole.export_fee_per_mwh, mole.peak_so_far_mw) == (2.0, 1.0, 0.0)
    as_one = whole(positions={"fleet": [2.0, 3.0]}, window={"settled_at": "fleet"})
    assert as_one.settles_fleet
    assert as_one.fleet.position_mw.tolist() == [2.0, 3.0]


def test_one_of_two_prices_may_be_a_number() -> None:
    prices = {"price_per_mwh": None, "buy_price_per_mwh": 40.0, "sell_price_per_mwh": [30.0, 20.0]}
    found = of([], FREE, window=prices)
    assert found.buy.tolist() == [40.0, 40.0]
    assert found.sell.tolist() == [30.0, 20.0]
    assert not found.has_one_price
    prices = {"price_per_mwh": None, "buy_price_per_mwh": [40.0, 41.0], "sell_price_per_mwh": 30.0}
    assert of([], FREE, window=prices).sell.tolist() == [30.0, 30.0]


def test_an_outage_of_a_load_scales_what_it_draws() -> None:
    outage = {"asset": "crane", "kind": "forced", "from": "2027-02-09T01:00:00Z", "to": "2027-02-09T02:00:00Z"}
    found = whole(outages=[outage | {"available_fraction": 0.25}])
    assert found.meters[0].load_mw.tolist() == [0.625, 0.375]


@pytest.mark.parametrize(
    ("whom", "direction", "threshold", "members", "load"),
    [
        ({"assets": ["quay-b1"]}, "discharge", 1.0, (0,), 0.0),
        ({"assets": ["quay-b1"]}, "charge", 0.75, (0,), 0.0),
        ({"group": ["quay-b1", "free-b1"]}, "discharge", 1.5, (0, 2), 0.125),
        ({"group": ["mole-b1", "free-b1"]}, "charge", 2.0, (1, 2), 0.0),
        ({"site": "quay"}, "discharge", 1.0, (0,), 0.625),
        ({"site": "mole"}, "charge", 1.5, (1,), 0.0),
        ({"fleet": True}, "discharge", 3.5, (0, 1, 2), 0.625),
    ],
)
def test_a_fraction_is_of_the_rated_power_of_whom_it_binds(
    whom: Any, direction: str, threshold: float, members: tuple[int, ...], load: float
) -> None:
    (row,) = rows(hours(whom, 1, 9.0, threshold={"fraction_of_rated": 0.5}, direction=direction, headroom_mw=0.0625))
    assert row.threshold_mw == pytest.approx(threshold + 0.0625)
    assert row.sign == (1.0 if direction == "discharge" else -1.0)
    assert row.units == members
    assert row.load_mw[0] == load
    assert row.id == "evening"
    assert row.pointer == "/commitments/0"


@pytest.mark.parametrize(("direction", "along", "against"), [("discharge", 4.0, 3.0), ("charge", 3.0, 4.0)])
def test_a_row_knows_the_most_power_along_and_against_its_direction(
    direction: str, along: float, against: float
) -> None:
    found = whole(commitments=[hours({"site": "mole"}, 1, 0.25, direction=direction)])
    assert most_power(found.units, found.rows[0]).tolist() == [along, along]
    assert most_against(found.units, found.rows[0]).tolist() == [against, against]
    with_load = whole(commitments=[hours({"site": "quay"}, 1, 0.25)])
    assert most_power(with_load.units, with_load.rows[0]).tolist() == [2.0 - 0.625, 2.0 - 1.125]


def test_an_empty_site_can_be_asked_for_nothing() -> None:
    sites = [*SITES, {"id": "bare"}]
    found = of([1.0], FREE, sites=sites, commitments=[hours({"site": "bare"}, 1, 0.25)])
    assert found.rows[0].units == ()
    assert most_power(found.units, found.rows[0]).tolist() == [0.0]


def test_a_commitment_on_each_of_some_assets_is_a_row_each() -> None:
    found = rows(hours({"assets": ["quay-b1", "crane"]}, 1, 0.25, direction="charge"))
    assert [(row.asset, row.units) for row in found] == [("quay-b1", (0,)), ("crane", ())]
    assert found[1].load_mw.tolist() == [0.5, 1.0]


def test_hours_counted_before_are_credited_to_the_first_day_alone() -> None:
    window = {"start": "2027-02-09T23:00:00Z"}
    daily = hours({"assets": ["quay-b1", "mole-b1"]}, 1, 0.25, each_day=True)
    counted = {"commitments": {"evening": {"quay-b1": 0.5}}}
    found = rows(daily, counted_before=counted, window=window)
    assert [(row.asset, row.day, row.due_hours, row.intervals) for row in found] == [
        ("quay-b1", "2027-02-09", 0.5, (0,)),
        ("quay-b1", "2027-02-10", 1.0, (1,)),
        ("mole-b1", "2027-02-09", 1.0, (0,)),
        ("mole-b1", "2027-02-10", 1.0, (1,)),
    ]
    summed = rows(hours({"fleet": True}, 1, 0.25), counted_before={"commitments": {"evening": 0.75}})
    assert summed[0].due_hours == 0.25


def test_blocks_and_excuses_are_counted_in_intervals() -> None:
    window = {"interval": "PT15M"}
    stretch = {"from": "2027-02-09T00:15:00Z", "to": "2027-02-09T00:45:00Z"}
    promise = hours({"assets": ["free-b1"]}, 0.5, 0.25, min_block_hours=0.5, excused=[stretch])
    (row,) = of([1.0] * 4, FREE, commitments=[promise], window=window).rows
    assert isinstance(row, HoursRow)
    assert row.min_block == 2
    assert row.excused == {1, 2}
    assert row.intervals == (0, 1, 2, 3)


def test_a_part_keeps_its_units_rows_and_loads() -> None:
    found = whole(commitments=[hours({"site": "mole"}, 1, 0.25), hours({"site": "quay"}, 1, 0.25, id="other")])
    part = found.part(found.meters[1:2], found.rows[:1])
    assert [unit.id for unit in part.units] == ["mole-b1"]
    assert part.rows[0].units == part.meters[0].units == part.fleet.units == (0,)
    assert part.fleet.load_mw.tolist() == [0.0, 0.0]
    again = found.part(found.meters[:1], found.rows[1:])
    assert again.fleet.load_mw.tolist() == [0.625, 1.125]


def test_a_job_without_its_documents_is_our_fault() -> None:
    read = indexed(job([1.0], FREE))
    for missing in ({"fleet": None}, {"window": None}):
        with pytest.raises(ValueError, match="fleet and its window inline"):
            instance_of(read.model_copy(update=missing))
