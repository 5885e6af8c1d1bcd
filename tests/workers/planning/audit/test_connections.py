"""Reserve through the connections of sites and fleet, islanded ones left out. Hourly intervals."""

from typing import Any

import pytest

from tests.workers.planning.audit.small_jobs import (
    Document,
    audit_decisions,
    broken,
    generator,
    job,
    only,
    product,
    store,
    window,
)
from workers.planning.audit import Decision, Replay

PRODUCTS = [
    product(sustain_minutes=0.0),
    product("down-15", direction="down", sustain_minutes=0.0),
    product("both", direction="symmetric", sustain_minutes=0.0),
]


def quay(
    power: list[float], held: Document, site: Document | None = None, fleet: Document | None = None, **members: Any
) -> Replay:
    """Audit two stores on one site, the first holding reserve, the second idle and holding 0.5 MW of up-reserve."""
    count = len(power)
    assets = [store(site="quay"), store("quay-b2", site="quay")]
    document = job(
        assets,
        window([0.0] * count, reserve_products=PRODUCTS),
        sites=[{"id": "quay", **(site or {})}],
        fleet=fleet or {},
        **members,
    )
    other = Decision([0.0] * count, reserve_mw={"up-15": [0.5] * count})
    return audit_decisions(document, {"quay-b1": Decision(power, reserve_mw=held), "quay-b2": other})


@pytest.mark.parametrize("where", ["site", "fleet"])
def test_net_power_and_all_up_reserve_stay_within_the_export_limit(where: str) -> None:
    limit: Document = {where: {"export_limit_mw": 2.0}}
    assert broken(quay([1.0], {"up-15": [0.5]}, **limit)) == []
    assert broken(quay([1.0], {"both": [0.5]}, **limit)) == []
    found = only(quay([1.0], {"up-15": [0.5], "both": [0.25]}, **limit))
    assert (found.rule, found.amount, found.unit) == ("reserve_export", 0.25, "MW")
    place = "/fleet/sites/0/export_limit_mw" if where == "site" else "/fleet/export_limit_mw"
    assert (found.pointer, found.site) == (place, "quay" if where == "site" else None)


@pytest.mark.parametrize("where", ["site", "fleet"])
def test_net_power_less_all_down_reserve_stays_within_the_import_limit(where: str) -> None:
    limit: Document = {where: {"import_limit_mw": 1.75}}
    assert broken(quay([-1.0], {"down-15": [0.5], "both": [0.25]}, **limit)) == []
    found = only(quay([-1.0], {"down-15": [0.5], "both": [0.375]}, **limit))
    assert (found.rule, found.amount) == ("reserve_import", 0.125)


def test_up_reserve_does_not_need_import_nor_down_reserve_export() -> None:
    assert broken(quay([0.0], {"up-15": [1.0]}, {"import_limit_mw": 0.0})) == []
    assert broken(quay([0.0], {"down-15": [1.0]}, {"export_limit_mw": 0.5})) == []


def test_todays_limit_holds_for_reserve() -> None:
    limits = {"quay": {"export_limit_mw": [1.0, 2.0]}}
    assert broken(quay([0.5, 1.5], {}, {"export_limit_mw": 0.0}, limits=limits)) == []
    found = only(quay([0.75, 1.5], {}, {"export_limit_mw": 9.0}, limits=limits))
    assert (found.rule, found.pointer, found.amount) == ("reserve_export", "/limits/quay/export_limit_mw", 0.25)


def test_an_islanded_site_keeps_its_reserve_to_itself() -> None:
    island: Document = {"export_limit_mw": 0.0, "import_limit_mw": 0.0}
    assert broken(quay([0.0], {"both": [1.0]}, island)) == []
    # Its own flow is still nothing.
    assert broken(quay([0.5], {"both": [0.5]}, island)) == ["export_limit"]
    assert broken(quay([0.0], {"both": [1.0]}, {"export_limit_mw": 0.0})) == ["reserve_export"]
    assert broken(quay([0.0], {"both": [1.0]}, {"export_limit_mw": 0.0, "import_limit_mw": 1.0})) == ["reserve_export"]
    # 1 MW of up-reserve beside the other store's 0.5 MW.
    assert broken(quay([0.0], {"up-15": [1.0]}, {"export_limit_mw": 1.0, "import_limit_mw": 0.0})) == ["reserve_export"]


def test_a_site_is_islanded_in_the_intervals_in_which_both_limits_are_nothing() -> None:
    limits = {"quay": {"export_limit_mw": [0.0, 0.0], "import_limit_mw": [0.0, 5.0]}}
    result = quay([0.0, 0.0], {"both": [1.0, 1.0]}, limits=limits)
    found = only(result)
    assert (found.rule, found.amount) == ("reserve_export", 1.5)
    assert found.interval_start is not None
    assert found.interval_start.hour == 1


def test_an_islanded_fleet_keeps_its_reserve_to_itself() -> None:
    assert broken(quay([0.0], {"both": [1.0]}, fleet={"export_limit_mw": 0.0, "import_limit_mw": 0.0})) == []


def test_reserve_behind_other_meters_is_not_this_sites() -> None:
    assets = [store(site="quay"), generator("mole-g1")]
    market = window([0.0], reserve_products=PRODUCTS)
    document = job(assets, market, sites=[{"id": "quay", "export_limit_mw": 1.0}], fleet={"export_limit_mw": 4.0})
    held = {
        "quay-b1": Decision([0.0], reserve_mw={"up-15": [1.0]}),
        "mole-g1": Decision([1.0], reserve_mw={"up-15": [2.0]}),
    }
    assert broken(audit_decisions(document, held)) == []
    held["mole-g1"] = Decision([1.0], reserve_mw={"up-15": [2.5]})
    found = only(audit_decisions(document, held))
    assert (found.rule, found.pointer, found.amount) == ("reserve_export", "/fleet/export_limit_mw", 0.5)


def test_where_no_reserve_is_held_the_flow_alone_breaks_a_limit() -> None:
    market = window([0.0, 0.0], reserve_products=PRODUCTS)
    document = job([store(site="quay")], market, sites=[{"id": "quay", "export_limit_mw": 1.0}])
    held = Decision([1.5, 0.0], reserve_mw={"up-15": [0.0, 1.0]})
    assert broken(audit_decisions(document, {"quay-b1": held})) == ["export_limit"]
