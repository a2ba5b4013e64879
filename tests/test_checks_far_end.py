"""Opening in time at the far end, what is let through near by, and selectivity: by hand and by property."""

import math

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from farvolt import planfile
from farvolt.checks.selectivity import selective_up_to_A
from farvolt.plan import Protection
from farvolt.results import Finding
from farvolt.study import study

FAR_END, LET_THROUGH, SELECTIVITY = "protection.far-end", "protection.let-through", "protection.selectivity"


def plan_text(
    rating: str = "20 A",
    *,
    length: str = "12 m",
    size: str = "1.5 mm2",
    kind: str = "blade",
    ohm: str = "20 mohm",
    emf: str = "12 V",
    extra: str = "",
) -> str:
    """One battery, one cable, one load; nothing else has resistance."""
    return f"""
format = 1
[plan]
name = "one cable"
nominal = "12 V"
rulebook = "cabin-iec"
[[sources]]
name = "bank"
kind = "battery"
at = "bank"
emf = "{emf}"
resistance = "{ohm}"
aged_times = 1
[[runs]]
name = "feed"
from = "bank"
to = "end"
length = "{length}"
size = "{size}"
insulation = "70 degC"
strand = "flexible"
protection = {{ type = "{kind}", rating = "{rating}", distance = "0 m", resistance = "0 ohm" }}
{extra}
[[loads]]
name = "load"
at = "end"
power = "5 W"
[[cases]]
name = "on"
"""


def found(text: str, rule: str) -> list[Finding]:
    """The findings of one rule."""
    return [one for one in study(planfile.parse(text), margins=False).findings if one.rule == rule]


def test_a_20_A_blade_behind_12_m_of_thin_cable_opens_too_late() -> None:
    """12.0 V / (20 + 381.9) mohm = 29.86 A: 13.3 ohm/km at 20 °C (IEC 60228 Table 3), times 1.1965 at 70 °C, 24 m.

    29.86 A is 149 % of 20 A. ISO 8820-3 lets a medium blade take between 600 s at 135 % and 50 s at 160 %.
    The cable withstands (115 x 1.5)² = 29,756 A2s (IEC 60364-4-43 Table 43A), at 29.86 A for 33.4 s.
    """
    (one,) = found(plan_text("20 A"), FAR_END)
    assert one.severity == "fail"
    assert one.subject == "feed"
    assert one.value is not None
    assert 50 < one.value < 600
    assert one.limit == pytest.approx(5.0)
    text = " ".join(one.working)
    assert "29.86 A is 149 % of 20 A" in text
    assert "bolted short only" in text


def test_a_10_A_blade_opens_in_time() -> None:
    """29.86 A is 299 % of 10 A: within 5 s; 29.86² x 5 = 4,457 A2s is under 29,756 A2s."""
    assert found(plan_text("10 A"), FAR_END) == []


def test_a_fault_that_the_cable_carries_for_good_is_none_of_its_business() -> None:
    # 200 m of 1.5 mm2: 12 V / 6.4 ohm = 1.9 A.
    assert found(plan_text("10 A", length="200 m"), FAR_END) == []


def test_what_the_cable_stands_beyond_five_seconds_is_a_doubt_and_no_failure() -> None:
    """25 mm2 stands (115 x 25)² = 8.27e6 A2s. 30 m of it: 0.780 ohm/km x 1.1965 x 60 m = 56.0 mohm; 12 V over
    76 mohm is 157.9 A, 158 % of 100 A: an open time of minutes, against 8.27e6 / 157.9² = 331 s."""
    (one,) = found(plan_text("100 A", length="30 m", size="25 mm2", kind="strip"), FAR_END)
    assert one.value is not None
    assert one.severity == ("warn" if one.value < 331 else "fail")
    assert one.value > 5


def test_a_tap_that_inherits_its_protection_is_judged_by_it() -> None:
    tap = '[[runs]]\nname = "tap"\nfrom = "end"\nto = "lamp"\nlength = "6 m"\n'
    tap += 'size = "0.75 mm2"\ninsulation = "70 degC"\n'
    (one,) = found(plan_text("10 A", length="2 m", extra=tap), FAR_END) or [None]
    # 2 m: 63.7 mohm, 6 m of 0.75 mm2 (26 ohm/km): 373 mohm; 12 V / 457 mohm = 26.3 A, 263 % of 10 A: within 5 s, but
    # the tap stands (115 x 0.75)² = 7,439 A2s at 26.3 A for 10.8 s: in time.
    assert one is None
    (one,) = found(plan_text("15 A", length="2 m", extra=tap), FAR_END)
    assert '"tap"' in one.message
    assert one.severity == "fail"


