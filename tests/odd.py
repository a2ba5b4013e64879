"""Plans that are valid and odd: everyday drafts with fields put in or changed, up to the edges of what makes sense."""

import random

from hypothesis import strategies as st

from farvolt.rulebook import shipped
from strategies import Draft, Wishes, random_draft, text_of

# Field to what it may be set to; by table, and of sources by kind.
PLAN = {
    "rulebook": shipped(),
    "conductor_temperature": ("rulebook", "rated", "ambient", "estimated", "-40 degC", "150 degC"),
    "ambient": ("-40 degF", "0 degC", "90 degC"),
}
RUN = {
    "size": ("free", "0.5 mm2", "240 mm2", "18 AWG", "4/0 AWG", "500 kcmil", "10 SAE"),
    "length": ("1 mm", "300 ft", "2 km"),
    "material": ("copper", "tinned copper", "aluminium", "copper-clad aluminium"),
    "strand": ("flexible", "stranded", "solid"),
    "parallel": (1, 4, 1000),
    "insulation": ("60 degC", "90 degC", "200 degC", "-20 degC"),
    "purpose": ("power", "cranking", "bond"),
    "bundled": (1, 12, 1000),
    "sheathed": (True, False),
    "joints": (0, 1000),
    "joint_resistance": ("0 ohm", "1 ohm"),
    "zone": ("engine",),
    "route": ("loom",),
    "label": (None,),
    "colour": ("red",),
}
SOURCE = {
    "battery": {
        "chemistry": ("flooded", "agm", "gel", "lfp", "nmc"),
        "capacity": ("1 Ah", "100 Ah", "10000 Ah"),
        "nominal": ("12 V", "48 V"),
        "strings": (1, 2, 7),
        "take_off": ("ends", "same end", "bar"),
        "link": ({"length": "0.3 m", "size": "50 mm2"}, {"length": "9 m", "size": "10 AWG"}),
        "charge": ("0 %", "100 %"),
        "max_discharge": ("1 A", "1000 A"),
        "max_charge": ("1 A", "1000 A"),
    },
    "charger": {"volts": ("5 V", "60 V"), "amps": ("0.1 A", "1000 A"), "self_limiting": (True, False)},
    "solar": {
        "power": ("0 W", "10 kW"),
        "amps": ("0.1 A", "500 A"),
        "array": ({"at": "roof", "voc": "24 V", "isc": "5 A", "vmp": "20 V", "imp": "4 A"},),
    },
    "converter": {"efficiency": ("10 %", "100 %"), "standby": ("0 W", "50 W"), "isolated": (True, False)},
}
DEVICE = {
    "pole": ("feed", "return", "both"),
    "state": ("open", "closed"),
    "resistance": ("0 ohm", "5 ohm"),
    "continuous": ("1 A", "500 A"),
    "volts": ("6 V", "60 V"),
}
LOAD = {
    "min_volts": ("1 V", "11 V"),
    "max_volts": ("11.5 V", "60 V"),
    "cut_out": ("10 V",),
    "recovery": ("12 V",),
    "surge": ({"times": 5}, {"current": "90 A", "seconds": 0.2}, {"resistance": "0.1 ohm"}),
    "max_protection": ("1 A", "500 A"),
    "continuous": (True, False),
    "hours_per_day": (0, 0.5, 24),
    "schedule": ([], ["18:00-23:30", "0:00-24:00"]),
    "duty": ("0 %", "100 %"),
    "rated_volts": ("6 V", "60 V"),
}
STATES = {
    "battery": ("on", "off", "full", {"charge": "0 %"}, {"emf": "9 V"}),
    "charger": ("on", "off", {"volts": "13 V", "amps": "1 A"}),
    "solar": ("on", "off", {"irradiance": "0 %"}, {"volts": "13 V"}),
    "converter": ("on", "off", {"volts": "11 V", "amps": "1 A"}),
}


ZONES = """\
[zones.engine]
ambient = "70 degC"
engine_space = true
[routes.loom]
zone = "engine"
sheathed = true
"""


def odd_text(chance: random.Random) -> str:
    """The text of a random plan with some of its fields odd."""
    draft = random_draft(chance, Wishes(points=(3, 6), load_share=chance.choice((0.2, 2.0, 20.0))))
    _change(chance, draft["plan"], PLAN)
    for index, run in enumerate(draft["runs"]):
        _change(chance, run, RUN | {"label": (f"W{index}",)})
    for source in draft["sources"]:
        _change(chance, source, SOURCE[source["kind"]])
    for device in draft["devices"]:
        _change(chance, device, DEVICE)
    for load in draft["loads"]:
        _change(chance, load, LOAD)
    draft["points"] = [{"name": "p0", "kind": "busbar", "rating": "100 A", "zone": "engine"}]
    draft["cases"] += [_case(chance, draft, number) for number in range(chance.randint(0, 2))]
    for table in ("runs", "devices", "loads"):
        if chance.random() < 0.1:
            draft[table], draft["cases"] = [], []
    return text_of(draft) + ZONES


odd_texts = st.randoms(use_true_random=False).map(odd_text)


def _change(chance: random.Random, entry: Draft, choices: dict[str, tuple[object, ...]]) -> None:
    for field, values in choices.items():
        if chance.random() < 0.2:
            entry[field] = chance.choice(values)


def _case(chance: random.Random, draft: Draft, number: int) -> Draft:
    case: Draft = {"name": f"case {number}", "loads": chance.choice(("all", "none", {}))}
    if chance.random() < 0.5:
        case["ambient"] = chance.choice(("-40 degC", "60 degC"))
    if case["loads"] == {}:
        case["loads"] = {load["name"]: chance.choice((0, 0.5, 1, 30)) for load in draft["loads"]}
    case["sources"] = {source["name"]: chance.choice(STATES[source["kind"]]) for source in draft["sources"]}
    return case
