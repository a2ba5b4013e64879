"""The array's open-circuit voltage on the coldest day, against the controller and what lies on the array's side."""

from collections.abc import Iterator
from dataclasses import dataclass

from farvolt.checks.array_side import ArraySide, array_sides
from farvolt.checks.registry import apart, at_least, check, run_finding
from farvolt.context import Context, label
from farvolt.plan import Plan, Protection, Run
from farvolt.results import Finding, Kind
from farvolt.tables import read
from farvolt.units import number
from farvolt_data import ROOT

_FACTORS = [
    (float(row["down_to_degC"]), float(row["factor"])) for row in read(ROOT / "solar" / "open_circuit_by_ambient.csv")
]
"""(ambient in degC down to which it serves, factor on the rated open-circuit voltage), falling. Provisional."""

_RATED_DEGC = 25.0
_BASIS = "NEC 690.7(A) and its table; common practice where another rulebook holds (provisional)"
_PAST = "common practice: the controller alone joins an array to a battery"


@dataclass(frozen=True, slots=True)
class ColdVolts:
    """Open-circuit voltage of an array on the coldest day; None where no factor is known for it."""

    volts: float | None
    working: tuple[str, ...]
    assumed_degC: float | None
    """The ambient taken for want of a stated one."""


def cold_volts(plan: Plan, side: ArraySide) -> ColdVolts:
    """Modules in series x Voc x (1 + rise x (25 - coldest)); with no coefficient stated, x the factor of NEC 690.7."""
    array, stated = side.array, plan.plan.coldest
    coldest = stated.si if stated is not None else _lowest_ambient(plan)
    day = f"{number(coldest)} degC" + ("" if stated else ", the lowest ambient in the plan")
    assumed = None if stated else coldest
    if array.voc_rise is not None:
        factor = max(1.0, 1 + array.voc_rise.si * (_RATED_DEGC - coldest))
        step = f"x (1 + {number(array.voc_rise.si * 100)} % x (25 - {number(coldest)})) = x {factor:.4f} at {day}"
    else:
        listed = next((each for low, each in _FACTORS if coldest >= low), None)
        if listed is None:
            return ColdVolts(None, (f"No factor is listed for {day}",), assumed)
        factor = listed
        step = f"x {factor:.2f} at {day} (NEC Table 690.7(A), crystalline silicon, provisional)"
    volts = array.series * array.voc.si * factor
    product = f"{array.series} in series x {array.voc} x {factor:.4g} = {number(volts, 4)} V"
    return ColdVolts(volts, (f"Open-circuit voltage {step}", product), assumed)


def _lowest_ambient(plan: Plan) -> float:
    """The lowest ambient that a plan speaks of."""
    stated = [zone.ambient.si for zone in plan.zones.values()]
    stated += [case.ambient.si for case in plan.cases if case.ambient is not None]
    return min(stated, default=plan.plan.ambient.si)


@check(
    "solar.open-circuit-volts", "solar.past-controller",
    title="Cold open-circuit voltage of each array against what it reaches",
)  # fmt: skip
def open_circuit_volts(context: Context) -> Iterator[Finding]:
    """Controllers, devices and protection that an array's open-circuit voltage exceeds on the coldest day."""
    for side in array_sides(context):
        if side.joined:
            yield _past(side)
        cold = cold_volts(context.plan, side)
        if cold.volts is None:
            yield _not_verified(side, "no factor for so cold a day is listed, and voc_rise is not stated", cold,
                                "voc_rise from the modules' data sheet")  # fmt: skip
            continue
        found = [*_controller(side, cold, cold.volts), *_parts(context, side, cold, cold.volts)]
        yield from found
        if cold.assumed_degC is not None and not any(one.severity == "fail" for one in found):
            yield _not_verified(
                side, f"the coldest day is not stated; {number(cold.assumed_degC)} degC, the lowest ambient in the "
                "plan, is assumed", cold, "coldest in the table plan, from records of the place",
            )  # fmt: skip


