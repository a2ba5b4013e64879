"""Fault currents against ngspice on random two-wire plans: a source of 0 V stands for the short."""

import random
import shutil
import subprocess
import tempfile
from dataclasses import replace
from pathlib import Path

import pytest

from circuit import Circuit, Feeder, circuit_of
from farvolt.fault_network import coldest
from farvolt.network import build
from farvolt.operating import islands
from farvolt.plan import Plan
from farvolt.rulebook import load
from farvolt.shorts import LEAK_S
from strategies import Wishes, plan_of, random_draft

pytestmark = [
    pytest.mark.spice,
    pytest.mark.skipif(shutil.which("ngspice") is None, reason="the ngspice program is not installed"),
]

KINDS: dict[str, tuple[Wishes, int]] = {
    "mixed": (Wishes(busbars=0), 20),
    "meshed": (Wishes(loops=8, points=(6, 14), busbars=0), 10),
    "diodes, solar and converters": (Wishes(converters=1, solar=0.7, diodes=1, busbars=0), 20),
    "nothing but a charger": (Wishes(charger_only=1, converters=0, busbars=0), 10),
}
OPTIONS = "reltol=1e-9 abstol=1e-9 vntol=1e-9 gmin=1e-15 itl1=1000 itl4=1000 trtol=1e9 method=gear maxord=1"


def drawn(seed: int, wishes: Wishes) -> Plan:
    """A random plan of batteries, chargers and conductors in one case at 20 degC, everything on and closed."""
    draft = random_draft(random.Random(seed), wishes)
    return plan_of(draft | {"loads": [], "cases": [{"name": "Short", "ambient": "20 degC"}]})


def account(plan: Plan) -> Circuit:
    """The plan's circuit by its own account, at its most: controllers at their limit, no battery that charges."""
    whole = circuit_of(plan, plan.checked_cases[0])
    feeders = [replace(one, watts=float("inf"), low=0.0, leak_S=LEAK_S) for one in whole.feeders]
    return replace(whole, feeders=feeders, couplings=[], drains=[])


def shorted(circuit: Circuit, feed: int, back: int) -> float:
    """The current of a short between two nodes by ngspice, A. A small capacitance at every source leads it there."""
    lines = [f"Vground{min(part)} n{min(part)} 0 0" for part in circuit.parts]
    lines += [f"R{index} n{one.a} n{one.b} {one.ohm!r}" for index, one in enumerate(circuit.resistors)]
    for index, one in enumerate(circuit.feeders):
        lines += [*_feeder(one, index), f"C{index} n{one.a} n{one.b} 1m"]
    lines.append(f"Vshort n{feed} n{back} 0")
    control = ["set numdgt=16", "set wr_singlescale", "tran 0.1 4 0 0.1 uic", "wrdata short.txt i(vshort)", "quit"]
    deck = ["* a short", *lines, f".options {OPTIONS}", ".control", *control, ".endc", ".end"]
    with tempfile.TemporaryDirectory() as folder:
        Path(folder, "deck.cir").write_text("\n".join(deck) + "\n", encoding="utf-8")
        subprocess.run(["ngspice", "-b", "deck.cir"], cwd=folder, capture_output=True, timeout=300, check=False)
        rows = Path(folder, "short.txt").read_text(encoding="utf-8").split("\n")
    last = [float(word) for word in [row for row in rows if row.strip()][-1].split()]
    assert last[0] == pytest.approx(4)
    return last[1]


def _feeder(one: Feeder, index: int) -> list[str]:
    law = f"max(({one.volts!r}-v(n{one.a},n{one.b}))/{one.ohm!r},0)"
    law = f"min({law},{one.high!r})" if one.high != float("inf") else law
    return [f"B{index} n{one.b} n{one.a} I={law}", f"Rl{index} n{one.a} n{one.b} {1 / one.leak_S!r}"]


@pytest.mark.parametrize("kind", KINDS)
def test_a_short_draws_what_ngspice_says(kind: str) -> None:
    wishes, count = KINDS[kind]
    first, compared, wrong = 50_000 + 1000 * list(KINDS).index(kind), 0, []
    for seed in range(first, first + count):
        plan = drawn(seed, wishes)
        built = build(plan, load(plan.plan.rulebook))
        (net,) = coldest(built, islands(built))
        circuit = account(plan)
        parts = [part for part in circuit.parts if len(part) > 1]
        for name in random.Random(seed).sample(plan.point_names, min(2, len(plan.point_names))):
            (found,) = net.circuit.shorted([net.point(name)])
            feed, back = circuit.pins[name, "+"], circuit.pins[name, "-"]
            if not any({feed, back} <= part for part in parts):
                continue
            expected = shorted(circuit, feed, back)
            compared += 1
            assert found.certified
            if found.amps != pytest.approx(expected, rel=2e-6, abs=1e-3):
                wrong.append((seed, name, found.amps, expected))
    assert wrong == []
    assert compared >= count
