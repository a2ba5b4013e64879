"""Whether a solar controller and its array go together: what is given away, and what cannot work."""

from collections.abc import Iterator

from farvolt.checks.array_side import ArraySide, array_sides
from farvolt.checks.registry import apart, check
from farvolt.context import Context
from farvolt.results import Finding, Severity
from farvolt.units import number

_PRACTICE = "common practice: a controller steps the array's voltage down to the battery's"
_MODULE = "physics: a module at its greatest power stands below its open-circuit voltage and short-circuit current"


@check("solar.controller", title="Solar controllers and their arrays against each other")
def controller(context: Context) -> Iterator[Finding]:
    """Arrays too low to charge, or of impossible ratings; controllers that pass on less than their array gives."""
    for side in array_sides(context):
        array, ceiling = side.array, side.source.ceiling.si
        pairs = ((array.voc, array.vmp, "voc, vmp", "V"), (array.isc, array.imp, "isc, imp", "A"))
        for high, low, names, unit in pairs:
            if low.si > high.si * (1 + 1e-9):
                message = f"its array states {names} as {high}, {low}: the second is never the higher"
                yield _finding(side, "warn", low.si, high.si, unit, message, _MODULE, (), "the data sheet's figures")
        volts = array.series * array.vmp.si
        sums = f"{array.series} in series x {array.vmp} = {number(volts, 4)} V, at 25 degC; less when they are hot"
        if volts <= ceiling * (1 + 1e-9):
            message = (
                f"its array's {number(volts)} V at greatest power is not above the {number(ceiling)} V to charge at"
            )
            yield _finding(side, "warn", volts, ceiling, "V", message, _PRACTICE, (sums,), "more modules in series")
        yield from _given_away(side)


def _given_away(side: ArraySide) -> Iterator[Finding]:
    """What the array gives in full sun beyond the controller's power or current: a choice, so a note."""
    array, source = side.array, side.source
    watts = array.modules * array.vmp.si * array.imp.si * source.efficiency.si
    limits = [(source.power.si, f"its power of {source.power}")]
    if source.amps is not None:
        limits.append((source.amps.si * source.ceiling.si, f"{source.amps} x {source.ceiling}"))
    limit, why = min(limits)
    if watts > limit * (1 + 1e-9):
        sums = f"{array.modules} x {array.vmp} x {array.imp} x {number(source.efficiency.si * 100)} % = "
        message = f"its array can give {apart(watts, limit)} W, its controller passes on {number(limit)} W"
        yield _finding(
            side, "note", watts, limit, "W", message, _PRACTICE,
            (f"{sums}{number(watts, 4)} W > {number(limit, 4)} W ({why})",),
            "none needed if meant so; else a larger controller",
        )  # fmt: skip


def _finding(
    side: ArraySide, severity: Severity, value: float, limit: float, unit: str, message: str, basis: str,
    working: tuple[str, ...], remedy: str,
) -> Finding:  # fmt: skip
    name = side.source.name
    return Finding(
        "solar.controller", severity, name, "source", None, value, limit, unit, f'"{name}": {message}', basis,
        working, remedy,
    )  # fmt: skip
