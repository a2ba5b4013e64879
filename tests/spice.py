"""The volts of a plan by another program: a netlist for ngspice, and what it answers.

It goes the way up that the solver claims: a small capacitance stands at every source and load, and in a transient
the loads rise from zero to full and then stay, until nothing moves. What it settles on is stable, and no better
solution was passed by. (Its operating point alone would start at full load, where one-way sources that are idle or
at their limit leave its equations singular.)
"""

import subprocess
import tempfile
from dataclasses import dataclass
from itertools import count
from pathlib import Path

from circuit import Circuit, Drain, Feeder, connected

STEP_S = 0.1
OPTIONS = "reltol=1e-9 abstol=1e-9 vntol=1e-9 gmin=1e-15 itl1=1000 itl4=1000 trtol=1e9 method=gear maxord=1"
"""First order and steps of their full length: only the end counts, not how accurately it gets there."""


@dataclass(frozen=True)
class Answer:
    """What ngspice found: node volts by time, every galvanic part from a ground of its own."""

    times_s: list[float]
    volts: list[dict[int, float]]
    rise_s: float

    @property
    def complete(self) -> bool:
        """Whether it reached the end; otherwise it failed to converge on the way."""
        return bool(self.times_s) and abs(self.times_s[-1] - 2 * self.rise_s) < 1e-9

    def share_held(self, circuit: Circuit) -> float:
        """The share of the loads at which the first of them falls below its knee; 1 where none does so early."""
        times_s = (time_s for time_s, volts in zip(self.times_s, self.volts, strict=True) if _falls(circuit, volts))
        return min(next(times_s, self.rise_s) / self.rise_s, 1.0)

    def holds(self, circuit: Circuit) -> bool:
        """Whether all loads are above their knees in the end."""
        return self.complete and not _falls(circuit, self.volts[-1])


def _falls(circuit: Circuit, volts: dict[int, float]) -> bool:
    """Whether a load that needs its voltage is below its knee."""
    demanding = [one for one in circuit.drains if one.watts or one.amps] + [one.drain for one in circuit.couplings]
    return any(volts[one.a] - volts[one.b] < one.knee for one in demanding)


def answer(circuit: Circuit, rise_s: float = 2.0) -> Answer:
    """Run ngspice on a circuit; the longer the rise, the nearer it stays to the volts of each share.

    The loads then stay on for as long again.
    """
    end_s = 2 * rise_s
    ends = [*circuit.feeders, *circuit.drains, *(one.drain for one in circuit.couplings)]
    start = no_load(circuit)
    rows = _run(circuit, [
        f"Vshare share 0 PWL(0 0 {rise_s!r} 1 {end_s!r} 1)",
        *(f"Cport{index} n{one.a} n{one.b} 100u" for index, one in enumerate(ends)),
        *(f".ic v(n{node})={volts!r}" for node, volts in start.items()),
    ], f"tran {STEP_S!r} {end_s!r} 0 {STEP_S!r} uic")  # fmt: skip
    return Answer([row[0] for row in rows], [_by_node(circuit, row) for row in rows], rise_s)


def operating_point(circuit: Circuit) -> dict[int, float] | None:
    """Node volts at once at full load, from a hint; None where it fails. Enough where a battery holds every part."""
    hints = [f".nodeset v(n{node})={volts!r}" for node, volts in no_load(circuit).items() if volts]
    rows = _run(circuit, ["Vshare share 0 1", *hints], "op")
    return _by_node(circuit, rows[-1]) if rows else None


def _by_node(circuit: Circuit, row: list[float]) -> dict[int, float]:
    return dict(zip(sorted(circuit.live), row[1:], strict=True))


