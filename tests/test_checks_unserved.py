"""bank.unserved: the days that a bank is to carry alone, hour by hour on the plan's own cables."""

import pytest

from farvolt import examples, planfile
from farvolt.results import Finding
from farvolt.study import study

PLAN = """\
format = 1
[plan]
name = "Alone"
nominal = "12 V"
ambient = "25 degC"
[bank]
autonomy = 2
ageing = 1.25
[[sources]]
name = "bank"
kind = "battery"
at = "bank"
emf = "12 V"
resistance = "10 mohm"
capacity = "CAPACITY"
self_discharge = "0 %"
short_circuit = "1000 A"
[[runs]]
name = "feed"
from = "bank"
to = "lamp"
length = "2 m"
resistance = "90 mohm"
protection = { type = "blade", rating = "10 A", distance = "0.1 m" }
[[loads]]
name = "lamp"
at = "lamp"
current = "2 A"
continuous = true
"""


def found(text: str) -> list[Finding]:
    return [one for one in study(planfile.parse(text), margins=False).findings if one.rule == "bank.unserved"]


def test_a_bank_that_lasts_is_not_named() -> None:
    # 2 A for 48 h take 96 Ah: 125 Ah are 100 Ah at the end of its life.
    assert found(PLAN.replace("CAPACITY", "125 Ah")) == []


def test_a_bank_that_does_not_last_is_named_once() -> None:
    # 100 Ah are 80 Ah when aged: 40 h. The lamp misses 8 h of 24 W.
    (one,) = found(PLAN.replace("CAPACITY", "100 Ah"))
    assert (one.severity, one.subject, one.kind) == ("warn", "bank", "source")
    assert one.value == pytest.approx(8 * 24, rel=1e-6)
    assert "is empty 8 h before the 2 days are over" in one.message


def test_a_load_that_lets_go_early_is_named_itself() -> None:
    # At rest 12 V, at the lamp 12 V − 2 A · 100 mΩ = 11.8 V: below 11.9 V from the first hour.
    (one,) = found(PLAN.replace("CAPACITY", "125 Ah") + 'cut_out = "11.9 V"\n')
    assert (one.severity, one.subject) == ("warn", "lamp")
    assert "lets go below its cut-out after 0 h" in one.message
    assert one.value == pytest.approx(48 * 24, rel=1e-9)


def test_only_where_the_plan_asks_for_days_alone() -> None:
    assert found(PLAN.replace("CAPACITY", "10 Ah").replace("autonomy = 2\n", "")) == []


def test_long_times_are_left_to_the_command() -> None:
    (one,) = found(PLAN.replace("CAPACITY", "10 Ah").replace("autonomy = 2", "autonomy = 30"))
    assert one.severity == "note"
    assert "farvolt days" in (one.remedy or "")


@pytest.mark.parametrize("name", examples.names())
def test_examples_last(name: str) -> None:
    assert found(examples.text(name)) == []
