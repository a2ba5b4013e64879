"""Quantities: read exactly, kept as written, and refused with what was meant.

Factors are exact by definition: the foot and inch of the international yard and pound agreement of 1959, the degree
Fahrenheit and the kelvin of NIST SP 811, appendix B.
"""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from farvolt import units
from farvolt.errors import QuantityError

EXACT = [
    ("4.5 m", "length", 4.5),
    ("15 ft", "length", 4.572),
    ("6 in", "length", 0.1524),
    ("250 mm", "length", 0.25),
    ("80 cm", "length", 0.8),
    ("0.1 km", "length", 100.0),
    ("60 W", "power", 60.0),
    ("1.5 kW", "power", 1500.0),
    ("30 A", "current", 30.0),
    ("250 mA", "current", 0.25),
    ("12.8 V", "voltage", 12.8),
    ("48 mV", "voltage", 0.048),
    ("4 mohm", "resistance", 0.004),
    ("4 mΩ", "resistance", 0.004),
    ("200 uohm", "resistance", 0.0002),
    ("2.4 Ω", "resistance", 2.4),
    ("200 Ah", "charge", 200.0),
    ("80 %", "share", 0.8),
    ("0.5 s", "time", 0.5),
    ("90 min", "time", 5400.0),
    ("30 degC", "temperature", 30.0),
    ("30 °C", "temperature", 30.0),
    ("86 degF", "temperature", 30.0),
    ("-40 °F", "temperature", -40.0),
    ("300 K", "temperature", 26.85),
]


@pytest.mark.parametrize(("text", "dimension", "expected"), EXACT)
def test_value_in_the_base_unit(text: str, dimension: str, expected: float) -> None:
    assert units.parse(text, dimension).si == pytest.approx(expected, rel=1e-12)


def test_whole_fractions_keep_their_last_bit() -> None:
    assert units.parse("80 %", "share").si == 0.8
    assert units.parse("4 mohm", "resistance").si == 0.004
    assert units.parse("15 cm", "length").si == 0.15


@pytest.mark.parametrize(
    ("written", "kept"),
    [("15ft", "15ft"), (" 15 ft ", "15 ft"), ("+1e1  m", "+1e1 m"), ("4.50\u00a0m", "4.50 m"), ("4\n m", "4 m")],
)
def test_text_stays_as_written_on_one_line(written: str, kept: str) -> None:
    quantity = units.parse(written, "length")
    assert str(quantity) == kept
    assert units.parse(str(quantity), "length") == quantity


@given(
    st.sampled_from([(dimension, unit) for dimension, table in units.DIMENSIONS.items() for unit in table]),
    st.floats(min_value=-1e6, max_value=1e6, allow_subnormal=False),
    st.sampled_from(["", " ", "\u202f"]),
)
def test_every_unit_reads_every_number(which: tuple[str, str], value: float, space: str) -> None:
    dimension, unit = which
    quantity = units.parse(f"{value!r}{space}{unit}", dimension)
    if unit == "degF":
        expected = (value - 32) / 1.8
    elif unit == "K":
        expected = value - 273.15
    else:
        expected = value * units.DIMENSIONS[dimension][unit]
    assert quantity.si == pytest.approx(expected, rel=1e-12, abs=1e-9)


@given(st.text(), st.sampled_from(sorted(units.DIMENSIONS)))
def test_any_text_is_a_finite_quantity_or_refused(text: str, dimension: str) -> None:
    try:
        quantity = units.parse(text, dimension)
    except QuantityError as error:
        said = (bool(error.problem), units.EXAMPLES[dimension] in error.accepted)
        assert said == (True, True)
    else:
        assert math.isfinite(quantity.si)
        assert "\n" not in quantity.text