@pytest.mark.parametrize("book", ["cabin-nec", "small-craft-us", "small-craft-iso", "leisure-vehicle-us"])
def test_where_the_rulebook_is_silent_the_method_is_called_practice(book: str) -> None:
    (one,) = found(plan_text("20 A").replace("cabin-iec", book), FAR_END)
    assert one.basis.startswith("common practice, by the method of IEC 60364-4-43 434.5.2")


def test_a_breaker_that_takes_a_tenth_of_a_second_lets_too_much_through_a_thin_cable() -> None:
    """12 V / 4 mohm = 3,000 A; a magnetic breaker may take 0.1 s: 900,000 A2s, against 29,756 A2s of 1.5 mm2."""
    (one,) = found(plan_text("10 A", kind="magnetic breaker", ohm="4 mohm"), LET_THROUGH)
    assert one.value == pytest.approx(900_000, rel=0.01)
    assert one.limit == pytest.approx(29_756, rel=0.01)
    assert "not verified" in one.message


def test_a_blade_lets_little_through() -> None:
    assert found(plan_text("10 A", ohm="4 mohm"), LET_THROUGH) == []


def test_a_quicker_protection_upstream_counts() -> None:
    """Behind a 100 A cartridge (at most 40,000 A2s cleared, UL 248-15) the breaker's cable has to stand that only."""
    main = '[[runs]]\nname = "main"\nfrom = "bank"\nto = "bus"\nlength = "0.3 m"\nsize = "25 mm2"\n'
    main += 'protection = { type = "cartridge", rating = "100 A", distance = "0 m", resistance = "0 ohm" }\n'
    text = plan_text("10 A", kind="magnetic breaker", ohm="2 mohm", size="2.5 mm2", length="3 m", extra=main)
    text = text.replace('from = "bank"\nto = "end"', 'from = "bus"\nto = "end"')
    # (115 x 2.5)² = 82,656 A2s
    assert found(text, LET_THROUGH) == []
    alone_text = plan_text("10 A", kind="magnetic breaker", ohm="2 mohm", size="2.5 mm2", length="3 m")
    (alone,) = found(alone_text, LET_THROUGH)
    assert alone.value is not None
    assert alone.value > 82_656


def protection(kind: str, amps: float) -> Protection:
    """A protection of a shipped type."""
    return Protection.model_validate({"type": kind, "rating": f"{amps} A"})


def test_selectivity_is_shown_where_the_bands_stay_apart() -> None:
    lower = protection("blade", 5)
    assert math.isinf(selective_up_to_A(lower, protection("large strip", 300), 200))
    assert selective_up_to_A(lower, protection("blade", 7.5), 200) < 200


def test_selectivity_ends_where_both_open_at_once() -> None:
    reach = selective_up_to_A(protection("magnetic breaker", 10), protection("magnetic breaker", 100), 3000)
    assert 50 < reach < 3000


def test_a_protection_is_never_selective_with_itself() -> None:
    for kind in ("blade", "strip", "magnetic breaker", "rail breaker"):
        assert selective_up_to_A(protection(kind, 40), protection(kind, 40), 1000) == 0.0


def test_the_note_names_what_may_go_dark_together() -> None:
    main = '[[runs]]\nname = "main"\nfrom = "bank"\nto = "bus"\nlength = "0.3 m"\nsize = "6 mm2"\n'
    main += 'protection = { type = "blade", rating = "15 A", distance = "0 m" }\n'
    text = plan_text("10 A", length="2 m", extra=main).replace('from = "bank"\nto = "end"', 'from = "bus"\nto = "end"')
    (one,) = found(text, SELECTIVITY)
    assert (one.severity, one.subject) == ("note", "main")
    assert '"feed"' in one.working[0]


@settings(max_examples=40, deadline=None)
@given(
    st.sampled_from(["5 A", "10 A", "15 A", "20 A", "30 A"]),
    st.sampled_from(["blade", "magnetic breaker", "rail breaker", "thermal breaker"]),
    st.floats(0.5, 20),
    st.floats(1.05, 3),
)
def test_a_longer_cable_never_mends_a_far_end(rating: str, kind: str, length: float, more: float) -> None:
    """Longer is less fault current: what opened too late, or not, opens no sooner, until the cable carries it."""
    texts = [plan_text(rating, kind=kind, length=f"{metres:.4f} m") for metres in (length, length * more)]
    short, far = ([one.value or math.inf for one in found(text, FAR_END)] for text in texts)
    if short and far:
        assert far[0] >= short[0] * (1 - 1e-9)


