"""What the numbers of a study rest on that the plan does not state, each in one sentence."""

from collections.abc import Iterator

from farvolt import batteries
from farvolt.context import Context
from farvolt.network import CONTACT_OHM
from farvolt.plan import Battery, Plan
from farvolt.rulebook import Rulebook


def assumptions(context: Context) -> tuple[str, ...]:
    """All assumptions, in the order in which they enter."""
    plan, rulebook = context.plan, context.rulebook
    return (
        *(line for source in plan.sources if isinstance(source, Battery) for line in _battery(source, plan)),
        *context.network.assumptions,
        *_parts(plan),
        *_cables(plan, rulebook),
        *_basis(rulebook),
    )


def _battery(battery: Battery, plan: Plan) -> Iterator[str]:
    name = f'Battery "{battery.name}"'
    model = batteries.model(battery, battery.charge.si, plan.plan.nominal.si)
    if model.resistance_is_estimated:
        yield f"{name}: internal resistance {model.resistance_source}; state it from the data sheet."
    if battery.emf is None:
        yield f"{name}: EMF from the rest voltage of {battery.chemistry} at its charge, typical."
    if battery.strings > 1 and battery.link is None:
        yield f"{name}: its {battery.strings} strings are taken to share equally; no link cables are stated."


def _parts(plan: Plan) -> Iterator[str]:
    if any(device.resistance is None for device in plan.devices):
        kinds = ", ".join(f"{kind} {1000 * ohm:g} mohm" for kind, ohm in CONTACT_OHM.items())
        yield f"Devices that state no resistance are taken at typical values, from memory: {kinds}."
    if any(one.resistance is None for run in plan.runs for one in run.protections):
        yield "Protection that states no resistance is taken at its type's typical drop at rated current, from memory."


def _cables(plan: Plan, rulebook: Rulebook) -> Iterator[str]:
    if any(run.insulation is None for run in plan.runs):
        rating = f"{rulebook.default_insulation_degC:g} degC"
        yield f"Cables that state no insulation are taken at {rating}, the rulebook's default."
    if any(plan.zone_of(run) is None for run in plan.runs):
        yield f"Cables in no zone are taken at an ambient of {plan.plan.ambient}."
    if not plan.cases:
        yield 'The plan states no cases: one case, "Everything on", is checked.'


def _basis(rulebook: Rulebook) -> Iterator[str]:
    basis = rulebook.drop_basis
    yield f"Drop limits are held against resistances as the rulebook means them: {basis.basis}. {basis.note}".strip()