def _controller(side: ArraySide, cold: ColdVolts, volts: float) -> Iterator[Finding]:
    stands = side.source.max_input
    if stands is None:
        yield _not_verified(side, "the highest input voltage of its controller is not stated", cold,
                            "max_input from the controller's data sheet")  # fmt: skip
    elif volts > stands.si * (1 + 1e-9):
        yield _over(side.source.name, "source", f'"{side.source.name}": its controller stands {stands}', cold, volts,
                    stands.si, "a controller that stands more, or fewer modules in series")  # fmt: skip


def _parts(context: Context, side: ArraySide, cold: ColdVolts, volts: float) -> Iterator[Finding]:
    unstated = [device.name for device in side.devices if device.volts is None]
    for device in side.devices:
        if device.volts is not None and volts > device.volts.si * (1 + 1e-9):
            yield _over(device.name, "device", f'"{device.name}" ({device.kind}) is rated {device.volts}', cold, volts,
                        device.volts.si, f"a {device.kind} rated for at least {at_least(volts)} V DC")  # fmt: skip
    for index in side.runs:
        run = context.plan.runs[index]
        for guard in run.protections:
            yield from _guard(run, guard, cold, volts)
    if unstated:
        names = ", ".join(f'"{name}"' for name in unstated)
        yield _not_verified(side, f"no volts are stated of {names} on its array's side", cold,
                            "the DC voltage rating of each, from its data sheet")  # fmt: skip


def _guard(run: Run, guard: Protection, cold: ColdVolts, volts: float) -> Iterator[Finding]:
    """The plan's own voltage rating of a protection, else that of its type."""
    kind = guard.kind
    stated = guard.volts is not None
    limit = guard.volts.si if guard.volts is not None else kind.volts
    if volts <= limit * (1 + 1e-9):
        return
    typical = "" if stated else ", typical of its type"
    basis = _BASIS if stated else f"{_BASIS}; {kind.basis}{' (provisional)' if kind.provisional else ''}"
    compared = f"{apart(volts, limit, 4)} V > {number(limit, 4)} V"
    yield run_finding(
        "solar.open-circuit-volts", "fail", run, volts, limit, "V",
        f"{label(run)}: its {guard.rating} {guard.type} is rated {number(limit)} V{typical}; the array reaches "
        f"{apart(volts, limit)} V on the coldest day",
        basis, (*cold.working, compared), f"protection rated for at least {at_least(volts)} V DC",
    )  # fmt: skip


def _over(
    name: str, kind: Kind, what: str, cold: ColdVolts, volts: float, limit: float, remedy: str
) -> Finding:  # fmt: skip
    return Finding(
        "solar.open-circuit-volts", "fail", name, kind, None, volts, limit, "V",
        f"{what}; the array reaches {apart(volts, limit)} V on the coldest day", _BASIS,
        (*cold.working, f"{apart(volts, limit, 4)} V > {number(limit, 4)} V"), remedy,
    )  # fmt: skip


def _not_verified(side: ArraySide, why: str, cold: ColdVolts, remedy: str) -> Finding:
    return Finding(
        "solar.open-circuit-volts", "warn", side.source.name, "source", None, cold.volts, None, "V",
        f'"{side.source.name}": the open-circuit voltage of its array is not verified: {why}', _BASIS, cold.working,
        f"state {remedy}",
    )  # fmt: skip


def _past(side: ArraySide) -> Finding:
    points = " and ".join(f'"{point}"' for point in side.joined)
    return Finding(
        "solar.past-controller", "fail", side.source.name, "source", None, None, None, None,
        f'"{side.source.name}": cables lead from its array at "{side.array.at}" past its controller to {points}; '
        "what lies between is not judged as its array's side",
        _PAST, (), f'cables from "{side.array.at}" to the controller\'s input only, at "{side.source.input_point}"',
    )  # fmt: skip
