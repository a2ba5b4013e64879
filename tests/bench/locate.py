"""How often simulated bad joints are found from simulated readings, how often a sound installation raises an alarm.

    python tests/bench/locate.py [TRIALS] [PART ...]

Installations are built from the example plans and from random radial and meshed plans, their sound parts within the
tolerances. The true voltages come from a second account of the circuit and not from the solver; a meter of
±(0.5 % + 2 digits) says what is read. Parts:

    spice   a twentieth of the installations, held against ngspice
    sound   no fault: false alarms
    one     one bad joint of 5 to 200 mohm: 3 to 6 readings on the way to the load that suffers most
    two     two bad joints
    next    one bad joint: two readings, then what is proposed, until the fault is unique, at most 4 more

A fault is visible in its readings where in truth it moves them by at least 4 standard deviations of what the meter
and the tolerances allow. Those below are counted apart: no reading could tell them from a sound installation.
"""

import math
import random
import statistics
import sys
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1]))

from built import BadJoint, Built, metered
from farvolt import examples, planfile, reading_table, rulebook
from farvolt.errors import FarvoltError
from farvolt.installation import Installation, measured
from farvolt.locate import Located, locate
from farvolt.network import FEED, RETURN
from farvolt.next_reading import next_readings
from farvolt.plan import Case
from farvolt.readings import Pin, ReadingSet
from strategies import Wishes, plan_of, random_draft

TRIALS = 200
PARTS = ("spice", "sound", "one", "two", "next")
MOST_NEXT = 4
SEEN = 4.0

RADIAL = Wishes(loops=0, charger_only=0.0, load_share=1.0)
MESHED = Wishes(loops=5, points=(5, 12), charger_only=0.0, load_share=1.0)
KINDS = ("instrument-repair-van", "bird-observatory-cabin", "radial", "meshed")


@dataclass
class Trial:
    """An installation in a case, with its faults."""

    kind: str
    seed: int
    installation: Installation
    built: Built
    case: Case
    chance: random.Random
    faults: tuple[BadJoint, ...] = ()
    taken: list[tuple[Pin, Pin, Case, str]] = field(default_factory=list)

    def take(self, start: Pin, end: Pin, case: Case) -> bool:
        """Take one reading; False where there is nothing to read."""
        true_V = self.built.true_V(case, start, end)
        if true_V is None:
            return False
        self.taken.append((start, end, case, metered(self.chance, true_V)))
        return True

    def sets(self) -> tuple[ReadingSet, ...]:
        """The readings taken so far, as the table of a user would give them."""
        names = list(dict.fromkeys(case.name for _, _, case, _ in self.taken))
        rows = [(1, ["set", "case", "from", "from pole", "to", "to pole", "volts"])]
        poles = ("feed", "return")
        for at, (start, end, case, shown) in enumerate(self.taken):
            rows.append((at + 2, [str(names.index(case.name)), case.name, start[0], poles[start[1]], end[0],
                                  poles[end[1]], shown]))  # fmt: skip
        return reading_table.from_rows(rows, self.installation.plan)

    def located(self) -> Located:
        """What the tool says."""
        return locate(self.installation, self.sets())

    def strength(self, fault: BadJoint) -> float:
        """By how many standard deviations of the meter and the tolerances a fault in truth moves the readings."""
        found = measured(self.installation, self.sets())
        without = self.built.with_joints(*(one for one in self.faults if one is not fault))
        moved = []
        for reading, state in zip(found.readings, found.states, strict=True):
            ends = (reading.start or ("", 0), reading.end or ("", 0))
            pair = self.built.true_V(state.case, *ends), without.true_V(state.case, *ends)
            moved.append(0.0 if None in pair else float(pair[0] or 0.0) - float(pair[1] or 0.0))
        return float(np.linalg.norm(found.evidence().white(np.array(moved))))