def _run(circuit: Circuit, lines: list[str], analysis: str) -> list[list[float]]:
    """Rows of an analysis: time and the volts of all nodes in order."""
    names = " ".join(f"v(n{node})" for node in sorted(circuit.live))
    control = ["set numdgt=16", "set wr_singlescale", analysis, f"wrdata volts.txt {names}", "quit"]
    deck = ["* a plan", *_elements(circuit), *lines, f".options {OPTIONS}", ".control", *control, ".endc", ".end"]
    with tempfile.TemporaryDirectory() as folder:
        Path(folder, "deck.cir").write_text("\n".join(deck) + "\n", encoding="utf-8")
        subprocess.run(["ngspice", "-b", "deck.cir"], cwd=folder, capture_output=True, timeout=300, check=False)
        target = Path(folder, "volts.txt")
        rows = target.read_text(encoding="utf-8").split("\n") if target.exists() else []
    return [[float(word) for word in row.split()] for row in rows if row.strip()]


def _elements(circuit: Circuit) -> list[str]:
    number = count(1)
    lines = [f"Vground{min(part)} n{min(part)} 0 0" for part in circuit.parts]
    lines += [f"R{next(number)} n{one.a} n{one.b} {one.ohm!r}" for one in circuit.resistors]
    for feeder in circuit.feeders:
        lines += _feeder(feeder, next(number))
    for drain in circuit.drains:
        lines.append(_drain(drain, f"(v(share)*{drain.watts!r})", next(number)))
    for one in circuit.couplings:
        watts = f"({_u(one.feeder)}*({_amps(one.feeder)})/{one.efficiency!r}+v(share)*{one.standby_W!r})"
        lines.append(_drain(one.drain, watts, next(number)))
    return lines


def largest_difference_V(circuit: Circuit, one: dict[int, float], other: dict[int, float]) -> float:
    """The largest difference between two accounts of the node volts, each part counted from one of its nodes.

    Left out is what nothing flows in, such as an unloaded stretch behind a diode: in a transient it keeps the
    charge it was given. The volts of `other` say where that is.
    """
    worst = 0.0
    for part in _flowing(circuit, other):
        ground = min(part)
        worst = max(worst, *(abs(one[node] - one[ground] - other[node] + other[ground]) for node in part))
    return worst


def _flowing(circuit: Circuit, volts: dict[int, float]) -> list[set[int]]:
    """Nodes by the conductors and working elements that join them, where a source among these delivers."""
    across = {one.name: volts[one.a] - volts[one.b] for one in circuit.feeders}
    giving = [one for one in circuit.feeders if abs(one.amps(across[one.name]) + one.leak_S * across[one.name]) > 1e-6]
    edges = [(one.a, one.b) for one in (*circuit.resistors, *giving)]
    part = connected(circuit.live, edges)
    return [
        {node for node in part if part[node] == number} for number in {part[one.a] for one in giving if not one.leak_S}
    ]


def _u(one: Feeder | Drain) -> str:
    return f"v(n{one.a},n{one.b})"


def _amps(one: Feeder) -> str:
    law = f"({one.volts!r}-{_u(one)})/{one.ohm!r}"
    if one.low != float("-inf"):
        law = f"max({law},{one.low!r})"
    if one.high != float("inf"):
        law = f"min({law},{one.high!r})"
    if one.watts != float("inf"):
        law = f"min({law},{one.watts!r}/max({_u(one)},{one.floor!r}))"
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


def no_load(circuit: Circuit) -> dict[int, float]:
    """Where to start: feeds at the highest voltage of what feeds them, with that source just inside its droop."""
    feeds = {node for (_, pole), node in circuit.pins.items() if pole == "+"} & circuit.live
    diodes = [one for one in circuit.feeders if one.leak_S]
    part = connected(feeds, [(one.a, one.b) for one in (*circuit.resistors, *diodes) if {one.a, one.b} <= feeds])
    start = dict.fromkeys(circuit.live, 0.0)
    for node in feeds:
        beside = [one for one in circuit.feeders if part.get(one.a) == part[node]]
        start[node] = max((one.volts - min(one.high, 1.0) * one.ohm / 2 for one in beside), default=0.0)
    return start
