"""Tables of readings: what they say, and how each wrong row is named."""

from pathlib import Path

import pytest

from farvolt import examples, planfile, rulebook
from farvolt.installation import Installation
from farvolt.locate import locate
from farvolt.network import FEED, RETURN
from farvolt.reading_table import from_rows, from_text
from farvolt.readings import COLUMNS, ReadingsError
from farvolt_app import readings_file

VAN = planfile.parse(examples.text("instrument-repair-van"))
HEAD = "set,case,loads,sources,devices,from,from pole,to,to pole,volts,run,pole,amps,accuracy,resolution\n"


def row(**cells: str) -> str:
    """One row of a table under `HEAD`; an underscore stands for a space in a column's name."""
    known = HEAD.strip().split(",")
    given = {name.replace("_", " ").strip(): f'"{cell}"' for name, cell in cells.items()}
    assert set(given) <= set(known)
    return ",".join(given.get(name, "") for name in known) + "\n"


def refused(text: str) -> str:
    with pytest.raises(ReadingsError) as caught:
        from_text(text, VAN)
    return str(caught.value)


def test_a_point_alone_is_read_from_its_feed_to_its_return() -> None:
    (one,) = from_text("from,volts\nbank,12.84\n", VAN)[0].readings
    assert (one.start, one.end, one.value, one.row) == (("bank", FEED), ("bank", RETURN), 12.84, 2)


def test_what_a_meter_may_be_off_by_comes_from_the_digits_as_written() -> None:
    """0.5 % of 12.84 V and 2 digits of 10 mV; 0.5 % of 31.2 mV and 2 digits of 0.1 mV."""
    volts, millivolts = from_text("from,to,volts\nbank,,12.84\nmain bus,living block,31.2 mV\n", VAN)[0].readings
    assert volts.limit == pytest.approx(0.005 * 12.84 + 2 * 0.01)
    assert millivolts.value == pytest.approx(0.0312)
    assert millivolts.limit == pytest.approx(0.005 * 0.0312 + 2 * 0.0001)


def test_a_spreadsheet_drops_noughts_and_the_finest_digit_of_its_size_counts() -> None:
    rows = [(1, ["from", "volts"]), (2, ["bank", "12.84"]), (3, ["main bus", "12.8"]), (4, ["radio", "0.5"])]
    first, second, third = from_rows(rows, VAN)[0].readings
    assert first.limit - 0.005 * 12.84 == pytest.approx(second.limit - 0.005 * 12.8) == pytest.approx(0.02)
    assert third.limit == pytest.approx(0.005 * 0.5 + 0.2)


def test_accuracy_and_resolution_are_as_stated() -> None:
    text = HEAD + row(from_="bank", volts="12.8", accuracy="±1 % + 3 digits", resolution="10 mV")
    assert from_text(text, VAN)[0].readings[0].limit == pytest.approx(0.128 + 0.03)


def test_a_clamp_reads_a_run_by_name_or_label() -> None:
    by_name, by_label = from_text("run,pole,amps\nfridge feed,return,4.8\nW08,,4.9\n", VAN)[0].readings
    assert (by_name.run, by_name.pole, by_label.run, by_label.pole) == ("fridge feed", RETURN, "fridge feed", FEED)


def test_rows_without_a_set_belong_to_the_one_before_and_share_its_state() -> None:
    text = HEAD + row(set="a", case="Everything on, no charging", from_="bank", volts="12.5")
    text += row(from_="radio", volts="12.1") + row(set="b", loads="none", from_="bank", volts="12.9")
    first, second = from_text(text, VAN)
    assert [len(one.readings) for one in (first, second)] == [2, 1]
    assert first.case.name == "Everything on, no charging"
    assert second.case.share("radio") == 0