def trial(kind: str, seed: int, faults: int) -> Trial | None:
    """A random installation with so many bad joints in conductors that carry current; None where it gives way."""
    chance = random.Random(f"{kind} {seed} {faults}")
    installation = _installation(kind, seed)
    if installation is None:
        return None
    case = chance.choice(installation.plan.checked_cases)
    built = Built(installation.plan, installation.rulebook, chance)
    try:
        state = installation.state(case)
    except FarvoltError:
        return None
    places = [
        (cause, abs(float(state.solved.branch_A[cause.branch])))
        for cause in installation.causes(state)
        if cause.kind == "joint" and (cause.at >= 0 or cause.words.split()[0] in _DEVICES)
    ]
    carrying = [cause for cause, amps in places if amps > 0.2]
    if len(carrying) < max(faults, 1):
        return None
    bad = []
    for cause in chance.sample(carrying, faults):
        table = "runs" if cause.at >= 0 else "devices"
        bad.append(BadJoint(table, cause.name, cause.pole, 5e-3 * 40 ** chance.random()))
    made = Trial(kind, seed, installation, built.with_joints(*bad), case, chance, tuple(bad))
    return made if made.built.volts(case) is not None else None


_DEVICES = ("switch", "selector", "relay", "shunt", "connector")
_kept: dict[str, Installation] = {}


def _installation(kind: str, seed: int) -> Installation | None:
    if kind in examples.names():
        if kind not in _kept:
            plan = planfile.parse(examples.text(kind))
            _kept[kind] = Installation(plan, rulebook.load(plan.plan.rulebook))
        return _kept[kind]
    plan = plan_of(random_draft(random.Random(seed), RADIAL if kind == "radial" else MESHED))
    return Installation(plan, rulebook.load("small-craft-iso"))


def sufferer(made: Trial) -> str | None:
    """The load whose voltage the faults lower most: the one that its user complains of; any that is fed if sound."""
    case, sound = made.case, made.built.with_joints()
    lost: dict[str, float] = {}
    for load in made.installation.plan.loads:
        pins = ((load.at, FEED), (load.at, RETURN))
        pair = made.built.true_V(case, *pins), sound.true_V(case, *pins)
        if pair[0] is not None and pair[1] is not None and case.share(load.name) > 0:
            lost[load.at] = max(lost.get(load.at, -1.0), pair[1] - pair[0])
    if not lost:
        return None
    if not made.faults:
        return made.chance.choice(list(lost))
    return max(lost, key=lambda point: lost[point])


def way(made: Trial, point: str) -> list[Pin]:
    """The nodes on the shortest way from the reference source to a point, in the feed and back."""
    plan = made.installation.plan
    source = next(one for one in plan.sources if one.name == plan.reference)
    found: list[Pin] = []
    for pole, names in ((FEED, ("both", "feed")), (RETURN, ("both", "return"))):
        beside: dict[str, list[str]] = {}
        for run in plan.runs:
            if run.conducts in names and (pole == FEED or run.return_path != "chassis"):
                beside.setdefault(run.from_point, []).append(run.to_point)
                beside.setdefault(run.to_point, []).append(run.from_point)
        for device in plan.devices:
            beside.setdefault(device.from_point, []).append(device.to_point)
            beside.setdefault(device.to_point, []).append(device.from_point)
        found += [(name, pole) for name in _shortest(beside, source.at, point) if name != "chassis"]
    return found


def _shortest(beside: dict[str, list[str]], start: str, end: str) -> list[str]:
    before: dict[str, str] = {start: start}
    queue = [start]
    for name in queue:
        for other in beside.get(name, ()):
            if other not in before:
                before[other] = name
                queue.append(other)
    path = [end]
    while path[-1] in before and path[-1] != start:
        path.append(before[path[-1]])
    return path[::-1] if path[-1] == start else []


def read_along(made: Trial, count: int) -> bool:
    """So many readings as a fitter takes them: at the source, at the load, then stretches of the way between."""
    plan = made.installation.plan
    point = sufferer(made)
    source = next(one.at for one in plan.sources if one.name == plan.reference)
    if point is None:
        return False
    pins = way(made, point)
    stretches = [(a, b) for at, a in enumerate(pins) for b in pins[at + 1 :] if a[1] == b[1] and a != b]
    made.chance.shuffle(stretches)
    if point != source:
        made.take((source, FEED), (source, RETURN), made.case)
        made.take((point, FEED), (point, RETURN), made.case)
    network = made.installation.network
    for a, b in stretches:
        if len(made.taken) >= count:
            break
        if network.nodes[a] != network.nodes[b]:
            made.take(a, b, made.case)
    return len(made.taken) >= min(count, 3)


