"""Ways to spoil a commitment, each with the exact faults it is to be answered with."""

from tests.schemas.documents import Json
from tests.schemas.wrong_plain_requests import START, Faults


def of_a_commitment() -> dict[str, tuple[Json, Faults]]:
    """List members of an `hours_at_least`, and what each set is answered with."""
    c = "/commitments/0"
    return {
        "an unknown asset": (
            {"applies_to": {"assets": ["b1", "b9"]}},
            {(f"{c}/applies_to/assets/1", "unknown-reference")},
        ),
        "an asset twice": ({"applies_to": {"group": ["b1", "b1"]}}, {(f"{c}/applies_to/group/1", "duplicate")}),
        "an unknown site": ({"applies_to": {"site": "s9"}}, {(f"{c}/applies_to/site", "unknown-reference")}),
        "nobody": ({"applies_to": {}}, {(f"{c}/applies_to", "exactly-one")}),
        "no asset": ({"applies_to": {"assets": []}}, {(f"{c}/applies_to/assets", "too-few")}),
        "two targets": ({"applies_to": {"assets": ["b1"], "fleet": True}}, {(f"{c}/applies_to", "exactly-one")}),
        "not the fleet": ({"applies_to": {"fleet": False}}, {(f"{c}/applies_to/fleet", "wrong-type")}),
        "two thresholds": ({"threshold": {"mw": 1, "fraction_of_rated": 1}}, {(f"{c}/threshold", "exactly-one")}),
        "no threshold": ({"threshold": {}}, {(f"{c}/threshold", "exactly-one")}),
        "a threshold of zero": ({"threshold": {"mw": 0}}, {(f"{c}/threshold/mw", "out-of-range")}),
        "hours that are no whole intervals": ({"hours": 1.5}, {(f"{c}/hours", "off-border")}),
        "blocks that are no whole intervals": ({"min_block_hours": 0.5}, {(f"{c}/min_block_hours", "off-border")}),
        "a begin off the borders": ({"from": "2027-03-14T00:30:00Z"}, {(f"{c}/from", "off-border")}),
        "an end off the borders": ({"to": "2027-03-14T02:00:01Z"}, {(f"{c}/to", "off-border")}),
        "an end at the begin": ({"from": START, "to": START}, {(f"{c}/to", "inconsistent")}),
        "a stretch of no day": ({"between": ["16:00", "22:00"]}, {(f"{c}/between", "inconsistent")}),
        "a stretch of no length": (
            {"each_day": True, "between": ["16:00", "16:00"]},
            {(f"{c}/between", "inconsistent")},
        ),
        "a stretch off the borders": (
            {"each_day": True, "between": ["16:30", "22:00"]},
            {(f"{c}/between/0", "off-border")},
        ),
        "a stretch with one end": ({"each_day": True, "between": ["16:00"]}, {(f"{c}/between", "too-few")}),
        "a time past midnight": ({"each_day": True, "between": ["16:00", "24:00"]}, {(f"{c}/between/1", "bad-format")}),
        "excuses off the borders and backwards": (
            {"excused": [{"from": "2027-03-14T00:30:00Z", "to": "2027-03-14T02:00:00Z"}, {"from": START, "to": START}]},
            {(f"{c}/excused/0/from", "off-border"), (f"{c}/excused/1/to", "inconsistent")},
        ),
        "a share of what a load draws": (
            {"applies_to": {"assets": ["l1"]}, "threshold": {"fraction_of_rated": 0.5}, "direction": "charge"},
            {(f"{c}/threshold/fraction_of_rated", "wrong-kind")},
        ),
        "discharge of a load": ({"applies_to": {"assets": ["l1"]}}, {(f"{c}/applies_to/assets/0", "wrong-kind")}),
        "charge of a generator": (
            {"applies_to": {"assets": ["g1"]}, "direction": "charge"},
            {(f"{c}/applies_to/assets/0", "wrong-kind")},
        ),
        "another direction": ({"direction": "up"}, {(f"{c}/direction", "not-allowed")}),
        "a block for hours at most": (
            {"kind": "hours_at_most", "min_block_hours": 1},
            {(f"{c}/min_block_hours", "unknown-field")},
        ),
    }
