"""Tangles: few points, many runs, devices and sources between them: named, never crashed on."""

import math
import random
from typing import Any

from hypothesis import given, settings
from hypothesis import strategies as st

from farvolt import planfile
from farvolt.checks import beside, loops, shared_return, sharing, stays_live, topology, voltage
from strategies import text_of
from wiring import context_of

CHECKS = (
    beside.circulating, beside.stiff, loops.converter_loop, loops.zero_ohm_ring, shared_return.shared_return,
    sharing.uneven_sharing, sharing.strings, stays_live.stays_live, stays_live.always_live, topology.unfed,
    topology.unfed_parts, topology.two_runs, topology.lonely_point, voltage.mismatch, voltage.load_mismatch,
)  # fmt: skip
ARRAY = {"voc": "24 V", "isc": "3 A", "vmp": "20 V", "imp": "2 A"}
POINTS = ("a", "b", "c", "d")


def tangle(chance: random.Random) -> str:
    """The text of a plan of up to four points in which anything may stand between any two."""

    def ends() -> dict[str, Any]:
        start, end = chance.sample(POINTS, 2)
        return {"from": start, "to": end}

    def some(most: int) -> range:
        return range(chance.randint(0, most))

    runs = [
        {"name": f"r{n}", **ends(), "length": chance.choice(("1 mm", "1 m", "40 m")), "size": "10 mm2"}
        | chance.choice(({}, {}, {"carries": "feed"}, {"carries": "return"}, {"return": "chassis"}))
        for n in some(7)
    ]
    runs += [{"name": f"b{n}", "from": chance.choice(POINTS), "to": "chassis", "length": "1 m", "size": "6 mm2"}
             for n in some(2)]  # fmt: skip
    devices = [
        {"name": f"d{n}", **ends(), "kind": chance.choice(("switch", "relay", "selector", "shunt", "diode"))}
        | {"pole": chance.choice(("feed", "return", "both")), "state": chance.choice(("closed", "closed", "open"))}
        | chance.choice(({}, {"resistance": "0 ohm"}))
        for n in some(4)
    ]
    return text_of({
        "format": 1,
        "plan": {"name": "Tangle", "nominal": "12 V"},
        "sources": [{"name": "s", "kind": "battery", "at": "a", "emf": "12.8 V", "resistance": "5 mohm"}]
        + [_source(chance, f"s{n}", ends()) for n in some(4)],
        "runs": runs,
        "devices": devices,
        "loads": [{"name": f"l{n}", "at": chance.choice(POINTS), "current": "3 A",
                   "rated_volts": chance.choice(("6 V", "12 V", "48 V"))} for n in some(3)],
        "cases": [{"name": "c"}, {"name": "o", "devices": {one["name"]: "open" for one in devices[:1]}}],
    })  # fmt: skip


def _source(chance: random.Random, name: str, ends: dict[str, Any]) -> dict[str, Any]:
    kind = chance.choice(("battery", "charger", "converter", "solar"))
    at = {"name": name, "kind": kind, "at": ends["to"]}
    volts = chance.choice(("12 V", "14 V", "27 V"))
    return at | {
        "battery": {"emf": volts, "resistance": chance.choice(("1e-6 ohm", "9 mohm")), "strings": chance.choice((1, 3))}
        | chance.choice(({}, {"link": {"length": "1 m", "size": "16 mm2"}, "take_off": "same end"})),
        "charger": {"volts": volts, "amps": "9 A"} | chance.choice(({}, {"resistance": "1e-6 ohm"})),
        "converter": {"from": ends["from"], "nominal": "12 V", "volts": volts, "amps": "9 A", "efficiency": "90 %"}
        | {"isolated": chance.choice((True, False))},
        "solar": {"power": "50 W", "ceiling": "14 V"}
        | chance.choice(({}, {"array": ARRAY | {"at": ends["from"]}})),
    }[kind]  # fmt: skip


@settings(max_examples=120, deadline=None)
@given(st.randoms(use_true_random=False).map(tangle))
def test_a_tangle_is_named(text: str) -> None:
    plan = planfile.parse(text)
    context = context_of(plan)
    names = {
        "run": {one.name for one in plan.runs}, "device": {one.name for one in plan.devices},
        "source": {one.name for one in plan.sources}, "load": {one.name for one in plan.loads},
        "point": set(plan.point_names), "plan": {plan.plan.name},
    }  # fmt: skip
    seen = set()
    for check in CHECKS:
        for found in check(context):
            assert found.subject in names[found.kind]
            assert found.value is None or math.isfinite(found.value)
            assert found.limit is None or math.isfinite(found.limit)
            told = " ".join((found.message, *found.working, found.remedy or ""))
            assert not {"nan", "inf"} & set(told.split())
            assert found.basis
            assert (found.rule, found.subject, found.message) not in seen
            seen.add((found.rule, found.subject, found.message))
