"""What a meter reads, and the limits of sites and fleet."""

from typing import Any

import pytest

from tests.workers.planning.audit.small_jobs import Document, audit, broken, job, load, only, store, window


def quay(power_1: list[float], power_2: list[float], site: Document | None = None, **members: Any) -> Any:
    """Audit two stores on one site."""
    sites = [{"id": "quay", **(site or {})}]
    standby = members.pop("standby_load_mw", 0.0)
    assets = [store(site="quay", standby_load_mw=standby), store("quay-b2", site="quay")]
    document = job(assets, window([0.0] * len(power_1)), sites=sites, **members)
    return audit(document, {"quay-b1": power_1, "quay-b2": power_2})


def test_a_site_reads_the_sum_of_its_assets_less_standby_loads() -> None:
    assets = [store(site="quay", standby_load_mw=0.25), load(site="quay"), store("mole-b1", standby_load_mw=0.5)]
    document = job(assets, window([0.0, 0.0]), sites=[{"id": "quay"}], forecasts={"quay-cranes": [1.0, 2.0]})
    result = audit(document, {"quay-b1": [2.0, -1.0], "mole-b1": [0.0, 1.0]})
    assert [(site.id, site.power_mw) for site in result.sites] == [("quay", [0.75, -3.25]), ("mole-b1", [-0.5, 0.5])]
    assert result.fleet.power_mw == [0.25, -2.75]
    # A standby load is not in the asset's own power.
    assert result.assets[2].power_mw == [0.0, 1.0]


def test_a_site_without_assets_reads_nothing() -> None:
    document = job([store()], window([0.0]), sites=[{"id": "mole"}])
    assert [site.power_mw for site in audit(document, {"quay-b1": [1.0]}).sites] == [[0.0], [1.0]]


def test_exporting_at_the_sites_limit_holds_and_above_it_breaks_it() -> None:
    site = {"export_limit_mw": 3.0}
    assert broken(quay([2.0, 1.5], [1.0, 1.5], site)) == []
    found = only(quay([2.0, 1.5], [1.0, 1.6], site))
    assert (found.rule, found.pointer, found.site, found.asset, found.unit) == (
        "export_limit",
        "/fleet/sites/0/export_limit_mw",
        "quay",
        None,
        "MW",
    )
    assert found.amount == pytest.approx(0.1)
    assert found.interval_start is not None
    assert found.interval_start.hour == 1


def test_importing_at_the_sites_limit_holds_and_above_it_breaks_it() -> None:
    site = {"import_limit_mw": 3.0}
    assert broken(quay([-2.0], [-1.0], site)) == []
    found = only(quay([-2.0], [-1.25], site))
    assert (found.rule, found.pointer, found.amount) == ("import_limit", "/fleet/sites/0/import_limit_mw", 0.25)


def test_a_standby_load_counts_against_the_import_and_eases_the_export() -> None:
    site = {"import_limit_mw": 3.0, "export_limit_mw": 3.0}
    assert broken(quay([-1.75, 2.0], [-1.0, 1.25], site, standby_load_mw=0.25)) == []
    assert broken(quay([-2.0, 0.0], [-1.0, 0.0], site, standby_load_mw=0.25)) == ["import_limit"]


def test_todays_limit_stands_in_place_of_the_fleets_where_it_is_given() -> None:
    site = {"export_limit_mw": 3.0, "import_limit_mw": 3.0}
    limits = {"quay": {"export_limit_mw": [3.5, 1.0]}}
    assert broken(quay([2.0, 1.0], [1.5, 0.0], site, limits=limits)) == []
    found = only(quay([2.0, 1.0], [1.5, 0.1], site, limits=limits))
    assert (found.pointer, found.site) == ("/limits/quay/export_limit_mw", "quay")
    assert found.amount == pytest.approx(0.1)
    found = only(quay([-2.0, 0.0], [-1.5, 0.0], site, limits=limits))
    assert found.pointer == "/fleet/sites/0/import_limit_mw"


def test_a_limit_of_nothing_is_a_limit() -> None:
    assert broken(quay([1.0], [-1.0], {"export_limit_mw": 0.0, "import_limit_mw": 0.0})) == []
    assert broken(quay([1.0], [0.0], {"export_limit_mw": 0.0, "import_limit_mw": 0.0})) == ["export_limit"]


def test_the_fleets_limit_holds_over_all_meters() -> None:
    assets = [store(site="quay"), store("mole-b1")]
    document = job(
        assets, window([0.0]), sites=[{"id": "quay"}], fleet={"export_limit_mw": 3.0, "import_limit_mw": 1.0}
    )
    assert broken(audit(document, {"quay-b1": [2.0], "mole-b1": [1.0]})) == []
    found = only(audit(document, {"quay-b1": [2.0], "mole-b1": [1.5]}))
    assert (found.rule, found.pointer, found.site, found.amount) == (
        "export_limit",
        "/fleet/export_limit_mw",
        None,
        0.5,
    )
    assert "the fleet exports 3.5 MW" in found.text
    found = only(audit(document, {"quay-b1": [-2.0], "mole-b1": [0.5]}))
    assert (found.rule, found.pointer, found.amount) == ("import_limit", "/fleet/import_limit_mw", 0.5)


def test_the_fleets_limit_may_be_todays() -> None:
    limits = {"fleet": {"import_limit_mw": [0.5]}}
    document = job([store()], window([0.0]), limits=limits, fleet={"import_limit_mw": 2.0})
    assert broken(audit(document, {"quay-b1": [-0.5]})) == []
    assert only(audit(document, {"quay-b1": [-0.75]})).pointer == "/limits/fleet/import_limit_mw"


def test_an_asset_without_a_site_has_no_limit_of_its_own() -> None:
    document = job([store()], window([0.0]), sites=[{"id": "quay", "export_limit_mw": 0.0}])
    assert broken(audit(document, {"quay-b1": [2.0]})) == []


def test_an_asset_on_an_unknown_site_is_refused() -> None:
    with pytest.raises(ValueError, match="mole"):
        audit(job([store(site="mole")], window([0.0])), {"quay-b1": [0.0]})
