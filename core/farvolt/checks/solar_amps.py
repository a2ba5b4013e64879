"""The array's short-circuit current against its cables, devices and protection; and strings that feed a faulty one."""

from collections.abc import Iterator

from farvolt.checks.array_side import ArraySide, array_sides
from farvolt.checks.registry import apart, at_least, check, run_finding
from farvolt.context import Context, label, larger_sizes
from farvolt.plan import Device, Run
from farvolt.results import Finding
from farvolt.temperatures import run_ampacity
from farvolt.units import number

BRIGHT = 1.25
"""Sun brighter than at the module's rating, for three hours and more (NEC 690.8(A); from memory: provisional)."""

LASTING = 1.25
"""What lasts so long is counted with this again, for conductors and protection (NEC 690.8(B); provisional)."""

_BASIS = "NEC 690.8(A) and (B); common practice where another rulebook holds (provisional)"
_REVERSE = "NEC 690.9(A), IEC 62548; common practice where another rulebook holds (provisional)"
_LEAST_STRINGS = 3


def array_amps(side: ArraySide) -> float:
    """Greatest current of an array in A: its strings' short-circuit currents x 1.25."""
    return side.strings * side.array.isc.si * BRIGHT


def _working(side: ArraySide) -> str:
    strings, isc = f"{side.strings} string{'s' if side.strings > 1 else ''}", number(side.array.isc.si, 4)
    return f"{strings} x {isc} A x {BRIGHT} (bright sun) = {number(array_amps(side), 4)} A"


@check("solar.short-circuit-current", title="Short-circuit current of each array against what carries it")
def short_circuit_current(context: Context) -> Iterator[Finding]:
    """Cables, devices and protection on an array's side that its greatest current is too much for."""
    for side in array_sides(context):
        for index in side.runs:
            run = context.plan.runs[index]
            if run.purpose != "bond":
                yield from _cable(context, side, index, run)
                yield from _guards(side, run)
        for device in side.devices:
            yield from _device(side, device)


def _cable(context: Context, side: ArraySide, index: int, run: Run) -> Iterator[Finding]:
    """Where it lies the cable carries the greatest current; before correction, that x 1.25 again."""
    found = context.lowest_ampacity[index]
    if found is None or found.amps is None or found.table_amps is None:
        return  # conductor.ampacity says why it is not known
    amps, listed = array_amps(side), found.table_amps * found.parallel
    corrected, lasting = (amps, found.amps, "where it lies"), (amps * LASTING, listed, "before correction")
    over = [each for each in (corrected, lasting) if each[0] > each[1] * (1 + 1e-9)]
    if not over:
        return
    needs, limit, what = max(over, key=lambda each: each[0] / each[1] if each[1] else float("inf"))
    yield run_finding(
        "solar.short-circuit-current", "fail", run, needs, limit, "A",
        f"{label(run)} is to carry {apart(needs, limit)} A of its array; {number(limit)} A is its ampacity {what}",
        f"{_BASIS}; {found.basis}",
        (_working(side), *([f"x {LASTING} (lasting) = {number(needs, 4)} A"] if what == "before correction" else []),
         *found.working, f"{apart(needs, limit, 4)} A > {number(limit, 4)} A", *_shared(context, side, index)),
        _thicker(context, side, run),
    )  # fmt: skip


def _thicker(context: Context, side: ArraySide, run: Run) -> str:
    """The smallest larger size that carries the array's current in every case."""
    amps = array_amps(side)
    for size in larger_sizes(run.size) if run.size else []:
        changed = run.model_copy(update={"size": size})
        every = [
            run_ampacity(context.plan, context.rulebook, changed, one.case, context.together[run.name])
            for one in context.cases
        ]
        if all(
            one is not None and (one.amps or 0) >= amps and (one.table_amps or 0) * one.parallel >= amps * LASTING
            for one in every
        ):
            return f"{label(run)}: {size.name} carries the array's current where it lies"
    return "several cables in parallel, cables laid apart or in a cooler place, or fewer strings"


def _shared(context: Context, side: ArraySide, index: int) -> tuple[str, ...]:
    """A line of working where another way leads from the array to its controller too."""
    ends = {side.array.at}
    parts: list[Run | Device] = [context.plan.runs[other] for other in side.runs if other != index]
    edges = [(part.from_point, part.to_point) for part in [*parts, *side.devices]]
    for _ in edges:
        ends |= {point for edge in edges if ends & set(edge) for point in edge}
    shared = side.source.input_point in ends and side.source.input_point != side.array.at
    return ("Another way leads from the array to its controller; each is taken to carry all of it",) if shared else ()