def test_loads_sources_and_devices_of_the_moment_change_the_case() -> None:
    text = HEAD + row(loads="fridge; radio = 50 %", sources="house bank = 12.9 V; mains charger = on",
                      devices="bank switch = open", from_="bank", volts="12.9")  # fmt: skip
    case = from_text(text, VAN)[0].case
    assert (case.share("fridge"), case.share("radio"), case.share("water pump")) == (1.0, 0.5, 0.0)
    emf = case.sources["house bank"].emf
    assert emf is not None
    assert emf.si == 12.9
    assert case.sources["mains charger"].state == "on"
    assert case.devices["bank switch"] == "open"


@pytest.mark.parametrize(
    ("cells", "said"),
    [
        ({"from_": "fridgge", "volts": "12"}, ("row 2, from", "fridgge", "no such point")),
        ({"from_": "mainbus", "volts": "12"}, ("row 2, from", 'did you mean "main bus"?')),
        ({"from_": "bank", "from pole": "fed", "volts": "12"}, ("row 2, from pole", "fed", 'did you mean "feed"?')),
        ({"from_": "bank", "to": "bank", "volts": "0"}, ("row 2, to", "same node")),
        ({"from_": "bank", "volts": "12,8"}, ("row 2, volts", "12,8", "12.8")),
        ({"from_": "bank", "volts": "12.8 A"}, ("row 2, volts", "unit of current")),
        ({"from_": "bank", "volts": "twelve"}, ("row 2, volts", "twelve", "number")),
        ({"from_": "bank", "volts": "nan"}, ("row 2, volts", "nan")),
        ({"from_": "bank", "volts": "1e999"}, ("row 2, volts", "finite")),
        ({"run": "fridge", "amps": "4"}, ("row 2, run", "no such run", "fridge feed")),
        ({"run": "rear work lamp feed", "pole": "return", "amps": "4"}, ("row 2, pole", "no such conductor")),
        ({"run": "fridge feed", "from_": "bank", "amps": "4"}, ("row 2, from", "run and pole")),
        ({"from_": "bank", "volts": "12", "amps": "3"}, ("row 2", "both volts and amps")),
        ({"from_": "bank"}, ("row 2", "has no reading")),
        ({"from_": "bank", "volts": "12", "accuracy": "good"}, ("row 2, accuracy", "good", "0.5 % + 2 digits")),
        ({"from_": "bank", "volts": "12", "case": "Everything"}, ("row 2, case", "Everything", "no such case")),
        ({"from_": "bank", "volts": "12", "loads": "fridg"}, ("row 2, loads", "fridg", 'did you mean "fridge"?')),
        ({"from_": "bank", "volts": "12", "loads": "fridge = half"}, ("row 2, loads", "half", "50 %")),
        ({"from_": "bank", "volts": "12", "sources": "house bank = flat"}, ("row 2, sources", "flat", "60 %")),
        ({"from_": "bank", "volts": "12", "devices": "bank switch = shut"}, ("row 2, devices", "shut", "closed")),
    ],
)  # fmt: skip
def test_each_wrong_row_is_named_with_what_is_accepted(cells: dict[str, str], said: tuple[str, ...]) -> None:
    message = refused(HEAD + row(**cells))
    for part in said:
        assert part in message


def test_all_wrong_rows_are_told_at_once() -> None:
    message = refused("from,volts\nnowhere,12\nbank,x\n")
    assert "row 2" in message
    assert "row 3" in message


def test_two_states_in_one_set_are_refused() -> None:
    text = HEAD + row(set="1", loads="all", from_="bank", volts="12") + row(set="1", loads="none", from_="bank",
                                                                              volts="13")  # fmt: skip
    assert "row 3, loads" in refused(text)


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("", "heading"),
        ("from,volt\nbank,12\n", 'did you mean "volts"?'),
        ("from,to\nbank,main bus\n", "no column of readings"),
        ("from,volts,volts\nbank,12,12\n", "twice"),
        ("from,volts\n", "no reading"),
        ("from,volts\nbank,12,extra\n", "more cells"),
    ],
)
def test_what_is_no_table_of_readings(text: str, said: str) -> None:
    assert said in refused(text)


