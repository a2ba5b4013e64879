"""How many days the bank of a plan carries its loads alone, against the days that the plan asks for."""

from collections.abc import Iterator

from farvolt import bank_sizing, energy
from farvolt.checks.registry import apart, check
from farvolt.context import Context
from farvolt.results import Finding
from farvolt.units import number


@check("bank.autonomy", title="Days that the bank carries the loads against the days asked for")
def autonomy(context: Context) -> Iterator[Finding]:
    """The reference battery, where the plan states `bank.autonomy`, on its design day and at the end of its life."""
    plan = context.plan
    if "autonomy" not in plan.bank.model_fields_set:
        return
    found = bank_sizing.sizing(context.network, energy.budgets(context.network))
    asked = plan.bank.autonomy
    if found is None or found.days is None:
        yield Finding(
            "bank.autonomy", "note", plan.plan.name, "plan", None, None, asked, "days",
            "The days that the bank lasts are not known: that takes a battery with a capacity, and loads with hours",
            bank_sizing.IEEE_1013, (), "state capacity, and hours_per_day or schedule of loads",
        )  # fmt: skip
    elif found.days < asked * (1 - 1e-9):
        battery = found.terms.battery
        more = f"{number(found.capacity_Ah)} Ah in all" + (f", {found.strings} strings" if found.strings else "")
        yield Finding(
            "bank.autonomy", "fail", battery.name, "source", None, found.days, asked, "days",
            f'"{battery.name}" carries the loads of "{found.day}" for {apart(found.days, asked)} days; the plan asks '
            f"for {number(asked)}",
            f"bank.autonomy of the plan, by {bank_sizing.IEEE_1013}",
            (*found.days_working, f"{apart(found.days, asked, 4)} days < {number(asked, 4)} days"),
            f"a bank of {more}; or less load, or fewer days",
        )  # fmt: skip
