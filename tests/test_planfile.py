"""Plan files: every field is read, and every fault is told with its place."""

import codecs
import io
import re
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest

from farvolt import lines, plan, planfile
from farvolt.errors import Fault, PlanError
from farvolt.study import study
from plan_text import BASE, EVERY_FIELD


def faults_of(text: str) -> list[Fault]:
    with pytest.raises(PlanError) as caught:
        planfile.parse(text, "plan.toml")
    return caught.value.faults


def only_fault(text: str) -> Fault:
    found = faults_of(text)
    assert len(found) == 1, [str(one) for one in found]
    return found[0]


def with_line(old: str, new: str) -> str:
    assert BASE.count(f"{old}\n") == 1
    return BASE.replace(f"{old}\n", f"{new}\n")


def line_number(text: str, start: str) -> int:
    return next(number for number, line in enumerate(text.split("\n"), start=1) if line.startswith(start))


# What is read ----------------------------------------------------------------------------------------------------


def stated(entry: Any) -> set[str]:
    """Class and field of everything that a plan states, into nested tables."""
    found = {f"{type(entry).__name__}.{name}" for name in entry.model_fields_set}
    for name in entry.model_fields_set:
        value = getattr(entry, name)
        several = value.values() if isinstance(value, dict) else value if isinstance(value, tuple) else (value,)
        for one in several:
            if isinstance(one, plan.Entry):
                found |= stated(one)
    return found


def test_every_field_of_the_format_is_read() -> None:
    read = planfile.read(EVERY_FIELD)
    tables = [one for one in vars(plan).values() if isinstance(one, type) and issubclass(one, plan.Entry)]
    every = {f"{one.__name__}.{name}" for one in tables for name in one.model_fields}
    assert every - stated(read.plan) == set()
    results = study(read.plan, read.folder)
    assert all(case.solved for case in results.cases)


def test_what_was_written_is_what_is_shown() -> None:
    read = planfile.read(EVERY_FIELD).plan
    lamp = next(run for run in read.runs if run.name == "roof lamp feed")
    assert (str(lamp.length), lamp.length.si) == ("15 ft", pytest.approx(4.572))
    assert str(lamp.size) == "14 AWG"
    assert (str(read.plan.ambient), read.plan.ambient.si) == ("86 degF", pytest.approx(30))
    assert [str(one.rating) for one in read.runs[0].protections] == ["150 A", "150 A"]


def test_short_forms_mean_their_long_forms() -> None:
    read = planfile.read(EVERY_FIELD).plan
    galley = next(run for run in read.runs if run.name == "galley feed")
    assert [(one.end, one.rating.si) for one in galley.protections] == [("from", 20), ("to", 20)]
    assert read.cases[0].sources["alternator charger"].state == "off"
    assert [read.cases[1].share(load.name) for load in read.loads] == [1.0, 0.0, 0.0, 0.5, 0.0]


def test_runs_to_the_chassis_are_returns() -> None:
    read = planfile.parse(with_line('to = "galley"', 'to = "chassis"'))
    assert read.runs[0].conducts == "return"
    assert "chassis" not in read.point_names


def test_defaults_are_those_of_the_format() -> None:
    read = planfile.parse(BASE)
    run, bank, load = read.runs[0], read.sources[0], read.loads[0]
    assert (run.material, run.parallel, run.return_path, run.purpose) == ("copper", 1, "same", "power")
    assert (run.conducts, run.joints, run.joint_resistance.si) == ("both", 0, 0.0002)
    assert isinstance(bank, plan.Battery)
    assert (bank.strings, bank.take_off, bank.charge.si) == (1, "ends", 1.0)
    assert (load.rated_as, load.behaves, read.devices[0].state) == ("power", None, "closed")
    assert (read.plan.rulebook, read.reference) == ("small-craft-iso", "bank")


def test_reference_is_the_first_battery_unless_stated() -> None:
    charger = '[[sources]]\nname = "charger"\nkind = "charger"\nat = "galley"\nvolts = "14 V"\namps = "5 A"\n\n'
    before = BASE.replace("[[sources]]", f"{charger}[[sources]]")
    assert planfile.parse(before).reference == "bank"
    stating = before.replace('nominal = "12 V"', 'nominal = "12 V"\nreference = "charger"')
    assert planfile.parse(stating).reference == "charger"