REFUSED = [
    ("4 meters", "length", "unknown unit", '"4 m"'),
    ("4 Metres", "length", "unknown unit", '"4 m"'),
    ("15 feet", "length", "unknown unit", '"15 ft"'),
    ("15'", "length", "unknown unit", '"15 ft"'),
    ("4 M", "length", "unknown unit", '"4 m"'),
    ("4 mm2", "length", "unknown unit", ""),
    ("4 W", "length", "unit of power, not of length", ""),
    ("4.5", "length", "has no unit", '"4.5 m"'),
    ("4,5 m", "length", "comma", '"4.5 m"'),
    ("4,5", "length", "comma", '"4.5 m"'),
    ("1,000 ft", "length", "comma", '"1.000 ft" or "1000 ft"'),
    ("inf m", "length", "not a finite number", ""),
    ("-Infinity m", "length", "not a finite number", ""),
    ("nan m", "length", "not a finite number", ""),
    ("1e400 m", "length", "not a finite number", ""),
    ("1e308 km", "length", "not a finite number", ""),
    ("", "length", "is empty", ""),
    ("   ", "length", "is empty", ""),
    ("about 4 m", "length", "does not start with a number", ""),
    ("60 watts", "power", "unknown unit", '"60 W"'),
    ("60 w", "power", "unknown unit", '"60 W"'),
    ("30 amps", "current", "unknown unit", '"30 A"'),
    ("30 mA", "charge", "unit of current, not of charge", ""),
    ("2400 Wh", "charge", "unknown unit", ""),
    ("200 AH", "charge", "unknown unit", '"200 Ah"'),
    ("4 mOhm", "resistance", "unknown unit", '"4 mohm"'),
    ("4 milliohms", "resistance", "unknown unit", '"4 mohm"'),
    ("30 C", "temperature", "unknown unit", '"30 degC"'),
    ("86 deg F", "temperature", "unknown unit", '"86 degF"'),
    ("80", "share", "has no unit", '"80 %"'),
    ("0.8", "share", "has no unit", '"80 %"'),
    ("80 percent", "share", "unknown unit", '"80 %"'),
    ("12 volts DC", "voltage", "unknown unit", ""),
    ("12 Vdc", "voltage", "unknown unit", '"12 V"'),
]


@pytest.mark.parametrize(("text", "dimension", "problem", "nearest"), REFUSED)
def test_refusal_says_what_was_meant(text: str, dimension: str, problem: str, nearest: str) -> None:
    with pytest.raises(QuantityError) as caught:
        units.parse(text, dimension)
    assert problem in caught.value.problem
    assert caught.value.nearest == nearest
    for offered in filter(None, nearest.split(" or ")):
        assert units.parse(offered.strip('"'), dimension).text == offered.strip('"')


@pytest.mark.parametrize(
    ("value", "digits", "shown"),
    [
        (0.0, 3, "0"),
        (-0.0, 3, "0"),
        (12.3456, 3, "12.3"),
        (0.000123456, 3, "0.000123"),
        (1234.56, 3, "1235"),
        (9.9996, 4, "10"),
        (-5.0, 3, "-5"),
        (100.0, 3, "100"),
        (math.inf, 3, "inf"),
    ],
)
def test_numbers_are_rounded_for_reading_without_an_exponent(value: float, digits: int, shown: str) -> None:
    assert units.number(value, digits) == shown


@given(st.floats(min_value=1e-12, max_value=1e12), st.integers(min_value=2, max_value=8))
def test_rounding_is_to_significant_digits(value: float, digits: int) -> None:
    assert float(units.number(value, digits)) == pytest.approx(value, rel=0.51 * 10 ** (1 - digits))


@pytest.mark.parametrize(
    ("written", "shown"), [("4.5 m", "4.5 m (14.8 ft)"), ("15 ft", "15 ft (4.57 m)"), ("30cm", "30cm (0.984 ft)")]
)
def test_a_length_stays_as_written_beside_the_other_system(written: str, shown: str) -> None:
    assert units.both_lengths(units.parse(written, "length")) == shown