def test_a_return_conductor_of_its_own_is_held_to_the_fault_as_well() -> None:
    """1 m of 6 mm2 out and 1 m of 1 mm2 back as runs apart come to what they come to in one run.

    The 1 mm2 withstands (115 x 1)² = 13,200 A2s (IEC 60364-4-43 Table 43A); some 340 A for up to 1 s are far more.
    """
    text = plan_text("10 A", kind="thermal breaker", length="1 m", size="6 mm2")
    one_run = text.replace('size = "6 mm2"\n', 'size = "6 mm2"\nreturn = { size = "1 mm2" }\n')
    back = '[[runs]]\nname = "back"\nfrom = "bank"\nto = "end"\nlength = "1 m"\nsize = "1 mm2"\n'
    back += 'insulation = "70 degC"\nstrand = "flexible"\ncarries = "return"\n'
    apart = plan_text("10 A", kind="thermal breaker", length="1 m", size="6 mm2", extra=back)
    apart = apart.replace('size = "6 mm2"\n', 'size = "6 mm2"\ncarries = "feed"\n')
    (together,) = found(one_run, FAR_END)
    (other,) = found(apart, FAR_END)
    assert '"back"' in other.message
    assert (other.severity, other.value) == (together.severity, together.value) == ("fail", 1.0)
    assert other.limit == pytest.approx(together.limit, rel=1e-6)
    assert found(apart.replace('size = "1 mm2"', 'size = "10 mm2"'), FAR_END) == []


def test_one_of_several_cables_in_parallel_has_to_stand_a_near_fault_alone() -> None:
    """12 V / 5 mohm = 2,400 A through a breaker that may take 0.1 s: 576,000 A2s. A short just behind it in one of
    three cables of 4 mm2 flows in that one: (115 x 4)² = 211,600 A2s, not nine times that."""
    text = plan_text("70 A", kind="magnetic breaker", ohm="5 mohm", length="5 m", size="4 mm2")
    (one,) = found(text.replace('size = "4 mm2"\n', 'size = "4 mm2"\nparallel = 3\n'), LET_THROUGH)
    assert one.value == pytest.approx(576_000, rel=0.01)
    assert one.limit == pytest.approx(211_600, rel=0.01)


def test_a_type_without_opening_times_is_shown_to_open_nowhere() -> None:
    """Even where the fault at the far end is one that the cable carries for good: nearer ones are not."""
    own = '[protection_types.mine]\nkind = "fuse"\nratings = ["20 A"]\nvolts = "60 V"\ninterrupting = "5 kA"\n'
    text = plan_text("20 A", kind="mine", length="60 m", size="6 mm2", extra=own)
    assert found(text, FAR_END) == []
    (one,) = found(text, LET_THROUGH)
    assert one.value is None
    assert "more than is known" in one.message


def test_an_insulation_beyond_the_limit_for_short_circuits_withstands_nothing() -> None:
    """250 degC is the limit that IEC 60364-4-43 Table 43A has for thermosetting insulation: none is left above it."""
    (one,) = found(plan_text("10 A", length="2 m").replace("70 degC", "260 degC"), FAR_END)
    assert (one.severity, one.limit) == ("fail", 0.0)


def test_the_table_of_protection_tells_the_time_of_the_check() -> None:
    """A thermal breaker at -20 °C counts as one of a higher rating, in the finding and in the table."""
    text = plan_text("10 A", kind="thermal breaker", length="5.6 m", size="1 mm2", ohm="5 mohm")
    result = study(planfile.parse(text.replace("nominal =", 'ambient = "-20 degC"\nnominal =', 1)), margins=False)
    (one,) = (each for each in result.findings if each.rule == FAR_END)
    (row,) = result.protections
    assert one.value == pytest.approx(row.opens_s)
    assert one.limit == pytest.approx(row.allowed_s)


def test_far_beyond_its_band_a_fuse_needs_no_more_than_its_joule_integral() -> None:
    """12 V / 20 mohm and 0.5 m of 1.5 mm2 is some 340 A, 34 times a 10 A blade: (60 A)² x 0.15 s = 540 A2s at most, by
    the last gate of ISO 8820-3, against the 29,756 A2s of the cable; 0.15 s of 340 A would be 17,000 A2s, and of
    2,000 A from a stronger battery far too many."""
    assert found(plan_text("10 A", length="0.5 m"), FAR_END) == []
    assert found(plan_text("10 A", length="0.5 m", ohm="2 mohm"), FAR_END) == []
    assert found(plan_text("10 A", length="0.5 m", ohm="2 mohm", kind="thermal breaker"), FAR_END) != []
