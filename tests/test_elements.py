"""Arrays, inverters, surges, busbars, cold and aged batteries: the network by hand.

Ohm's law and the sums in each comment are the reference; no table is read but the factors by temperature and age.
"""


import pytest

from farvolt import batteries, planfile
from farvolt.errors import PlanError
from farvolt.plan import Battery
from farvolt.results import CaseResult
from farvolt.study import study

HEAD = 'format = 1\n[plan]\nname = "x"\nnominal = "12 V"\nrulebook = "small-craft-iso"\n'

BANK = """
[[sources]]
name = "bank"
kind = "battery"
at = "bank"
emf = "12.8 V"
resistance = "10 mohm"
"""

MAIN = """
[[runs]]
name = "main"
from = "bank"
to = "bus"
length = "1 m"
size = "16 mm2"
resistance = "3 mohm"
"""

ROOF = """
[[sources]]
name = "roof"
kind = "solar"
from = "controller"
at = "bus"
power = "300 W"
ceiling = "14.4 V"
amps = "30 A"
efficiency = "97 %"
array = { at = "roof", modules = 2, series = 1, voc = "24 V", isc = "5.5 A", vmp = "20 V", imp = "5 A" }

[[runs]]
name = "array cable"
from = "roof"
to = "controller"
length = "4 m"
size = "4 mm2"
resistance = "39.6 mohm"
"""


def solved(text: str, **case: str) -> CaseResult:
    """The only case of a plan at 20 °C, with lines of its own."""
    lines = "".join(f"{name} = {value}\n" for name, value in case.items())
    plan = planfile.parse(f'{text}\n[[cases]]\nname = "only"\nambient = "25 degC"\n{lines}')
    info = planfile.parse(HEAD.replace("\n[plan]\n", '\n[plan]\nconductor_temperature = "20 degC"\n') + BANK).plan
    found = study(plan.model_copy(update={"plan": info}), margins=False).cases[0]
    assert found.solved
    return found


def watts(found: CaseResult, load: str) -> float:
    """What a load draws."""
    value = next(one.watts for one in found.loads if one.name == load)
    assert value is not None
    return value


def load(**fields: str) -> str:
    """A load at the bus."""
    return '\n[[loads]]\nname = "load"\nat = "bus"\n' + "".join(f"{name} = {value}\n" for name, value in fields.items())


# Solar arrays with runs of their own ------------------------------------------------------------------------------


def test_an_array_loses_power_in_its_own_cable_and_in_the_controller() -> None:
    found = solved(HEAD + BANK + MAIN + ROOF)
    roof = next(one for one in found.sources if one.name == "roof")
    # 2 modules of 5 A in parallel give 10 A at 20 V; droop 0.1 % of 20 V at 10 A is 2 mohm.
    # At the controller: 20 V - 10 A x (2 + 39.6) mohm = 19.584 V; 195.84 W come in, 97 % of it go out.
    assert roof.input_W == pytest.approx(195.84, abs=1e-6)
    assert roof.watts == pytest.approx(0.97 * 195.84, abs=1e-6)
    cable = next(one for one in found.runs if one.name == "array cable")
    assert cable.feed_A == pytest.approx(10.0, abs=1e-6)
    assert cable.return_A == pytest.approx(-10.0, abs=1e-6)


def test_a_diode_in_the_line_of_an_array_costs_its_drop() -> None:
    diode = (
        '\n[[devices]]\nname = "blocking diode"\nkind = "diode"\nfrom = "far"\nto = "controller"\n'
        'drop = "0.5 V"\nresistance = "10 mohm"\n'
    )
    found = solved(HEAD + BANK + MAIN + ROOF.replace('to = "controller"', 'to = "far"') + diode)
    # 20 V - 10 A x (2 + 39.6 + 10) mohm - 0.5 V = 18.984 V at the controller.
    roof = next(one for one in found.sources if one.name == "roof")
    assert roof.input_W == pytest.approx(10 * 18.984, abs=1e-4)


def test_modules_in_series_halve_the_current_and_quarter_the_loss() -> None:
    found = solved(HEAD + BANK + MAIN + ROOF.replace("series = 1", "series = 2"))
    roof = next(one for one in found.sources if one.name == "roof")
    # 5 A at 40 V, droop 8 mohm: 40 V - 5 A x (8 + 39.6) mohm = 39.762 V.
    assert roof.input_W == pytest.approx(5 * 39.762, abs=1e-6)


