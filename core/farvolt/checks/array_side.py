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
    """Points at which sources deliver and that it reaches: a plan that goes past the controller."""

    @property
    def strings(self) -> int:
        """Strings in parallel."""
        return self.array.modules // self.array.series


def array_sides(context: Context) -> Iterator[ArraySide]:
    """Every array of a plan."""
    for source in context.plan.sources:
        if isinstance(source, Solar) and source.array is not None:
            yield _side(context.plan, source, source.array)


def devices_on_array_sides(context: Context) -> set[str]:
    """Names of the devices on any array's side."""
    return {device.name for side in array_sides(context) for device in side.devices}


def _side(plan: Plan, source: Solar, array: SolarArray) -> ArraySide:
    """Walk outward from the array, up to the controller's input and no further than another source."""
    at: dict[str, list[tuple[Run | Device, str]]] = {}
    parts: list[Run | Device] = [*(run for run in plan.runs if run.conducts != "return"), *plan.devices]
    for part in parts:
        at.setdefault(part.from_point, []).append((part, part.to_point))
        at.setdefault(part.to_point, []).append((part, part.from_point))
    delivered_to = {one.at for one in plan.sources}
    seen, queue, reached = {array.at}, deque([array.at] * (array.at not in delivered_to)), set[int]()
    while queue:
        for part, other in at.get(queue.popleft(), ()):
            reached.add(id(part))
            if other not in seen:
                seen.add(other)
                if other not in delivered_to:  # nothing beyond belongs to the array
                    queue.append(other)
    joined = tuple(sorted(seen & delivered_to - {array.at}))
    if joined:  # where a cable goes past the controller, what is the array's own side cannot be told
        reached.clear()
    runs = tuple(index for index, run in enumerate(plan.runs) if id(run) in reached)
    return ArraySide(source, array, runs, tuple(one for one in plan.devices if id(one) in reached), joined)
