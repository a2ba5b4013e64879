"""Everything about the bank of a plan in one answer: the energy of its days, its size, its charging, its air."""

from dataclasses import asdict, dataclass
from typing import Any

from farvolt import bank_charging, bank_sizing, batteries, energy, feeders, interim
from farvolt.bank_charging import Charging
from farvolt.bank_sizing import Sizing
from farvolt.energy import Budget
from farvolt.feeders import Demand
from farvolt.network import build
from farvolt.output import OUTPUT, plain
from farvolt.results import Finding, Study
from farvolt.ventilation import Ventilation, ventilation


@dataclass(frozen=True)
class BankStudy:
    """The answer to how large a bank, how much solar, and how it is filled again."""

    plan: str
    budgets: tuple[Budget, ...]
    demands: tuple[Demand, ...]
    sizing: Sizing | None
    """None where the plan has no battery; nor is there any charging then."""
    charging: Charging | None
    air: tuple[Ventilation, ...]
    """For a lead-acid bank of the capacity in the plan, else of the capacity it should have."""
    findings: tuple[Finding, ...]
    """What the checks say of banks."""

    @property
    def design(self) -> Budget:
        """The budget of the day that the bank is sized for; the first of a plan without a battery."""
        day = self.sizing.day if self.sizing else self.budgets[0].day
        return next(one for one in self.budgets if one.day == day)


def bank_study(study: Study) -> BankStudy:
    """The bank of a plan that was studied; nothing is solved again."""
    plan = interim.with_sizes(study.plan, study.interim)
    network = build(plan, study.rulebook)
    budgets = energy.budgets(network)
    sizing = bank_sizing.sizing(network, budgets)
    charging = bank_charging.charging(network, budgets, sizing.terms) if sizing else None
    air = _air(sizing) if sizing else ()
    told = tuple(one for one in study.findings if one.rule.startswith("bank."))
    return BankStudy(plan.plan.name, budgets, feeders.demands(network), sizing, charging, air, told)


def _air(sizing: Sizing) -> tuple[Ventilation, ...]:
    battery = sizing.terms.battery
    if battery.chemistry is None:
        return ()
    cells = batteries.cells(battery.chemistry, sizing.terms.nominal_V)
    stated = battery.capacity.si * battery.strings if battery.capacity else sizing.capacity_Ah
    found = (ventilation(battery.chemistry, cells, stated, charging) for charging in ("float", "boost"))
    return tuple(one for one in found if one is not None)


def as_object(study: BankStudy) -> dict[str, Any]:
    """The object that `farvolt bank PLAN --json` prints: SI numbers, watt-hours, ampere-hours and hours, or null."""
    found: dict[str, Any] = plain({
        "output": OUTPUT,
        "plan": study.plan,
        "days": [_day(one) for one in study.budgets],
        "feeders": [
            {"run": one.run, "column_a_A": one.column_a_A, "column_b_A": one.column_b_A,
             "counted_b_A": one.counted_b_A, "demand_A": one.amps}
            for one in study.demands
        ],
        "sizing": _sizing(study.sizing) if study.sizing else None,
        "charging": _charging(study.charging) if study.charging else None,
        "ventilation": [asdict(one) for one in study.air],
        "findings": [asdict(one) for one in study.findings],
    })  # fmt: skip
    return found


def _day(budget: Budget) -> dict[str, Any]:
    return {
        "name": budget.day,
        "loads": [
            {"name": one.load, "watts": one.watts, "hours": one.use.hours, "duty": one.duty, "Wh": one.Wh, "Ah": one.Ah,
             "lost_Wh": one.lost_Wh, "standby_Wh": one.standby_Wh, "bank_Wh": one.bank_Wh}
            for one in budget.loads
        ],
        "converters": [asdict(one) for one in budget.converters],
        "systems": [
            {"name": one.name, "nominal_V": one.nominal_V, "Wh": one.Wh, "Ah": one.Ah} for one in budget.systems
        ],
        "left_out": budget.left_out,
    }  # fmt: skip


def _sizing(sizing: Sizing) -> dict[str, Any]:
    block = sizing.terms.block
    return {
        "battery": sizing.terms.battery.name,
        "day": sizing.day,
        "capacity_Ah": sizing.capacity_Ah,
        "block_V": block.nominal.si if block else None,
        "block_Ah": block.capacity.si if block else None,
        "blocks_in_series": sizing.terms.series,
        "strings": sizing.strings,
        "built_Ah": sizing.built_Ah,
        "steps": [asdict(one) for one in sizing.steps],
        "days": sizing.days,
        "days_working": sizing.days_working,
    }


def _charging(charging: Charging) -> dict[str, Any]:
    limit = charging.limit.limit_A
    return {
        "days": [
            {"name": one.day, "needed_Wh": one.needed_Wh, "gained_Wh": one.gained_Wh, "array_W": one.array_W,
             "sources": [asdict(gain) for gain in one.gains], "working": one.working}
            for one in charging.days
        ],
        "worst_day": charging.worst.day if charging.worst else None,
        "all_at_once_A": charging.limit.amps,
        "limit_low_A": limit.low if limit else None,
        "limit_high_A": limit.high if limit else None,
        "to_full": [asdict(one) for one in charging.to_full],
    }  # fmt: skip