def test_half_the_sun_is_half_the_current() -> None:
    found = solved(HEAD + BANK + MAIN + ROOF, sources='{ "roof" = { irradiance = "50 %" } }')
    roof = next(one for one in found.sources if one.name == "roof")
    # 5 A: 20 V - 5 A x 41.6 mohm = 19.792 V.
    assert roof.input_W == pytest.approx(5 * 19.792, abs=1e-6)


def test_a_controller_takes_only_what_it_delivers() -> None:
    text = HEAD + BANK + MAIN + ROOF + load(power='"50 W"')
    found = solved(text, sources='{ "bank" = "off" }')
    roof = next(one for one in found.sources if one.name == "roof")
    assert roof.watts == pytest.approx(50.0, abs=1e-6)
    assert roof.input_W == pytest.approx(50 / 0.97, abs=1e-6)


def test_the_output_limit_of_the_controller_holds() -> None:
    found = solved(HEAD + BANK + MAIN + ROOF.replace("30 A", "8 A"))
    assert next(one.amps for one in found.sources if one.name == "roof") == pytest.approx(8.0, abs=1e-9)


@pytest.mark.parametrize("state", ['"off"', '{ irradiance = "0 %" }'])
def test_without_sun_or_controller_nothing_comes(state: str) -> None:
    found = solved(HEAD + BANK + MAIN + ROOF, sources=f'{{ "roof" = {state} }}')
    roof = next(one for one in found.sources if one.name == "roof")
    assert (roof.watts, roof.input_W) == (0.0, 0.0)


def test_an_array_that_no_run_joins_to_its_controller_feeds_nothing() -> None:
    text = HEAD + BANK + MAIN + ROOF.replace('to = "controller"', 'to = "elsewhere"')
    assert next(one.watts for one in solved(text).sources if one.name == "roof") == 0.0


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ("modules = 2, series = 1", "modules = 3, series = 2", "3 modules do not make strings of 2"),
        ('from = "controller"\nat = "bus"', 'from = "bus"\nat = "bus"', "delivers where its array stands"),
        ("array = {", "# array = {", '"from" is where an array arrives'),
    ],
)
def test_an_array_that_makes_no_sense_is_refused(old: str, new: str, words: str) -> None:
    text = HEAD + BANK + MAIN + ROOF
    assert old in text
    with pytest.raises(PlanError, match=words):
        planfile.parse(text.replace(old, new, 1))


# Inverters --------------------------------------------------------------------------------------------------------

INVERTER = HEAD + BANK + MAIN + load(power='"900 W"', efficiency='"90 %"', standby='"8 W"', inverter_of='"dock"') + """
[[sources]]
name = "dock"
kind = "charger"
at = "bus"
volts = "14.2 V"
amps = "40 A"
"""


def test_an_inverter_draws_what_it_delivers_over_its_efficiency_and_what_it_idles_with() -> None:
    found = solved(INVERTER, sources='{ "dock" = "off" }')
    assert watts(found, "load") == pytest.approx(900 / 0.9 + 8, abs=1e-6)


def test_an_inverter_idles_when_a_case_names_it_at_no_load_and_is_off_when_it_does_not() -> None:
    idle = solved(INVERTER, sources='{ "dock" = "off" }', loads='{ "load" = 0.0 }')
    assert watts(idle, "load") == pytest.approx(8, abs=1e-9)
    assert watts(solved(INVERTER, sources='{ "dock" = "off" }', loads='"none"'), "load") == 0.0


def test_one_apparatus_charges_or_inverts() -> None:
    found = solved(INVERTER)
    assert watts(found, "load") == 0.0
    assert next(one.amps for one in found.sources if one.name == "dock") == pytest.approx(40.0, abs=1e-9)


def test_the_current_of_an_inverter_is_largest_at_the_lowest_voltage() -> None:
    low = solved(INVERTER.replace("12.8 V", "11.5 V"), sources='{ "dock" = "off" }').loads[0]
    high = solved(INVERTER, sources='{ "dock" = "off" }').loads[0]
    assert low.amps is not None
    assert high.amps is not None
    assert low.amps > high.amps
    assert low.watts == pytest.approx(high.watts, abs=1e-6)


def test_an_inverter_is_rated_by_what_it_delivers() -> None:
    with pytest.raises(PlanError, match="an inverter is rated by what it delivers"):
        planfile.parse(HEAD + BANK + load(current='"5 A"', efficiency='"90 %"'))


def test_an_inverter_names_its_charger() -> None:
    with pytest.raises(PlanError, match=r'there is no such charger.*did you mean "dock"'):
        planfile.parse(INVERTER.replace('inverter_of = "dock"', 'inverter_of = "dok"'))