# What came of it --------------------------------------------------------------------------------------------------


@dataclass(frozen=True)
class Outcome:
    """One trial. `rank` is of the worst placed true joint that is visible: "first", "group" or "unnamed", or "fits"
    where the readings were said to fit the plan. `visible`: how many of the faults were. `stated` is the probability
    that the first suspect was given."""

    kind: str
    seed: int
    faults: int
    visible: int
    rank: str
    size: int
    stated: float
    readings: int
    unique: bool
    strength: float
    """Of the weakest fault that is visible; of the strongest where none is."""


def outcome(made: Trial) -> Outcome:
    """Compare what the tool says with the truth."""
    strengths = [made.strength(fault) for fault in made.faults]
    seen = [fault for fault, strength in zip(made.faults, strengths, strict=True) if strength >= SEEN]
    found = made.located()
    first = {_key(found, index) for index in found.explanations[0].causes} if found.explanations else set()
    named = {_key(found, index) for one in found.explanations for index in one.causes}
    true = [_true(made, fault) for fault in (seen or made.faults)]
    if found.fits:
        rank = "fits"
    elif all(one in first for one in true):
        rank = "first"
    else:
        rank = "group" if all(one in named for one in true) else "unnamed"
    share = found.suspects[0].probability if found.suspects else 0.0
    return Outcome(made.kind, made.seed, len(made.faults), len(seen), rank, len(found.explanations), share,
                   len(made.taken), found.unique,
                   min((one for one in strengths if one >= SEEN), default=max(strengths, default=0.0)))  # fmt: skip


Key = tuple[str, str, str]


def _key(found: Located, index: int) -> Key:
    cause = found.evidence.causes[index]
    return ("joint" if cause.kind == "joint" else cause.kind), cause.name, cause.pole


def _true(made: Trial, fault: BadJoint) -> Key:
    return "joint", fault.name, fault.pole


def trials(count: int, faults: int) -> Iterator[Trial]:
    """So many installations, the kinds in turn."""
    made, seed = 0, 0
    while made < count:
        for kind in KINDS:
            one = trial(kind, seed, faults)
            if one is not None and made < count:
                made += 1
                yield one
        seed += 1


def along(count: int, faults: int) -> list[Outcome]:
    """3 to 6 readings on the way to the load that suffers."""
    found = []
    for one in trials(count, faults):
        if read_along(one, one.chance.randint(3, 6)):
            found.append(_judged(one))
    return found


def _judged(one: Trial) -> Outcome:
    try:
        return outcome(one)
    except FarvoltError as error:
        print(f"    {one.kind} {one.seed}: {error}")
        return Outcome(one.kind, one.seed, len(one.faults), len(one.faults), "refused", 0, 0.0, len(one.taken), False,
                       math.inf)  # fmt: skip


def proposed(count: int) -> list[Outcome]:
    """Two readings, then those that the tool proposes."""
    found = []
    for one in trials(count, 1):
        if not read_along(one, 2) and len(one.taken) < 2:
            continue
        began = len(one.taken)
        try:
            for _ in range(MOST_NEXT):
                located = one.located()
                if located.unique:
                    break
                nexts = next_readings(located, count=1)
                if not nexts or not one.take(nexts[0].start, nexts[0].end, nexts[0].state.case):
                    break
        except FarvoltError as error:
            print(f"    {one.kind} {one.seed}: {error}")
        judged = _judged(one)
        found.append(Outcome(**{**judged.__dict__, "readings": len(one.taken) - began}))
    return found


def percent(part: float, whole: float) -> str:
    """A share with its 95 % interval (Wilson 1927)."""
    if not whole:
        return "-"
    share, z = part / whole, 1.96
    middle = (share + z * z / (2 * whole)) / (1 + z * z / whole)
    half = z * math.sqrt(share * (1 - share) / whole + z * z / (4 * whole**2)) / (1 + z * z / whole)
    return f"{100 * share:5.1f} % ({100 * (middle - half):.1f} to {100 * (middle + half):.1f})"