def test_a_plan_without_cases_has_one_with_everything_on() -> None:
    read = planfile.parse(BASE.split("[[cases]]")[0])
    assert [case.name for case in read.checked_cases] == ["Everything on"]
    assert read.checked_cases[0].share("pump") == 1.0


@pytest.mark.parametrize("ending", ["\n", "\r\n"])
@pytest.mark.parametrize("start", [b"", codecs.BOM_UTF8])
def test_line_ends_and_a_byte_order_mark_do_not_matter(tmp_path: Path, ending: str, start: bytes) -> None:
    path = tmp_path / "plan.toml"
    path.write_bytes(start + BASE.replace("\n", ending).encode())
    assert planfile.read(path).plan == planfile.parse(BASE)


def test_dash_is_standard_input(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(sys, "stdin", io.TextIOWrapper(io.BytesIO(BASE.encode())))
    read = planfile.read("-")
    assert (read.plan, read.path, read.folder) == (planfile.parse(BASE), None, Path.cwd())


# Files that cannot be used ---------------------------------------------------------------------------------------

UNUSABLE = [
    (b"", "the file is empty"),
    (b" \n\n", "the file is empty"),
    (b"# only a remark\n", "does not state its format"),
    (b"\x7fELF\x02\x01\x01\x00\x00", "binary file"),
    (BASE.encode("utf-16"), "binary file"),
    (BASE.replace("Test", "Küche").encode("latin-1"), "not UTF-8"),
    (b"format = 1\nx = " + b"[" * 5000, "nested too deep"),
    (b"format = 1\nx = " + b"9" * 5000, "a number is too long"),
    (b"format = 1\nx = 2024-02-31", "Invalid date"),
]


@pytest.mark.parametrize(("data", "problem"), UNUSABLE, ids=[problem for _, problem in UNUSABLE])
def test_unusable_files_are_told_in_one_message(tmp_path: Path, data: bytes, problem: str) -> None:
    path = tmp_path / "plan.toml"
    path.write_bytes(data)
    with pytest.raises(PlanError, match=problem) as caught:
        planfile.read(path)
    assert str(caught.value).startswith(f"{path}: ")
    assert "\n" not in str(caught.value)


def test_a_byte_that_is_not_utf8_is_told_with_its_line(tmp_path: Path) -> None:
    path = tmp_path / "plan.toml"
    path.write_bytes(b'format = 1\n[plan]\nname = "K\xfcche"\n')
    with pytest.raises(PlanError) as caught:
        planfile.read(path)
    assert caught.value.faults[0].line == 3


def test_files_up_to_10_MB_are_read_and_larger_ones_are_not(tmp_path: Path) -> None:
    path = tmp_path / "plan.toml"
    remarks = ("# " + "x" * 97 + "\n").encode()
    room = planfile.SIZE_LIMIT_BYTES - len(BASE.encode())
    path.write_bytes(BASE.encode() + remarks * (room // len(remarks)))
    assert planfile.read(path).plan == planfile.parse(BASE)
    path.write_bytes(path.read_bytes() + remarks)
    with pytest.raises(PlanError, match=r"larger than 10 MB; accepted: a plan file of up to 10 MB"):
        planfile.read(path)


def test_many_entries_and_many_faults_are_all_read() -> None:
    run = '[[runs]]\nname = "run {0}"\nfrom = "a{0}"\nto = "b{0}"\nlength = "1 m"\nroute = "no {1}"\n'
    text = BASE + "".join(run.format(number, number % 7) for number in range(3000))
    found = faults_of(text)
    assert len(found) == 3000
    assert [one.line for one in found] == sorted(one.line or 0 for one in found)


def test_a_missing_file_offers_its_neighbour(tmp_path: Path) -> None:
    (tmp_path / "my-van.toml").write_text(BASE)
    with pytest.raises(PlanError) as caught:
        planfile.read(tmp_path / "my-vna.toml")
    fault = caught.value.faults[0]
    assert (fault.problem, fault.nearest) == ("there is no such file", '"my-van.toml"')


def test_a_folder_is_no_plan(tmp_path: Path) -> None:
    with pytest.raises(PlanError, match="this is a folder"):
        planfile.read(tmp_path)


def test_a_path_through_a_file_cannot_be_read(tmp_path: Path) -> None:
    (tmp_path / "plan.toml").write_text(BASE)
    with pytest.raises(PlanError, match="cannot be read"):
        planfile.read(tmp_path / "plan.toml" / "more.toml")


@pytest.mark.skipif(sys.platform == "win32", reason="file modes of POSIX")
def test_a_file_without_permission_is_told(tmp_path: Path) -> None:
    path = tmp_path / "plan.toml"
    path.write_text(BASE)
    path.chmod(0)
    # Root may read everything, so that a child process gives up its rights first.
    code = (
        "import os, sys\n"
        "from farvolt import planfile\n"
        "from farvolt.errors import PlanError\n"
        "fd = os.open(sys.argv[1], os.O_RDONLY | os.O_DIRECTORY)\n"
        "os.fchdir(fd)\n"
        "if os.getuid() == 0:\n    os.setgroups([]); os.setgid(65534); os.setuid(65534)\n"
        "try:\n    planfile.read('plan.toml')\n"
        "except PlanError as error:\n    print(error)\n"
    )
    tmp_path.chmod(0o755)
    done = subprocess.run([sys.executable, "-c", code, tmp_path], capture_output=True, text=True, check=True)
    assert done.stdout == "plan.toml: no permission to read this file; accepted: a file that you may read\n"


# Faults of the TOML itself ---------------------------------------------------------------------------------------

TOML_FAULTS = [
    ('length = "4 m"', "length = 4 m", "something stands after the value", 'length = "4 m"'),
    ('length = "4 m"', "length = 4.5 ft   # tape", "something stands after the value", 'length = "4.5 ft"'),
    ('length = "4 m"', "length = four", "this is no value", 'length = "four"'),
    ('name = "Test"', "name = My van", "this is no value", 'name = "My van"'),
    ('length = "4 m"', "length =", "this is no value", ""),
    ('length = "4 m"', 'length = "4 m', "Illegal character", ""),
    ('length = "4 m"', 'length = "4 m" long', "something stands after the value", ""),
    ('length = "4 m"', 'length "4 m"', "Expected '=' after a key", ""),
    ('length = "4 m"', 'length = "4 m"\nlength = "5 m"', "this field is written twice", ""),
    ("[plan]", "[plan]\n[plan]", 'Cannot declare "plan" twice', ""),
    ("[plan]", "[plan", "Expected ']'", ""),
]


@pytest.mark.parametrize(("old", "new", "problem", "nearest"), TOML_FAULTS)
def test_faults_of_the_text_show_their_line(old: str, new: str, problem: str, nearest: str) -> None:
    text = with_line(old, new)
    fault = only_fault(text)
    assert problem in fault.problem
    assert fault.nearest == nearest
    assert fault.line == line_number(text, new.split("\n")[0]) + new.count("\n")
    assert fault.given == new.split("\n")[-1]


def test_a_quantity_without_quotes_within_a_table_is_shown_with_them() -> None:
    fault = only_fault(with_line('size = "6 mm2"', 'protection = { type = "blade", rating = 20 A }'))
    assert fault.nearest == 'rating = "20 A"'


def test_a_text_that_is_cut_off_is_told_at_its_last_line() -> None:
    fault = only_fault(BASE.rstrip("\n") + '\nnotes = """never\nclosed\n')
    assert (fault.line, fault.problem) == (BASE.count("\n") + 2, "this is not valid TOML: a quote is not closed")


# Formats ---------------------------------------------------------------------------------------------------------

FORMATS = [
    ("format = 2", "later format", "2"),
    ("format = 0xffffffffffffffffffffffffff", "later format", "a number of more than 20 digits"),
    ("format = 0", "is not a format", "0"),
    ("format = -1", "is not a format", "-1"),
    ("format = 1.0", "is not a format", "1.0"),
    ("format = true", "is not a format", "true"),
    ('format = "1"', "is not a format", '"1"'),
    ("format = []", "is not a format", ""),
    ("format = 2024-01-01", "is not a format", "2024-01-01"),
]


@pytest.mark.parametrize(("stated", "problem", "given_text"), FORMATS)
def test_other_formats_are_refused_first(stated: str, problem: str, given_text: str) -> None:
    fault = only_fault(BASE.replace("format = 1", stated).replace("60 W", "60"))
    assert (fault.field, fault.line, fault.given) == ("format", 1, given_text)
    assert problem in fault.problem
    assert "format = 1" in fault.accepted


def test_a_missing_format_is_told_even_when_misspelt() -> None:
    assert "does not state its format" in only_fault(BASE.replace("format = 1\n", "")).problem
    misspelt = only_fault(BASE.replace("format = 1", "fromat = 1"))
    assert (misspelt.line, misspelt.problem) == (1, 'the file does not state its format (there is "fromat")')


# Faults of single fields -----------------------------------------------------------------------------------------

RUN, LOAD, BANK, CASE = 'runs "feed"', 'loads "pump"', 'sources "bank"', 'cases "All on"'

LENGTH, SIZE, POWER, NAME, KIND = (
    'length = "4 m"',
    'size = "6 mm2"',
    'power = "60 W"',
    'name = "All on"',
    'kind = "battery"',
)

FAULTS = [
    # old line, new line; place, field, given, part of the problem, part of what is accepted, nearest
    (LENGTH, 'length = "-4 m"', RUN, "length", '"-4 m"', "more than zero", '"4.5 m"', ""),
    (LENGTH, 'length = "0 ft"', RUN, "length", '"0 ft"', "more than zero", '"15 ft"', ""),
    (LENGTH, 'length = "inf m"', RUN, "length", '"inf m"', "not a finite number", '"4.5 m"', ""),
    (LENGTH, "length = inf", RUN, "length", "inf", "not a text with a number and a unit", '"4.5 m"', ""),
    (LENGTH, "length = nan", RUN, "length", "nan", "not a text with a number and a unit", '"4.5 m"', ""),
    (LENGTH, 'length = "200 km"', RUN, "length", '"200 km"', "not be more than 100000 m", '"4.5 m"', ""),
    (LENGTH, 'length = "4"', RUN, "length", '"4"', "has no unit", '"4.5 m"', '"4 m"'),
    (LENGTH, "length = 4", RUN, "length", "4", "bare number", '"4.5 m"', '"4 m"'),
    (LENGTH, "length = 4.5", RUN, "length", "4.5", "bare number", '"4.5 m"', '"4.5 m"'),
    (LENGTH, f"length = 0x{'f' * 5000}", RUN, "length", "a number of more than 20 digits", "not a text", '"4.5 m"', ""),
    (LENGTH, 'length = "4 meters"', RUN, "length", '"4 meters"', "unknown unit", "m, cm, mm, km, ft, in", '"4 m"'),
    (LENGTH, 'length = "4 W"', RUN, "length", '"4 W"', "unit of power", '"4.5 m"', ""),
    (LENGTH, "length = true", RUN, "length", "true", "not a text", '"4.5 m"', ""),
    (LENGTH, "length = {}", RUN, "length", "", "not a text", '"4.5 m"', ""),
    (LENGTH, "length = 2024-01-01", RUN, "length", "2024-01-01", "not a text", '"4.5 m"', ""),
    (LENGTH, "", RUN, "length", "", "is missing", '"4.5 m"', ""),
    (SIZE, "size = 6", RUN, "size", "6", "different systems", "10 AWG", '"6 mm2" or "6 AWG" or "6 SAE"'),
    (SIZE, 'size = "7 mm2"', RUN, "size", '"7 mm2"', "no table knows", "6, 10, 16", '"6 mm2"'),
    (SIZE, 'size = "10 AGW"', RUN, "size", '"10 AGW"', "not a system", "10 AWG", '"10 AWG"'),
    (SIZE, "size = []", RUN, "size", "", "not a conductor size", "10 AWG", ""),
    (SIZE, "size = true", RUN, "size", "true", "not a conductor size", "10 AWG", ""),
    (SIZE, 'material = "cooper"', RUN, "material", '"cooper"', "not a known choice", "tinned copper", '"copper"'),
    (SIZE, "strand = 5", RUN, "strand", "5", "not a known choice", '"flexible"', ""),
    (SIZE, "parallel = 0", RUN, "parallel", "0", "too small", "whole number from 1 to 1000", ""),
    (SIZE, "parallel = 1.5", RUN, "parallel", "1.5", "whole number", "whole number from 1 to 1000", ""),
    (SIZE, 'parallel = "2"', RUN, "parallel", '"2"', "whole number", "whole number from 1 to 1000", ""),
    (SIZE, "joints = 2000", RUN, "joints", "2000", "too large", "whole number from 0 to 1000", ""),
    (SIZE, 'insulation = "400 degC"', RUN, "insulation", '"400 degC"', "more than 300 degC", '"86 degF"', ""),
    (SIZE, 'insulation = "-150 degF"', RUN, "insulation", '"-150 degF"', "less than -100 degC", '"86 degF"', ""),
    (SIZE, 'zone = "cabn"', RUN, "zone", '"cabn"', "no such zone", '"cabin"', '"cabin"'),
    (SIZE, 'route = "lom"', RUN, "route", '"lom"', "no such route", '"loom"', '"loom"'),
    (SIZE, "lenght = 3", RUN, "lenght", "", "no such field", "length", '"length"'),
    (SIZE, "return = 3", RUN, "return", "3", "not a known choice", '"chassis"', ""),
    (SIZE, 'return = "Chasis"', RUN, "return", '"Chasis"', "not a known choice", '"chassis"', '"chassis"'),
    (SIZE, 'return = { sise = "4 mm2" }', RUN, "return.sise", "", "no such field", "size, length", '"size"'),
    (SIZE, "protection = 3", RUN, "protection", "3", "not a table", 'type = "blade"', ""),
    (SIZE, 'protection = { type = "blade" }', RUN, "protection.rating", "", "is missing", '"30 A"', ""),
    (
        SIZE, 'protection = { type = "blad", rating = "5 A" }', RUN, "protection.type", '"blad"',
        "no such type of protection", "terminal fuse", '"blade"',
    ),
    (
        SIZE, 'protection = [{ type = "blade", rating = "5 A" }, { type = "blade", rating = "5 V" }]', RUN,
        "protection.entry 2.rating", '"5 V"', "unit of voltage", '"30 A"', "",
    ),
    (SIZE, "protection_to = []", RUN, "protection_to", "", "not a table", "type, rating", ""),
    (POWER, "", LOAD, "", "", "has no rating", "exactly one of", ""),
    (POWER, f'{POWER}\ncurrent = "5 A"', LOAD, "", "", "has 2 ratings (power, current)", "exactly one of", ""),
    (POWER, f'{POWER}\nmin_volts = "15 V"\nmax_volts = "10 V"', LOAD, "", "", "min_volts is above", "min_volts", ""),
    (POWER, f"{POWER}\nhours_per_day = 25", LOAD, "hours_per_day", "25", "too large", "from 0 to 24", ""),
    (POWER, f'{POWER}\nhours_per_day = "3"', LOAD, "hours_per_day", '"3"', "not a number", "from 0 to 24", ""),
    (POWER, f"{POWER}\nhours_per_day = true", LOAD, "hours_per_day", "true", "not a number", "from 0 to 24", ""),
    (POWER, f'{POWER}\nschedule = "18:00-19:00"', LOAD, "schedule", '"18:00-19:00"', "not a list", "a list of", ""),
    (POWER, f'{POWER}\nschedule = ["25:00-1:00"]', LOAD, "schedule.entry 1", '"25:00-1:00"', "span", "18:00-23:30", ""),
    (POWER, f"{POWER}\nduty = 40", LOAD, "duty", "40", "bare number", '"80 %"', '"40 %"'),
    (POWER, f"{POWER}\nduty = 0.4", LOAD, "duty", "0.4", "bare number", '"80 %"', '"40 %"'),
    (POWER, f'{POWER}\nduty = "120 %"', LOAD, "duty", '"120 %"', "more than 100 %", '"80 %"', ""),
    (POWER, f'{POWER}\ncontinuous = "yes"', LOAD, "continuous", '"yes"', "not true or false", "true or false", ""),
    (POWER, f"{POWER}\nsurge = {{}}", LOAD, "surge", "", "exactly one of", "18 A", ""),
    (POWER, f"{POWER}\nsurge = {{ times = 0 }}", LOAD, "surge.times", "0", "too small", "above 0", ""),
    (POWER, f"{POWER}\nnotes = 3", LOAD, "notes", "3", "not a text", "a text in quotes", ""),
    (KIND, 'kind = "battry"', BANK, "kind", '"battry"', "not a known choice", "battery, charger", '"battery"'),
    (KIND, "kind = 5", BANK, "kind", "5", "not a known choice", "battery, charger", ""),
    (KIND, "", BANK, "kind", "", "is missing", "battery, charger", ""),
    (KIND, f'{KIND}\ncharge = "120 %"', BANK, "charge", '"120 %"', "more than 100 %", '"80 %"', ""),
    (KIND, f"{KIND}\nbattery = 3", BANK, "battery", "", "no such field", "chemistry", ""),
    (KIND, f'{KIND}\nlink = {{ length = "1 m" }}', BANK, "link.size", "", "is missing", "50 mm2", ""),
    (
        KIND, f'{KIND}\nlink = {{ length = "1 m", size = "free" }}', BANK, "link.size", '"free"', "must be stated",
        "50 mm2", "",
    ),
    ('emf = "13 V"', "", BANK, "", "", 'needs "chemistry", or "emf"', "lfp", ""),
    ('resistance = "5 mohm"', "", BANK, "", "", 'needs "resistance"', "4 mohm", ""),
    (NAME, "", "cases, entry 1", "name", "", "is missing", "a text in quotes", ""),
    (NAME, 'name = ""', "cases, entry 1", "name", '""', "is empty", "a text", ""),
    (NAME, "name = 5", "cases, entry 1", "name", "5", "not a text", "a text in quotes", ""),
    (NAME, f"{NAME}\nloads = 5", CASE, "loads", "5", "not a known choice", '"all", "none"', ""),
    (NAME, f'{NAME}\nloads = "al"', CASE, "loads", '"al"', "not a known choice", '"all", "none"', '"all"'),
    (NAME, f"{NAME}\nloads = {{ pump = -1 }}", CASE, "loads.pump", "-1", "too small", "from 0 to 1000", ""),
    (NAME, f"{NAME}\nloads = {{ pump = true }}", CASE, "loads.pump", "true", "not a number", "from 0 to 1000", ""),
    (NAME, f"{NAME}\nloads = {{ pmup = 1 }}", CASE, "loads", '"pmup"', "no such load", '"pump"', '"pump"'),
    (NAME, f'{NAME}\nsources = "off"', CASE, "sources", '"off"', "not a table", '"name" = "on"', ""),
    (NAME, f'{NAME}\nsources = {{ bnk = "off" }}', CASE, "sources", '"bnk"', "no such source", '"bank"', '"bank"'),
    (NAME, f'{NAME}\nsources = {{ bank = "of" }}', CASE, "sources.bank", '"of"', "not a known", '"off"', '"off"'),
    (NAME, f"{NAME}\nsources = {{ bank = 3 }}", CASE, "sources.bank", "3", "not a table", "", ""),
    (
        NAME, f'{NAME}\nsources = {{ bank = {{ volts = "14 V" }} }}', CASE, "sources.bank.volts", '"14 V"',
        "not a setting of a battery", "state, charge, emf", "",
    ),
    (
        NAME, f'{NAME}\nsources = {{ bank = {{ chrge = "50 %" }} }}', CASE, "sources.bank.chrge", "",
        "no such field", "charge", '"charge"',
    ),
    (
        NAME, f'{NAME}\nsources = {{ bank = {{ state = "full", charge = "50 %" }} }}', CASE, "sources.bank.charge",
        '"50 %"', "full battery", "", "",
    ),
    (NAME, f'{NAME}\ndevices = {{ switch = "opn" }}', CASE, "devices.switch", '"opn"', "known", '"open"', '"open"'),
    (NAME, f'{NAME}\ndevices = {{ swich = "open" }}', CASE, "devices", '"swich"', "no such", '"switch"', '"switch"'),
    (NAME, f"{NAME}\nambient = 30", CASE, "ambient", "30", "bare number", '"30 degC"', '"30 degC"'),
    ('nominal = "12 V"', "", "plan", "nominal", "", "is missing", '"12 V"', ""),
    ('nominal = "12 V"', 'nominal = "12 V"\nreference = "bnk"', "plan", "reference", '"bnk"', "no such", "", '"bank"'),
    (
        'nominal = "12 V"', 'nominal = "12 V"\nconductor_temperature = "ratd"', "plan", "conductor_temperature",
        '"ratd"', "not a known choice", "rulebook, rated", '"rated"',
    ),
    (
        'nominal = "12 V"', 'nominal = "12 V"\nconductor_temperature = "60"', "plan", "conductor_temperature", '"60"',
        "has no unit", "degC", '"60 degC"',
    ),
    ('zone = "cabin"', 'zone = "cbin"', 'routes "loom"', "zone", '"cbin"', "no such zone", '"cabin"', '"cabin"'),
    ('zone = "cabin"', "conductors = 0", 'routes "loom"', "conductors", "0", "too small", "from 1 to 1000", ""),
    ('ambient = "30 degC"', 'ambient = "30 C"', 'zones "cabin"', "ambient", '"30 C"', "unknown", "degC", '"30 degC"'),
]  # fmt: skip


@pytest.mark.parametrize(("old", "new", "place", "field", "value", "problem", "accepted", "nearest"), FAULTS)
def test_a_fault_names_its_place_the_value_what_is_accepted_and_the_nearest(
    old: str, new: str, place: str, field: str, value: str, problem: str, accepted: str, nearest: str
) -> None:
    text = with_line(old, new)
    fault = next(one for one in faults_of(text) if problem in one.problem)
    assert (fault.place, fault.field, fault.given) == (place, field, value)
    assert accepted in fault.accepted
    assert fault.nearest == nearest
    within = text.split("\n")[(fault.line or 0) - 1]
    key = field.split(".")[0]
    assert within.startswith((key, f'"{key}"')) or (value == "" and within.startswith(("[", key)))


@pytest.mark.parametrize(
    ("text", "place", "problem"),
    [
        ("format = 1\nplan = 3\n", "", "is not a table"),
        ("format = 1\n[[plan]]\n", "", "is not a table"),
        ("format = 1\nplan = []\n", "", "is not a table"),
        (BASE.replace("[[runs]]", "[runs]"), "", "is not a list"),
        (BASE.replace("[[runs]]", "[runs.x]"), "", "is not a list"),
        (BASE.replace("[zones.cabin]", "[[zones]]"), "", "is not a table"),
        (BASE.replace('[zones.cabin]\nambient = "30 degC"', "[zones]\ncabin = 3"), 'zones "cabin"', "is not a table"),
        (
            "format = 1\nruns = [1, {}]\n" + BASE.split("\n", 1)[1].replace("[[runs]]", "[[points]]"),
            "runs, entry 1",
            "is not a table",
        ),
        (BASE.replace("[[loads]]", "[[load]]"), "", "there is no such field"),
    ],
)
def test_tables_of_the_wrong_shape_are_told(text: str, place: str, problem: str) -> None:
    fault = next(one for one in faults_of(text) if problem in one.problem)
    assert fault.place == place
    assert fault.line is not None
    assert fault.accepted


def test_all_faults_of_a_file_are_told_at_once_in_order_of_lines() -> None:
    text = (
        BASE.replace('nominal = "12 V"', 'nominal = "12"')
        .replace('emf = "13 V"', 'emf = "13 A"')
        .replace(LENGTH, 'lenght = "4 m"')
        .replace('to = "far"', 'to = "galley"')
        .replace(POWER, f'{POWER}\ncurrent = "5 A"')
        .replace(NAME, f"{NAME}\nloads = {{ pmup = 1 }}")
    )
    found = [(one.place, one.field) for one in faults_of(text)]
    assert found == [
        ("plan", "nominal"),
        (BANK, "emf"),
        (RUN, "length"),
        (RUN, "lenght"),
        ('devices "switch"', "to"),
        (LOAD, ""),
        (CASE, "loads"),
    ]
    with pytest.raises(PlanError) as caught:
        planfile.parse(text, "van.toml")
    assert len(str(caught.value).split("\n")) == len(found)
    assert all(re.match(r"van\.toml: line \d+: ", line) for line in str(caught.value).split("\n"))


HOSTILE = ["\\u001b[31mred", "two\\nlines", "\\u0007bell", "\\u202eturned", "\\u2028parted", "\\u0085next"]


@pytest.mark.parametrize("written", HOSTILE)
@pytest.mark.parametrize("old", ['name = "pump"', LENGTH, SIZE, "[zones.cabin]", POWER, KIND])
def test_text_of_a_file_stays_text_in_a_message(written: str, old: str) -> None:
    head, separator, _ = old.partition(" = ")
    new = f'{head} = "{written}"' if separator else f'[zones."{written}"]'
    for text in (with_line(old, new), with_line(old, f'{old}\n"{written}" = 1')):
        for fault in faults_of(text):
            assert str(fault).isprintable()


@pytest.mark.parametrize("written", HOSTILE)
def test_no_name_breaks_its_line_or_turns_the_text_around_it(written: str) -> None:
    fault = faults_of(with_line('name = "feed"', f'name = "{written}"'))[0]
    assert (fault.field, fault.problem) == ("name", "holds a control character")


def test_a_name_with_a_space_at_its_end_is_told() -> None:
    fault = only_fault(with_line('to = "galley"', 'to = "galley "'))
    assert (fault.problem, fault.nearest) == ("starts or ends with a space", '"galley"')


# Where a fault stands --------------------------------------------------------------------------------------------


def test_lines_are_those_of_an_editor() -> None:
    text = (
        'format = 1\n[plan]\nnotes = """\n[[runs]]\nname = "no run"\n"""\nname = "a"  # [[runs]]\n'
        "[[runs]]\n  'name' = \"x\u2028\"\n[[ runs ]] # second\nname = 'b'\n[runs.return]\nsize = 3\n"
        '[["runs".protection]]\ntype = 1\n[[runs.protection]]\ntype = 2\n[zones."left = loom"]\nambient = 5\n'
    )
    found = lines.index(text)
    expected: dict[tuple[str | int, ...], int] = {
        ("format",): 1,
        ("plan", "notes"): 3,
        ("plan", "name"): 7,
        ("runs",): 8,
        ("runs", 0): 8,
        ("runs", 0, "name"): 9,
        ("runs", 1): 10,
        ("runs", 1, "name"): 11,
        ("runs", 1, "return", "size"): 13,
        ("runs", 1, "protection", 0, "type"): 15,
        ("runs", 1, "protection", 1, "type"): 17,
        ("zones", "left = loom", "ambient"): 19,
    }
    assert {path: found.get(path) for path in expected} == expected
    assert lines.line_of(found, ("runs", 1, "length")) == 10
    assert lines.line_of(found, ("loads", 0)) is None


def test_a_study_s_fault_is_placed_in_the_file() -> None:
    text = with_line(POWER, f'{POWER}\nclass = "critcal"')
    with pytest.raises(PlanError) as caught:
        study(planfile.parse(text))
    fault = planfile.placed(caught.value, text, "plan.toml").faults[0]
    assert (fault.place, fault.field, fault.line) == (LOAD, "class", line_number(text, "class"))
