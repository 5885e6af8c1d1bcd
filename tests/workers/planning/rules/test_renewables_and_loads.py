"""For renewables, flexible loads, fixed loads and islands: where a rule just holds, and where it just breaks or costs.

Every figure is worked out by hand in the test; the audit has passed every schedule.
"""

from typing import Any

import pytest

from tests.workers.planning.jobs import (
    fixed_load,
    flexible_load,
    generator,
    job,
    outage,
    planned,
    power_of,
    refused,
    renewable,
    store,
)

Document = dict[str, Any]
PV, PUMPS = "quay-pv", "quay-pumps"


def at(hour: int) -> str:
    return f"2027-02-09T{hour:02d}:00:00Z"


# renewables


def sun(price: float, **changes: Any) -> Document:
    """Return a job of one hour with 3 MW of sun."""
    return job([price], renewable(**changes), forecasts={PV: 3.0})


@pytest.mark.parametrize(("curtailable", "margin"), [(True, 0.0), (False, -15.0)])
def test_only_what_can_be_curtailed_is_held_back_when_it_costs(curtailable: bool, margin: float) -> None:
    assert planned(sun(-5.0, curtailable=curtailable)).margin == pytest.approx(margin)


@pytest.mark.parametrize("curtailable", [True, False])
def test_all_of_the_forecast_is_sold_when_it_earns(curtailable: bool) -> None:
    assert power_of(planned(sun(5.0, curtailable=curtailable)), PV) == pytest.approx([3.0])


@pytest.mark.parametrize("curtailable", [True, False])
def test_an_outage_scales_the_forecast(curtailable: bool) -> None:
    document = sun(5.0, curtailable=curtailable) | {"outages": [outage(PV, 0, 1, 0.5)]}
    assert power_of(planned(document), PV) == pytest.approx([1.5])


@pytest.mark.parametrize(("cost", "margin"), [(9.0, 3.0), (11.0, 0.0)])
def test_output_has_its_cost_per_megawatt_hour(cost: float, margin: float) -> None:
    found = planned(sun(10.0, cost_per_mwh=cost))
    assert found.margin == pytest.approx(margin)
    assert found.totals.fuel_cost == pytest.approx(27.0 if margin else 0.0)


def test_output_beyond_the_connection_is_curtailed_or_refused() -> None:
    def behind(limit: float, *, curtailable: bool) -> Document:
        plant = renewable(site="quay", curtailable=curtailable)
        return job([5.0], plant, sites=[{"id": "quay", "export_limit_mw": limit}], forecasts={PV: 3.0})

    assert power_of(planned(behind(2.0, curtailable=True)), PV) == pytest.approx([2.0])
    assert power_of(planned(behind(3.0, curtailable=False)), PV) == pytest.approx([3.0])
    refused(behind(2.99, curtailable=False))


# flexible loads


def pumping(prices: list[float], *needs: Document, members: Document | None = None, **changes: Any) -> Document:
    """Return a job with one flexible load."""
    return job(prices, flexible_load(**changes), energy_needs={PUMPS: list(needs)}, **(members or {}))


def need(energy: float, first: int | None = None, end: int | None = None) -> Document:
    return {
        "energy_mwh": energy,
        "from": None if first is None else at(first),
        "to": None if end is None else at(end),
    }


def test_a_need_is_drawn_exactly_where_it_is_cheapest() -> None:
    # 2 MWh at 10 and 1 MWh at 20.
    found = planned(pumping([30.0, 10.0, 20.0], need(3.0)))
    assert power_of(found, PUMPS) == pytest.approx([0.0, -2.0, -1.0])
    assert found.margin == pytest.approx(-40.0)


def test_a_need_is_not_exceeded_where_drawing_earns() -> None:
    assert planned(pumping([-10.0, -20.0], need(3.0))).margin == pytest.approx(50.0)
    assert planned(pumping([-10.0, -20.0], need(0.0))).margin == pytest.approx(0.0)


def test_a_need_fills_every_hour_and_not_a_watt_more() -> None:
    assert planned(pumping([10.0, 20.0], need(4.0))).margin == pytest.approx(-60.0)
    refused(pumping([10.0, 20.0], need(4.01)))


def test_nothing_is_drawn_outside_needs() -> None:
    found = planned(pumping([-50.0, 10.0, -50.0], need(2.0, 1, 2)))
    assert power_of(found, PUMPS) == pytest.approx([0.0, -2.0, 0.0])
    refused(pumping([-50.0, 10.0, -50.0], need(2.01, 1, 2)))


def test_a_load_without_needs_draws_nothing() -> None:
    assert power_of(planned(pumping([-50.0])), PUMPS) == [0.0]


def test_each_need_is_met_in_its_own_hours() -> None:
    # The second need cannot use the cheap hour of the first.
    found = planned(pumping([10.0, 5.0, 90.0, 80.0], need(1.0, 0, 2), need(2.0, 2, 4)))
    assert power_of(found, PUMPS) == pytest.approx([0.0, -1.0, 0.0, -2.0])


@pytest.mark.parametrize(("least", "margin"), [(0.5, -35.0), (1.0, -45.0)])
def test_while_it_draws_it_draws_its_minimum(least: float, margin: float) -> None:
    # 2.5 MWh in two hours of at most 2 MW: 2 + 0.5, or 1.5 + 1 where 0.5 MW is too little.
    assert planned(pumping([10.0, 30.0], need(2.5), min_draw_mw=least)).margin == pytest.approx(margin)


