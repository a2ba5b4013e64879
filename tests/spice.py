"""The volts of a plan by another program: a netlist for ngspice, and what it answers.

Loads are raised from zero to full in steps of one sweep, each step starting from the one before: the same way up
that the solver claims, gone by a program that shares no line with it.
"""

import subprocess
import tempfile
from dataclasses import dataclass
from itertools import count
from pathlib import Path

from circuit import Circuit, Drain, Feeder, connected

OPTIONS = "reltol=1e-9 abstol=1e-9 vntol=1e-9 gmin=1e-15 itl1=1000 itl2=1000 itl4=1000 trtol=1e9 method=gear maxord=1"


@dataclass(frozen=True)
class Answer:
    """What ngspice found at each share of the loads: node volts, every part from its own ground."""

    shares: list[float]
    volts: list[dict[int, float]]

    @property
    def complete(self) -> bool:
        """Whether it reached the full loads."""
        return bool(self.shares) and abs(self.shares[-1] - 4) < 1e-9


def netlist(circuit: Circuit, steps: int, target: str) -> str:
    """The circuit as a netlist with a sweep of the loads in `steps`, written to the file `target`."""
    number = count(1)
    lines = ["* loads raised from zero", "Vshare share 0 PWL(0 0 2 1 4 1)"]
    grounds = {min(part): 0 for part in circuit.parts}
    lines += [f"Vground{node} n{node} 0 0" for node in grounds]
    lines += [f"R{next(number)} n{one.a} n{one.b} {one.ohm!r}" for one in circuit.resistors]
    for feeder in circuit.feeders:
        lines += _feeder(feeder, next(number))
    for drain in circuit.drains:
        lines.append(_drain(drain, f"(v(share)*{drain.watts!r})", next(number)))
    for one in circuit.couplings:
        watts = f"({_u(one.feeder)}*({_amps(one.feeder)})/{one.efficiency!r}+v(share)*{one.standby_W!r})"
        lines.append(_drain(one.drain, watts, next(number)))
    lines += [f"C{next(number)} n{one.a} n{one.b} 1m" for one in (*circuit.feeders, *circuit.drains, *(x.drain for x in circuit.couplings))]
    lines += [f".ic v(n{node})={volts!r}" for node, volts in _hints(circuit).items()]
    names = " ".join(f"v(n{node})" for node in sorted(circuit.live))
    control = ["set numdgt=16", "set wr_singlescale", f"tran {1 / steps!r} 4 0 {1 / steps!r} uic", f"wrdata {target} {names}", "quit"]
    return "\n".join([*lines, f".options {OPTIONS}", ".control", *control, ".endc", ".end"]) + "\n"


def answer(circuit: Circuit, steps: int = 10) -> Answer:
    """Run ngspice on a circuit; an answer cut short is the reference's own failure to converge."""
    with tempfile.TemporaryDirectory() as folder:
        deck, target = Path(folder, "deck.cir"), Path(folder, "volts.txt")
        deck.write_text(netlist(circuit, steps, target.name), encoding="utf-8")
        subprocess.run(["ngspice", "-b", deck.name], cwd=folder, capture_output=True, timeout=60, check=False)
        rows = target.read_text(encoding="utf-8").split("\n") if target.exists() else []
    values = [[float(word) for word in row.split()] for row in rows if row.strip()]
    nodes = sorted(circuit.live)
    return Answer([row[0] for row in values], [dict(zip(nodes, row[1:], strict=True)) for row in values])


def _u(one: Feeder | Drain) -> str:
    return f"v(n{one.a},n{one.b})"


def _amps(one: Feeder) -> str:
    law = f"({one.volts!r}-{_u(one)})/{one.ohm!r}"
    if one.low != float("-inf"):
        law = f"max({law},{one.low!r})"
    if one.high != float("inf"):
        law = f"min({law},{one.high!r})"
    if one.watts != float("inf"):
        law = f"min({law},{one.watts!r}/max({_u(one)},1))"
    return law


def _feeder(one: Feeder, number: int) -> list[str]:
    if (one.low, one.high, one.watts) == (float("-inf"), float("inf"), float("inf")):
        return [f"V{number} e{number} n{one.b} {one.volts!r}", f"R{number}e e{number} n{one.a} {one.ohm!r}"]
    leak = [f"R{number}k n{one.a} n{one.b} {1 / one.leak_S!r}"] if one.leak_S else []
    return [f"B{number} n{one.b} n{one.a} I={_amps(one)}", *leak]


def _drain(one: Drain, watts: str, number: int) -> str:
    u, knee = _u(one), one.knee
    above = f"{watts}/max({u},{knee / 2!r})+v(share)*({one.amps!r}+{one.siemens!r}*{u})"
    below = f"{u}*({watts}/{knee**2!r}+v(share)*({one.amps / knee!r}+{one.siemens!r}))"
    return f"B{number} n{one.a} n{one.b} I=({u} >= {knee!r}) ? ({above}) : ({below})"


def _hints(circuit: Circuit) -> dict[int, float]:
    """Where to start: feeds at the highest voltage of what feeds them, with that source inside its droop."""
    feeds = {node for (_, pole), node in circuit.pins.items() if pole == "+"} & circuit.live
    diodes = [one for one in circuit.feeders if one.leak_S]
    joined = [(one.a, one.b) for one in (*circuit.resistors, *diodes) if one.a in feeds and one.b in feeds]
    part = connected(feeds, joined)
    hints = dict.fromkeys(circuit.live, 0.0)
    for node in feeds:
        beside = [one for one in circuit.feeders if part.get(one.a) == part[node]]
        hints[node] = max((one.volts - min(one.high, 1.0) * one.ohm / 2 for one in beside), default=0.0)
    return hints
