"""What the numbers of a study rest on that the plan does not state, each in one sentence."""

from collections.abc import Iterator

from farvolt import batteries
from farvolt.conductors import resistance_20_ohm_per_m
from farvolt.context import Context
from farvolt.network import CONTACT_OHM, DIODE_DROP_V
from farvolt.plan import Battery, Charger, Converter, Plan, Solar
from farvolt.rulebook import Rulebook
from farvolt.standard_cases import low_charge, standard_set


def assumptions(context: Context) -> tuple[str, ...]:
    """All assumptions, in the order in which they enter."""
    plan, rulebook = context.plan, context.rulebook
    return (
        *(line for source in plan.sources if isinstance(source, Battery) for line in _battery(source, plan)),
        *context.network.assumptions,
        *_parts(plan),
        *_cables(plan, rulebook),
        *_cases(plan, rulebook),
        *_basis(rulebook),
    )


def _battery(battery: Battery, plan: Plan) -> Iterator[str]:
    name = f'Battery "{battery.name}"'
    model = batteries.model(battery, battery.charge.si, plan.plan.nominal.si)
    if model.resistance_is_estimated:
        yield f"{name}: internal resistance {model.resistance_source}; state it from the data sheet."
    if battery.emf is None and battery.chemistry is not None:
        nominal = battery.nominal.si if battery.nominal else plan.plan.nominal.si
        count = batteries.cells(battery.chemistry, nominal)
        yield (
            f"{name}: EMF from the rest voltage of {count} {battery.chemistry} cells in series at its charge, typical "
            "(ranges, partly from memory), not corrected for temperature."
        )
    if battery.strings > 1 and battery.link is None:
        yield f"{name}: its {battery.strings} strings are taken to share equally; no link cables are stated."


def _parts(plan: Plan) -> Iterator[str]:
    if any(device.resistance is None for device in plan.devices):
        kinds = ", ".join(f"{kind} {1000 * ohm:g} mohm" for kind, ohm in CONTACT_OHM.items())
        yield f"Devices that state no resistance are taken at typical values, from memory: {kinds}."
    if any(one.resistance is None for run in plan.runs for one in run.protections):
        yield "Protection that states no resistance is taken at its type's typical drop at rated current, from memory."
    if any(isinstance(source, Charger | Converter) and source.resistance is None for source in plan.sources):
        yield "Chargers and converters that state no resistance droop by 0.1 % of their voltage at rated current."
    if any(isinstance(source, Converter) and not source.isolated for source in plan.sources):
        yield "Converters that are not isolated join the returns through their return_bond, 1 mohm unless stated."
    if any(isinstance(source, Solar) and source.amps is None for source in plan.sources):
        yield "Solar controllers that state no output limit deliver their power down to 40 % of nominal voltage."
    if any(device.kind == "diode" and device.drop is None for device in plan.devices):
        yield f"Diodes that state no drop are taken at {DIODE_DROP_V:g} V, from memory."
    if any("chassis" in (run.from_point, run.to_point, run.return_path) for run in plan.runs):
        yield f"The chassis itself has no resistance; each bond to it has {plan.plan.chassis_bond}."


def _cables(plan: Plan, rulebook: Rulebook) -> Iterator[str]:
    yield from _recalled(plan)
    if any(run.joints == 0 and run.resistance is None for run in plan.runs):
        yield "Runs that state no joints have none: lugs and terminals then add no resistance."
    if any(run.insulation is None for run in plan.runs):
        rating = f"{rulebook.default_insulation_degC:g} degC"
        yield f"Cables that state no insulation are taken at {rating}, the rulebook's default."
    if any(plan.zone_of(run) is None for run in plan.runs):
        yield f"Cables in no zone are taken at an ambient of {plan.plan.ambient}."


def _cases(plan: Plan, rulebook: Rulebook) -> Iterator[str]:
    if not plan.cases:
        yield from _standard(plan)
    for case in plan.checked_cases:
        silent = [f'"{source.name}"' for source in plan.sources if source.name not in case.sources]
        if silent:
            yield f'Case "{case.name}" does not name {", ".join(silent)}: taken as on, as the plan states them.'
    unclassed = sum(load.drop_class is None for load in plan.loads)
    if unclassed:
        rule = rulebook.classes[rulebook.default_class]
        limit = f"{rule.limit_percent:g} % of drop"
        yield f'{unclassed} of {len(plan.loads)} loads state no class: taken as "{rule.name}", with {limit} allowed.'


def _standard(plan: Plan) -> Iterator[str]:
    found = standard_set(plan)
    listed = "; ".join(case.name for case in found.cases)
    yield f"The plan states no cases: the standard ones for what it has are checked. {listed}."
    for source in plan.sources:
        low = low_charge(source) if isinstance(source, Battery) else None
        if low is not None:
            yield f'Low charge of "{source.name}": {low}, typical (common practice), or as stated where that is lower.'
    yield from found.left_out


def _recalled(plan: Plan) -> Iterator[str]:
    """Materials whose resistance is from memory, or stands in for one that the standards do not list."""
    kinds = {(run.size, run.material, run.strand or "flexible") for run in plan.runs if run.size is not None}
    recalled = {
        material for size, material, strand in kinds if resistance_20_ohm_per_m(size, material, strand).provisional
    }
    if recalled:
        yield f"Provisional, from memory or computed: the resistance of {' and '.join(sorted(recalled))} conductors."


def _basis(rulebook: Rulebook) -> Iterator[str]:
    basis = rulebook.drop_basis
    yield f"Drop limits are held against resistances as the rulebook means them: {basis.basis}. {basis.note}".strip()
