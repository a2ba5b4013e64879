"""What a feeder is to be sized for when not all of its loads are on at once: small-craft practice of two columns.

Column A: loads that are on for long, in full. Column B: the others, of which the larger of the largest item and 10 %
of their sum is counted (ABYC E-11 load calculation, from memory). A converter counts as what its own loads ask for.
"""

from collections import deque
from dataclasses import dataclass

from farvolt import operating
from farvolt.network import Network
from farvolt.plan import CHASSIS, Battery, Converter, Load, Plan
from farvolt.units import number

BASIS = "ABYC E-11, load calculation in two columns (from memory, provisional)"

TENTH = 0.1


@dataclass(frozen=True, slots=True)
class Item:
    """A load in amperes at the nominal voltage of the feeder it hangs on."""

    name: str
    amps: float
    continuous: bool


@dataclass(frozen=True, slots=True)
class Demand:
    """The demand of a feeder with its items."""

    run: str
    items: tuple[Item, ...]

    @property
    def column_a_A(self) -> float:
        """Continuous loads, in full."""
        return sum(one.amps for one in self.items if one.continuous)

    @property
    def column_b_A(self) -> float:
        """Sum of the intermittent loads."""
        return sum(one.amps for one in self.items if not one.continuous)

    @property
    def counted_b_A(self) -> float:
        """What of them is counted: the larger of the largest item and 10 % of the sum."""
        largest = max((one.amps for one in self.items if not one.continuous), default=0.0)
        return max(largest, TENTH * self.column_b_A)

    @property
    def amps(self) -> float:
        """Demand of the feeder."""
        return self.column_a_A + self.counted_b_A

    @property
    def working(self) -> tuple[str, ...]:
        """The sums with their numbers."""
        b = [number(one.amps) for one in self.items if not one.continuous]
        a = [number(one.amps) for one in self.items if one.continuous]
        return (
            f"column A, continuous: {' + '.join(a) or '0'} = {number(self.column_a_A, 4)} A",
            f"column B, intermittent: {' + '.join(b) or '0'} = {number(self.column_b_A, 4)} A",
            f"the larger of the largest in B and 10 % of B: {number(self.counted_b_A, 4)} A",
            f"{number(self.column_a_A, 4)} A + {number(self.counted_b_A, 4)} A = {number(self.amps, 4)} A",
        )


def demands(network: Network) -> tuple[Demand, ...]:
    """The demand of every run that feeds several loads or converters, in the order of the plan.

    Loads are counted along the shortest way from the battery, or from the converter that feeds them.
    """
    plan, islands = network.plan, operating.islands(network)
    tree = _tree(plan)
    found: dict[str, list[Item]] = {run.name: [] for run in plan.runs}

    def nominal_V(point: str) -> float:
        return islands.nominal(network.feed(point))

    def add(point: str, item: Item) -> None:
        while point in tree.before:
            point, run = tree.before[point]
            if run is not None:
                found[run].append(item)

    for load in plan.loads:
        add(load.at, _load_item(load, nominal_V(load.at)))
    # A converter is added once all that hangs on its output is known: those furthest from a battery first.
    outputs: dict[str, list[Item]] = {}
    for one in reversed(_outward(plan, tree)):
        behind = [_load_item(load, nominal_V(load.at)) for load in plan.loads if tree.root.get(load.at) == one.at]
        behind += outputs.get(one.at, [])
        item = _converter_item(one, Demand("", tuple(behind)), nominal_V(one.at), nominal_V(one.from_point))
        outputs.setdefault(tree.root.get(one.from_point, ""), []).append(item)
        add(one.from_point, item)
    return tuple(Demand(run.name, tuple(found[run.name])) for run in plan.runs if len(found[run.name]) > 1)


def _load_item(load: Load, nominal_V: float) -> Item:
    watts, amps, siemens = operating.rated(load, nominal_V)
    return Item(load.name, watts / nominal_V + amps + nominal_V * siemens, load.continuous)


def _converter_item(one: Converter, behind: Demand, output_V: float, input_V: float) -> Item:
    drawn_W = behind.amps * output_V / one.efficiency.si + one.standby.si
    return Item(one.name, drawn_W / input_V, behind.column_a_A >= behind.counted_b_A)


@dataclass(frozen=True, slots=True)
class _Tree:
    before: dict[str, tuple[str, str | None]]
    """Point to the one before it, and the run between them."""
    root: dict[str, str]
    """Point to where its way begins."""


def _tree(plan: Plan) -> _Tree:
    """Ways out from batteries, then from converters' outputs, then from the other sources."""
    joins: dict[str, list[tuple[str, str | None]]] = {}
    for run in plan.runs:
        if run.conducts != "return" and CHASSIS not in (run.from_point, run.to_point):
            joins.setdefault(run.from_point, []).append((run.to_point, run.name))
            joins.setdefault(run.to_point, []).append((run.from_point, run.name))
    for device in plan.devices:
        joins.setdefault(device.from_point, []).append((device.to_point, None))
        if device.kind != "diode" or device.pole == "return":
            joins.setdefault(device.to_point, []).append((device.from_point, None))
    order = sorted(plan.sources, key=lambda one: (
        one.name != plan.reference, not isinstance(one, Battery), not isinstance(one, Converter)
    ))  # fmt: skip
    before: dict[str, tuple[str, str | None]] = {}
    root: dict[str, str] = {}
    for source in order:
        if source.at in root:
            continue
        root[source.at] = source.at
        todo = deque([source.at])
        while todo:
            point = todo.popleft()
            for far, name in joins.get(point, ()):
                if far not in root:
                    before[far], root[far] = (point, name), source.at
                    todo.append(far)
    return _Tree(before, root)


def _outward(plan: Plan, tree: _Tree) -> list[Converter]:
    """Converters that feed a part of the plan alone, each after the one that feeds it."""
    waiting = [one for one in plan.sources if isinstance(one, Converter) and tree.root.get(one.at) == one.at]
    outputs = {one.at for one in waiting}
    found: list[Converter] = []
    while waiting:
        done = {one.at for one in found}
        ready = [one for one in waiting if tree.root.get(one.from_point) not in outputs - done]
        if not ready:
            break  # converters in a ring feed nothing
        found += ready
        waiting = [one for one in waiting if one not in ready]
    return found