def tell(title: str, found: Sequence[Outcome]) -> None:
    """Print what came of the trials of a part."""
    print(f"\n{title}: {len(found)} installations")
    for kind in (*KINDS, "all"):
        mine = [one for one in found if kind in (one.kind, "all")]
        seen = [one for one in mine if one.visible]
        hits = sum(one.rank in ("first", "group") for one in seen)
        first = sum(one.rank == "first" for one in seen)
        blind = [one for one in mine if not one.visible]
        quiet = sum(one.rank in ("fits", "first", "group") for one in blind)
        sizes = [one.size for one in seen if one.rank in ("first", "group")]
        size = statistics.median(sizes) if sizes else 0
        print(f"  {kind:24} visible {len(seen):4}: first or in group {percent(hits, len(seen))}, first "
              f"{percent(first, len(seen))}; median group {size:g}; not visible {len(blind):4}: not misled "
              f"{percent(quiet, len(blind))}")  # fmt: skip
    for least, most in ((SEEN, 5.0), (5.0, 8.0), (8.0, math.inf)):
        band = [one for one in found if one.visible and least <= one.strength < most]
        hits = sum(one.rank in ("first", "group") for one in band)
        print(f"  moved by {least:g} to {most:g} deviations: {len(band):4}: first or in group "
              f"{percent(hits, len(band))}")  # fmt: skip
    for least, most in ((0.0, 0.5), (0.5, 0.8), (0.8, 0.95), (0.95, 1.01)):
        band = [one for one in found if one.faults == 1 and one.rank != "fits" and least <= one.stated < most]
        true = sum(one.rank == "first" for one in band)
        if band:
            print(f"  first suspect stated at {100 * least:.0f} to {100 * min(most, 1):.0f} %, on average "
                  f"{100 * statistics.mean(one.stated for one in band):.0f} %: true in {percent(true, len(band))} of "
                  f"{len(band)}")  # fmt: skip
    missed = [(one.kind, one.seed, one.rank) for one in found if one.visible and one.rank not in ("first", "group")]
    if missed:
        print(f"  missed: {missed[:20]}")


def tell_sound(found: Sequence[Outcome]) -> None:
    """Print the false alarms."""
    print(f"\nno fault: {len(found)} installations")
    for kind in (*KINDS, "all"):
        mine = [one for one in found if kind in (one.kind, "all")]
        print(f"  {kind:24} false alarms {percent(sum(one.rank != 'fits' for one in mine), len(mine))}")
    wrong = [(one.kind, one.seed, one.rank) for one in found if one.rank != "fits"]
    if wrong:
        print(f"  alarms: {wrong[:20]}")


def tell_proposed(found: Sequence[Outcome]) -> None:
    """Print how often the fault is unique after the proposed readings."""
    tell("proposed readings (one bad joint)", found)
    for kind in (*KINDS, "all"):
        seen = [one for one in found if one.visible and kind in (one.kind, "all")]
        good = [one for one in seen if one.unique and one.rank == "first"]
        wrong = sum(one.unique and one.rank != "first" for one in seen)
        took = statistics.mean(one.readings for one in good) if good else 0
        print(f"  {kind:24} unique and right within {MOST_NEXT} more: {percent(len(good), len(seen))}, after "
              f"{took:.1f} on average; unique and wrong {wrong}")  # fmt: skip


def tell_spice(count: int) -> None:
    """Print the largest difference of the true voltages from those of ngspice."""
    pairs = [(one.kind, one.built.against_spice_V(one.case)) for one in trials(count, 1)]
    worst = max((volts for _, volts in pairs if volts is not None), default=math.nan)
    answered = sum(volts is not None for _, volts in pairs)
    print(f"\nngspice: {answered} of {count} answered, largest difference {worst:.1e} V", flush=True)


def main(count: int = TRIALS, parts: Sequence[str] = PARTS) -> None:
    """Print all parts."""
    if "spice" in parts:
        tell_spice(max(count // 20, 4))
    if "sound" in parts:
        tell_sound(along(count, 0))
    if "one" in parts:
        tell("one bad joint", along(count, 1))
    if "two" in parts:
        tell("two bad joints", along(count, 2))
    if "next" in parts:
        tell_proposed(proposed(count))


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else TRIALS, sys.argv[2:] or PARTS)
