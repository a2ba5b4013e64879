"""The second pass of cut-outs: who stays off, who hunts, who is spared."""

from farvolt import planfile
from farvolt.study import study

HEAD = """format = 1
[plan]
nominal = "12 V"
[[sources]]
name = "bank"
kind = "battery"
at = "bank"
emf = "12 V"
resistance = "{ohm}"
"""


def load(name: str, current: str, cut_out: str, recovery: str | None = None) -> str:
    """A constant-current load at the bank itself."""
    more = f'recovery = "{recovery}"\n' if recovery else ""
    return f'[[loads]]\nname = "{name}"\nat = "bank"\ncurrent = "{current}"\ncut_out = "{cut_out}"\n{more}'


def findings(text: str) -> dict[str, str]:
    """Message of each cut-out finding, by load."""
    return {one.subject: one.message for one in study(planfile.parse(text)).findings if one.rule == "volts.cut-out"}


def test_a_load_that_lets_go_spares_the_other() -> None:
    """By hand: 12 V behind 100 mohm, 10 + 10 A: 10.0 V. A cut-out of 10.8 V goes first (10/10.8 is the lower share);
    then 10 A remain, 11.0 V, and the other, with a cut-out of 10.2 V, holds."""
    found = findings(HEAD.format(ohm="100 mohm") + load("radio", "10 A", "10.8 V") + load("fridge", "10 A", "10.2 V"))
    assert "it lets go" in found["radio"]
    assert "holds once others have let go" in found["fridge"]


def test_a_load_that_recovers_into_the_same_fault_hunts() -> None:
    """By hand: 10 A through 200 mohm: 10.0 V, below 10.5 V; off, it sees 12 V, above its recovery of 11.5 V."""
    found = findings(HEAD.format(ohm="200 mohm") + load("fridge", "10 A", "10.5 V", "11.5 V"))
    assert "hunts" in found["fridge"]


def test_a_recovery_that_is_never_reached_ends_the_hunt() -> None:
    """The same with a second load of 4 A: off, the fridge sees 12 - 0.8 = 11.2 V, under its 11.5 V: it stays off."""
    text = HEAD.format(ohm="200 mohm") + load("fridge", "10 A", "10.5 V", "11.5 V") + load("lamp", "4 A", "5 V")
    assert "it lets go" in findings(text)["fridge"]


def test_loads_above_their_cut_out_give_no_finding() -> None:
    """At the boundary: 15 A through 100 mohm is exactly 10.5 V."""
    assert findings(HEAD.format(ohm="100 mohm") + load("fridge", "15 A", "10.5 V")) == {}


def test_a_case_that_gives_way_says_who_has_to_let_go() -> None:
    """12 V behind 100 mohm gives at most E²/4R = 360 W; 500 W with a cut-out lets go."""
    text = HEAD.format(ohm="100 mohm") + '[[loads]]\nname = "pump"\nat = "bank"\npower = "500 W"\ncut_out = "10 V"\n'
    assert "gives way" in findings(text)["pump"]