def test_a_need_below_the_minimum_draw_cannot_be_met() -> None:
    assert planned(pumping([10.0], need(1.0), min_draw_mw=1.0)).margin == pytest.approx(-10.0)
    refused(pumping([10.0], need(0.99), min_draw_mw=1.0))


@pytest.mark.parametrize(
    ("interruptible", "least", "powers"),
    [(True, 0.5, [-2.0, 0.0, -2.0]), (False, 0.5, [-2.0, -0.5, -1.5]), (False, 2.0, [-2.0, -2.0, 0.0])],
)
def test_a_need_that_may_not_be_interrupted_is_drawn_in_one_stretch(
    interruptible: bool, least: float, powers: list[float]
) -> None:
    # 4 MWh around a dear hour: skipped, drawn at the least, or half of it there.
    document = pumping([10.0, 50.0, 11.0], need(4.0), interruptible=interruptible, min_draw_mw=least)
    assert power_of(planned(document), PUMPS) == pytest.approx(powers)


def test_each_need_has_a_stretch_of_its_own() -> None:
    steady: Document = {"interruptible": False, "min_draw_mw": 2.0}
    found = planned(pumping([10.0, 20.0, 20.0, 10.0], need(2.0, 0, 2), need(2.0, 2, 4), **steady))
    assert power_of(found, PUMPS) == pytest.approx([-2.0, 0.0, 0.0, -2.0])


def test_an_outage_in_the_middle_breaks_a_stretch() -> None:
    steady: Document = {"interruptible": False, "min_draw_mw": 1.0}
    out = {"outages": [outage(PUMPS, 1, 2)]}
    assert planned(pumping([10.0] * 3, need(2.0), members=out, **steady)).margin == pytest.approx(-20.0)
    refused(pumping([10.0] * 3, need(2.01), members=out, **steady))
    assert planned(pumping([10.0] * 3, need(4.0), members=out, min_draw_mw=1.0)).margin == pytest.approx(-40.0)


@pytest.mark.parametrize(("least", "powers"), [(1.0, [-1.0, -1.0]), (1.01, [0.0, -2.0])])
def test_an_outage_scales_the_draw_until_less_than_the_minimum_is_left(least: float, powers: list[float]) -> None:
    out = {"outages": [outage(PUMPS, 0, 1, 0.5)]}
    found = planned(pumping([10.0, 30.0], need(2.0), members=out, min_draw_mw=least))
    assert power_of(found, PUMPS) == pytest.approx(powers)


def test_a_draw_takes_its_part_of_the_import_limit() -> None:
    def at_quay(limit: float) -> Document:
        site = {"sites": [{"id": "quay", "import_limit_mw": limit}]}
        return pumping([10.0, 30.0], need(2.5), members=site, site="quay")

    assert power_of(planned(at_quay(1.5)), PUMPS) == pytest.approx([-1.5, -1.0])
    refused(at_quay(1.24))


# fixed loads and islands


def test_a_fixed_load_draws_its_forecast_less_what_is_out() -> None:
    document = job([10.0, 20.0], fixed_load(), forecasts={"quay-mill": [2.0, 1.0]})
    assert planned(document).margin == pytest.approx(-40.0)
    document["outages"] = [outage("quay-mill", 0, 1, 0.25)]
    assert planned(document).margin == pytest.approx(-25.0)


def isle(load: float, *plants: Document, **members: Any) -> Document:
    """Return an hour of a site with no connection."""
    island = {"id": "isle", "export_limit_mw": 0.0, "import_limit_mw": 0.0}
    placed = [plant | {"site": "isle"} for plant in (fixed_load(), *plants)]
    forecasts = {"quay-mill": load} | members.pop("forecasts", {})
    return job([99.0], *placed, sites=[island], forecasts=forecasts, **members)


@pytest.mark.parametrize("load", [1.0, 2.5, 4.0])
def test_on_an_island_generation_follows_the_load_and_earns_nothing(load: float) -> None:
    found = planned(isle(load, generator(cost={"linear_per_mwh": 5.0})))
    assert power_of(found, "quay-g1") == pytest.approx([load])
    assert found.margin == pytest.approx(-5.0 * load)


@pytest.mark.parametrize("load", [0.99, 4.01])
def test_on_an_island_a_load_outside_the_range_of_the_generator_is_refused(load: float) -> None:
    refused(isle(load, generator()))


def test_on_an_island_the_sun_is_curtailed_to_the_load() -> None:
    assert power_of(planned(isle(2.0, renewable(), forecasts={PV: 3.0})), PV) == pytest.approx([2.0])
    assert power_of(planned(isle(3.0, renewable(curtailable=False), forecasts={PV: 3.0})), PV) == pytest.approx([3.0])
    refused(isle(2.0, renewable(curtailable=False), forecasts={PV: 3.0}))


def test_on_an_island_a_store_takes_what_cannot_be_curtailed() -> None:
    document = isle(2.0, renewable(curtailable=False), store(), forecasts={PV: 3.0})
    assert power_of(planned(document), "quay-b1") == pytest.approx([-1.0])
    document["forecasts"][PV] = 3.01
    refused(document)


def test_on_an_island_a_flexible_load_is_served_from_within() -> None:
    needs = {PUMPS: [need(1.5)]}
    assert power_of(planned(isle(2.5, generator(), flexible_load(), energy_needs=needs)), "quay-g1") == [4.0]
    refused(isle(2.51, generator(), flexible_load(), energy_needs=needs))
