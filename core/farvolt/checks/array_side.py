"""The array side of a solar controller: what lies between its modules and its input, from the plan alone."""

from collections import deque
from collections.abc import Iterator
from dataclasses import dataclass

from farvolt.context import Context
from farvolt.plan import Device, Plan, Run, Solar, SolarArray


@dataclass(frozen=True, slots=True)
class ArraySide:
    """One array with the runs and devices reached from it without passing its controller."""

    source: Solar
    array: SolarArray
    runs: tuple[int, ...]
    devices: tuple[Device, ...]
    joined: tuple[str, ...]
    """Points of other sources that it reaches: a plan that goes past the controller."""

    @property
    def strings(self) -> int:
        """Strings in parallel."""
        return self.array.modules // self.array.series


def array_sides(context: Context) -> Iterator[ArraySide]:
    """Every array of a plan."""
    for source in context.plan.sources:
        if isinstance(source, Solar) and source.array is not None:
            yield _side(context.plan, source, source.array)


def on_array_sides(plan: Plan) -> set[str]:
    """Names of the runs and devices on any array's side."""
    names: set[str] = set()
    for source in plan.sources:
        if isinstance(source, Solar) and source.array is not None:
            side = _side(plan, source, source.array)
            names |= {plan.runs[index].name for index in side.runs} | {device.name for device in side.devices}
    return names


def _side(plan: Plan, source: Solar, array: SolarArray) -> ArraySide:
    """Walk outward from the array; the controller's output is where it ends."""
    at: dict[str, list[tuple[Run | Device, str]]] = {}
    parts_in_line: list[Run | Device] = [*plan.runs, *plan.devices]
    for part in parts_in_line:
        if isinstance(part, Device) or part.conducts != "return":
            at.setdefault(part.from_point, []).append((part, part.to_point))
            at.setdefault(part.to_point, []).append((part, part.from_point))
    seen, queue, parts = {array.at}, deque([array.at]), set[str]()
    while queue:
        for part, other in at.get(queue.popleft(), ()):
            if other == source.at:
                continue
            parts.add(part.name)
            if other not in seen:
                seen.add(other)
                queue.append(other)
    others = {one.at for one in plan.sources if one is not source} | {source.at}
    runs = tuple(index for index, run in enumerate(plan.runs) if run.name in parts)
    devices = tuple(device for device in plan.devices if device.name in parts)
    return ArraySide(source, array, runs, devices, tuple(sorted(seen & others)))
