"""Which stores have to be planned together, and which can be planned alone.

Meters are tied by a fleet limit, a fleet settlement, or a commitment on the sum of units behind several of them. A
meter with several units falls apart when nothing is due at it but one price. The margins and bounds of independent
parts add up.
"""

from collections.abc import Iterable, Iterator
from dataclasses import replace

import numpy as np

from workers.planning.instance import Instance, Meter
from workers.planning.rows import CommitmentRow


def independent_parts(instance: Instance) -> list[Instance]:
    """Split an instance into the smallest parts that nothing couples, in the order of their first meter."""
    atoms = [atom for meter in instance.meters for atom in _atoms(instance, meter)]
    home = {unit: number for number, atom in enumerate(atoms) for unit in atom.units}
    leader = list(range(len(atoms)))
    if instance.settles_fleet or instance.fleet.is_limited:
        leader = [0] * len(atoms)
    for row in instance.rows:
        _tie(leader, [home[unit] for unit in row.units])
    members: dict[int, list[Meter]] = {}
    for number, atom in enumerate(atoms):
        members.setdefault(_find(leader, number), []).append(atom)
    rows: dict[int, list[CommitmentRow]] = {}
    for row in instance.rows:
        owner = _find(leader, home[row.units[0]]) if row.units else next(iter(members))
        rows.setdefault(owner, []).append(row)
    return [instance.part(meters, rows.get(first, ())) for first, meters in members.items()]


def _atoms(instance: Instance, meter: Meter) -> Iterator[Meter]:
    """Give a meter as it is, or unit by unit where nothing ties those behind it; nothing where nothing happens."""
    if not meter.units and not meter.load_mw.any() and not meter.position_mw.any():
        return
    if len(meter.units) <= 1 or not _is_free(instance, meter):
        yield meter
        return
    left = meter.load_mw
    for number in meter.units:
        standby = np.full(instance.intervals, instance.units[number].standby_load_mw)
        left = left - standby
        yield replace(meter, units=(number,), load_mw=standby)
    if np.abs(left).max() > 0:
        yield replace(meter, units=(), load_mw=left)


def _is_free(instance: Instance, meter: Meter) -> bool:
    return (
        instance.has_one_price
        and not meter.is_limited
        and not meter.position_mw.any()
        and meter.export_fee_per_mwh == meter.import_fee_per_mwh == meter.peak_import_charge_per_mw == 0.0
    )


def _find(leader: list[int], number: int) -> int:
    while leader[number] != number:
        leader[number] = leader[leader[number]]
        number = leader[number]
    return number


def _tie(leader: list[int], numbers: Iterable[int]) -> None:
    roots = sorted({_find(leader, number) for number in numbers})
    for root in roots[1:]:
        leader[root] = roots[0]