def _guards(side: ArraySide, run: Run) -> Iterator[Finding]:
    needs = array_amps(side) * LASTING
    for guard in run.protections:
        if needs > guard.rating.si * (1 + 1e-9):
            rating = guard.rating.si
            yield run_finding(
                "solar.short-circuit-current", "fail", run, needs, rating, "A",
                f"{label(run)}: its {guard.rating} {guard.type} is rated below the {apart(needs, rating)} A that the "
                "array asks for: it may open in bright sun", _BASIS,
                (_working(side), f"x {LASTING} (lasting) = {apart(needs, rating, 4)} A > {number(rating, 4)} A"),
                f"a rating of at least {at_least(needs)} A that the cable's ampacity still allows",
            )  # fmt: skip


def _device(side: ArraySide, device: Device) -> Iterator[Finding]:
    if device.continuous is None:
        yield Finding(
            "solar.short-circuit-current", "warn", device.name, "device", None, array_amps(side), None, "A",
            f'"{device.name}" ({device.kind}) on the array\'s side of "{side.source.name}" states no continuous '
            "rating: not verified", _BASIS, (_working(side),), "state continuous from its data sheet",
        )  # fmt: skip
    elif array_amps(side) > device.continuous.si * (1 + 1e-9):
        amps, rating = array_amps(side), device.continuous.si
        yield Finding(
            "solar.short-circuit-current", "fail", device.name, "device", None, amps, rating, "A",
            f'"{device.name}" ({device.kind}) is rated {device.continuous}; its array may drive '
            f"{apart(amps, rating)} A",
            _BASIS, (_working(side), f"{apart(amps, rating, 4)} A > {number(rating, 4)} A"),
            f"a {device.kind} rated for at least {at_least(amps)} A DC",
        )  # fmt: skip


@check("solar.reverse-current", title="What parallel strings feed into a faulty one")
def reverse_current(context: Context) -> Iterator[Finding]:
    """Arrays whose other strings exceed the largest fuse that the maker of the modules allows."""
    for side in array_sides(context):
        if side.strings < 2:
            continue
        others, allowed = side.strings - 1, side.array.max_fuse
        amps = others * side.array.isc.si * BRIGHT
        sums = f"{others} other string{'s' if others > 1 else ''} x {number(side.array.isc.si, 4)} A x {BRIGHT} = "
        sums += f"{number(amps, 4)} A"
        if allowed is None and side.strings >= _LEAST_STRINGS:
            yield _reverse(side, amps, None, f"{side.strings} strings in parallel and no max_fuse stated: whether each "
                           "needs a fuse is not verified", (sums,), "state max_fuse from the data sheet; three strings "
                           "or more usually need a fuse each")  # fmt: skip
        elif allowed is not None and amps > allowed.si * (1 + 1e-9):
            yield _fuses(side, amps, allowed.si, sums)


def _fuses(side: ArraySide, amps: float, allowed: float, sums: str) -> Finding:
    """Each string needs a fuse: from 1.56 x its short-circuit current up to what the maker allows."""
    least = side.array.isc.si * BRIGHT * LASTING
    rating = f"{BRIGHT} x {LASTING} x {number(side.array.isc.si, 4)} A = {number(least, 4)} A"
    fits = f"a fuse in each string, rated from {at_least(least)} A to {number(allowed)} A, at the array"
    none = f"no fuse fits: {rating} is the least, above the {number(allowed)} A allowed; fewer strings in parallel"
    return _reverse(
        side, amps, allowed,
        f"a faulty string may be fed {apart(amps, allowed)} A by the others, above the {number(allowed)} A that its "
        "modules stand: each string needs a fuse, which the plan does not show",
        (sums, f"{apart(amps, allowed, 4)} A > {number(allowed, 4)} A", f"Least rating of a string's fuse: {rating}",
         "Current back from the battery is not counted: the controller is taken to block it"),
        fits if least <= allowed * (1 + 1e-9) else none,
    )  # fmt: skip


def _reverse(
    side: ArraySide, amps: float, limit: float | None, message: str, working: tuple[str, ...], remedy: str
) -> Finding:  # fmt: skip
    name = side.source.name
    return Finding(
        "solar.reverse-current", "warn", name, "source", None, amps, limit, "A", f'"{name}": {message}', _REVERSE,
        working, remedy,
    )  # fmt: skip