# Surges -----------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("surge", "amps"),
    [
        # 18 A out of 12.8 V behind 13 mohm.
        ('{ current = "18 A" }', 18.0),
        # 12.8 V over 0.5 ohm + 13 mohm.
        ('{ resistance = "0.5 ohm" }', 12.8 / 0.513),
        # 3 x 60 W behind 13 mohm: u = (12.8 + sqrt(12.8^2 - 4 x 180 x 0.013)) / 2 = 12.6143 V.
        ("{ times = 3 }", 180 / ((12.8 + (12.8**2 - 4 * 180 * 0.013) ** 0.5) / 2)),
    ],
)
def test_a_case_may_have_a_load_at_its_surge(surge: str, amps: float) -> None:
    found = solved(HEAD + BANK + MAIN + load(power='"60 W"', surge=surge), surge='["load"]')
    assert found.loads[0].amps == pytest.approx(amps, abs=1e-8)


def test_a_load_that_is_off_does_not_surge() -> None:
    text = HEAD + BANK + MAIN + load(power='"60 W"', surge='{ current = "18 A" }')
    assert solved(text, surge='["load"]', loads='"none"').loads[0].amps == 0.0


@pytest.mark.parametrize(
    ("name", "words"), [("laod", 'there is no such load.*did you mean "load"'), ("load", "this load states no surge")]
)
def test_a_surge_that_is_not_there_is_named(name: str, words: str) -> None:
    with pytest.raises(PlanError, match=words):
        planfile.parse(HEAD + BANK + load(power='"60 W"') + f'[[cases]]\nname = "start"\nsurge = ["{name}"]\n')


# Busbars and batteries -------------------------------------------------------------------------------------------


def test_a_busbar_lies_between_what_is_joined_to_it() -> None:
    bar = '[[points]]\nname = "bus"\nkind = "busbar"\nresistance = "2 mohm"\n'
    onward = MAIN.replace("main", "onward").replace('"bus"', '"end"').replace('"bank"', '"bus"')
    text = HEAD + bar + BANK + MAIN + onward + load(current='"10 A"').replace('"bus"', '"end"')
    # 10 A through 3 mohm, the bar there and back (2 x 2 mohm), and 3 mohm.
    assert solved(text).loads[0].drop_V == pytest.approx(10 * 0.010, abs=1e-9)


def test_a_cold_and_an_old_battery_have_more_resistance() -> None:
    text = HEAD + BANK.replace("emf", 'chemistry = "lfp"\nemf') + MAIN + load(current='"10 A"')
    # 10 mohm, doubled at 0 degC (typical of lfp), and doubled again at the end of its life.
    for ambient, state, ohm in (("25", "", 0.010), ("0", "", 0.020), ("0", "{ aged = true }", 0.040)):
        plan = planfile.parse(
            f'{text}\n[[cases]]\nname = "only"\nambient = "{ambient} degC"\n'
            + (f'sources = {{ "bank" = {state} }}\n' if state else "")
        )
        bank = study(plan, margins=False).cases[0].sources[0]
        assert bank.volts == pytest.approx(12.8 - 10 * ohm, abs=1e-9)


def test_between_the_rows_the_resistance_follows_its_logarithm_and_never_falls_below_the_stated() -> None:
    assert batteries.cold_times("lfp", 12.5) == pytest.approx(2**0.5)
    assert batteries.cold_times("lfp", 45) == 1.0
    assert batteries.cold_times("lfp", -40) == batteries.cold_times("lfp", -20)
    assert batteries.cold_times(None, -40) == 1.0


def test_the_rest_voltage_of_lead_falls_in_the_cold() -> None:
    """0.024 V for a 12 V block and 5.6 K (general reference page on flooded lead-acid), from 26.7 °C."""
    battery = Battery.model_validate(
        {"name": "b", "kind": "battery", "at": "b", "chemistry": "flooded", "nominal": "12 V", "capacity": "100 Ah"}
    )
    warm = batteries.model(battery, 1.0, 12.0, degC=26.7)
    cold = batteries.model(battery, 1.0, 12.0, degC=26.7 - 5.6)
    assert warm.emf_V == pytest.approx(12.65, abs=1e-3)
    assert warm.emf_V - cold.emf_V == pytest.approx(0.024, abs=1e-4)


def test_age_is_stated_or_typical_of_the_chemistry() -> None:
    fields = {"name": "b", "kind": "battery", "at": "b", "emf": "12 V", "resistance": "10 mohm"}
    assert batteries.aged_times(Battery.model_validate(fields)) == batteries.AGED_TIMES
    assert batteries.aged_times(Battery.model_validate(fields | {"chemistry": "agm"})) == 1.5
    assert batteries.aged_times(Battery.model_validate(fields | {"aged_times": 1.7})) == 1.7