def test_semicolons_notes_and_a_byte_order_mark_are_read() -> None:
    text = "\ufeff# taken on the quay\nfrom;to;volts\n\nbank;;12.84\n"
    (one,) = from_text(text, VAN)[0].readings
    assert (one.value, one.row) == (12.84, 4)


def test_columns_are_all_read_or_free() -> None:
    assert {"time", "notes"} < set(COLUMNS)
    (found,) = from_text("from,volts,time,notes\nbank,12.8,2026-05-01 10:30,=1+1\n", VAN)
    assert found.times == ("2026-05-01 10:30",)


# Slips ---------------------------------------------------------------------------------------------------------------


def located(text: str) -> str:
    installation = Installation(VAN, rulebook.load(VAN.plan.rulebook))
    with pytest.raises(ReadingsError) as caught:
        locate(installation, from_text(text, VAN))
    return str(caught.value)


def test_leads_the_wrong_way_round_are_offered() -> None:
    message = located("from,volts\nbank,-12.31\n")
    assert "row 2, volts" in message
    assert "wrong way round" in message
    assert 'did you mean "12.31 V"?' in message


def test_millivolts_given_as_volts_are_offered() -> None:
    message = located("from,to,volts\nbank,,12.31\nliving block,rear fridge,211\n")
    assert "row 3, volts" in message
    assert "thousandths" in message
    assert 'did you mean "0.211 V"?' in message


def test_volts_given_as_millivolts_are_offered() -> None:
    assert 'did you mean "12.31 V"?' in located("from,volts\nbank,12.31 mV\n")


def test_more_than_all_sources_have_is_impossible() -> None:
    assert "more than all sources together" in located("from,volts\nbank,90.0\n")


def test_readings_that_contradict_each_other_are_named() -> None:
    """Down the feed and the return, 12.31 − 0.21 − 0.16 V are left at the fridge, not 11.2 V (Kirchhoff)."""
    text = "from,from pole,to,to pole,volts\nliving block,,,,12.21\nliving block,feed,rear fridge,feed,0.211\n"
    text += "rear fridge,return,living block,return,0.164\nrear fridge,,,,10.20\n"
    message = located(text)
    assert "rows 2, 3, 4, 5 contradict each other" in message


def test_the_same_place_read_twice_must_agree() -> None:
    assert "rows 2, 3 contradict" in located("from,volts\nbank,12.31\nbank,11.40\n")


def test_a_table_on_the_disk_that_cannot_be_read_is_told(tmp_path: Path) -> None:
    (folder := tmp_path / "folder.csv").mkdir()
    for path in (tmp_path / "none.csv", folder):
        with pytest.raises(ReadingsError, match="cannot be read"):
            readings_file.read(str(path), VAN)


def test_the_sheet_of_a_workbook_reads_as_the_same_table(tmp_path: Path) -> None:
    from openpyxl import Workbook

    book = Workbook()
    sheet = book.active
    assert sheet is not None
    sheet.title = "Readings"
    for cells in (["Readings of the van"], [], ["from", "to", "volts"], ["bank", None, 12.84], ["radio", None, 12.8]):
        sheet.append(cells)
    book.save(tmp_path / "taken.xlsx")
    first, second = readings_file.read(str(tmp_path / "taken.xlsx"), VAN)[0].readings
    assert (first.row, first.value, second.value) == (4, 12.84, 12.8)
    assert second.limit == pytest.approx(0.005 * 12.8 + 0.02)


@pytest.mark.parametrize(("name", "data"), [("a.xlsx", b"not a workbook"), ("a.csv", b"\xff\xfe\xfa"), ("a.ods", b"")])
def test_a_file_of_another_kind_is_told(tmp_path: Path, name: str, data: bytes) -> None:
    (tmp_path / name).write_bytes(data)
    with pytest.raises(ReadingsError, match=r"workbook|UTF-8|accepted: \.csv, \.xlsx"):
        readings_file.read(str(tmp_path / name), VAN)
