"""Changes to the text of a plan: what is meant happens, and nothing else moves."""

import copy
import difflib
import tomllib
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from farvolt import examples, planfile
from farvolt.errors import FarvoltError
from farvolt_app import blocks, edits
from farvolt_app.edits import Add, Duplicate, Remove, Set, apply, read, renaming

VAN = examples.text("instrument-repair-van")
ALL_TEXTS = [*(examples.text(name) for name in examples.names()), examples.starter_text()]


def changed_lines(before: str, after: str) -> list[str]:
    """Added and removed lines, each with its sign."""
    diff = difflib.ndiff(before.splitlines(), after.splitlines())
    return [line for line in diff if line[:2] in ("+ ", "- ")]


def test_one_field_changes_one_line() -> None:
    after = apply(VAN, [Set("runs", 3, ("length",), "9 m")])
    assert changed_lines(VAN, after) == ['- length = "1.5 m"', '+ length = "9 m"']


def test_a_comment_behind_a_value_stays() -> None:
    after = apply(VAN, [Set("sources", 0, ("resistance",), "15 mohm")])
    assert 'resistance = "15 mohm"         # cells, links' in after


def test_a_field_within_a_field() -> None:
    after = apply(VAN, [Set("runs", 0, ("protection", "rating"), "80 A")])
    assert read(after)["runs"][0]["protection"]["rating"] == "80 A"
    assert len(changed_lines(VAN, after)) == 2


def test_a_new_field_goes_to_the_end_of_its_own_entry_not_behind_the_comment_of_the_next_section() -> None:
    after = apply(VAN, [Set("runs", 1, ("notes",), "new")])
    lines = after.splitlines()
    assert lines[lines.index('notes = "new"') - 1] == 'joint_resistance = "0.1 mohm"'
    assert changed_lines(VAN, after) == ['+ notes = "new"']


def test_a_missing_table_on_the_way_is_made_and_an_emptied_one_goes() -> None:
    made = apply(VAN, [Set("runs", 1, ("protection", "rating"), "5 A")])
    assert 'protection = { rating = "5 A" }' in made
    assert apply(made, [Set("runs", 1, ("protection", "rating"), None)]) == VAN


def test_clearing_what_is_not_there_changes_nothing() -> None:
    steps = [Set("runs", 1, ("notes",), None), Set("runs", 1, ("protection", "type"), None)]
    assert apply(VAN, steps) == VAN


def test_a_case_with_every_load_cleared_has_all_loads_off_not_on() -> None:
    text = 'format = 1\n[[cases]]\nname = "x"\nloads = { "a" = 1.0 }\n'
    assert read(apply(text, [Set("cases", 0, ("loads", "a"), None)]))["cases"][0]["loads"] == {}


def test_a_bare_state_of_a_source_in_a_case_becomes_a_table_that_keeps_it() -> None:
    after = read(apply(VAN, [Set("cases", 0, ("sources", "mains charger", "amps"), "3 A")]))
    assert after["cases"][0]["sources"]["mains charger"] == {"state": "off", "amps": "3 A"}


def test_a_return_path_in_a_word_gives_way_to_a_table() -> None:
    index = next(i for i, run in enumerate(read(VAN)["runs"]) if run.get("return") == "chassis")
    after = read(apply(VAN, [Set("runs", index, ("return", "size"), "4 mm2")]))
    assert after["runs"][index]["return"] == {"size": "4 mm2"}


@pytest.mark.parametrize("text", ALL_TEXTS)
@pytest.mark.parametrize("table", ["sources", "runs", "loads", "cases"])
def test_removing_an_entry_removes_its_lines_only(text: str, table: str) -> None:
    for index in range(len(read(text).get(table, ()))):
        after = apply(text, [Remove(table, index)])
        expected = read(text)
        del expected[table][index]
        assert read(after) == ({**expected} if expected[table] else {k: v for k, v in expected.items() if k != table})
        assert all(line.startswith("- ") for line in changed_lines(text, after))
        assert [line for line in text.splitlines() if line.startswith("#")] == [
            line for line in after.splitlines() if line.startswith("#")
        ]


def test_a_copy_stands_right_behind_the_original_without_its_label() -> None:
    after = read(apply(VAN, [Duplicate("runs", 2, "second alternator")]))
    original, made = after["runs"][2:4]
    assert made == {**{k: v for k, v in original.items() if k != "label"}, "name": "second alternator"}
    planfile.parse(apply(VAN, [Duplicate("runs", 2, "second alternator")]))


def test_a_case_is_copied_with_its_tables() -> None:
    after = read(apply(VAN, [Duplicate("cases", 0, "copy")]))
    assert after["cases"][1] == {**after["cases"][0], "name": "copy"}


def test_a_new_entry_goes_to_the_end_of_its_table_before_the_next_heading() -> None:
    after = apply(VAN, [Add("runs", {"name": "new", "protection": {"type": "blade", "rating": "5 A"}})])
    assert after.index('name = "new"') < after.index("# Loads ---")
    assert 'protection = { type = "blade", rating = "5 A" }' in after
    assert all(line.startswith("+ ") for line in changed_lines(VAN, after))


def test_the_first_entry_of_a_table_that_is_not_there_yet() -> None:
    text = examples.starter_text()
    after = read(apply(text, [Add("zones", {"ambient": "3 degC"}, 'my "zone".x'), Add("devices", {"name": "d"})]))
    assert after["zones"] == {'my "zone".x': {"ambient": "3 degC"}}
    assert after["devices"] == [{"name": "d"}]


def test_a_name_that_is_taken_is_refused() -> None:
    with pytest.raises(FarvoltError, match='"cabin" is taken'):
        apply(VAN, [Add("zones", {}, "cabin")])
    with pytest.raises(FarvoltError, match='"engine" is taken'):
        apply(VAN, renaming(read(VAN), "zones", "cabin", "engine"))


def test_a_new_name_is_followed_in_what_starts_and_by_the_inverter_of_a_charger() -> None:
    load = [Set("cases", 2, ("surge",), ["fridge", "water pump"]), Set("loads", 0, ("inverter_of",), "mains charger")]
    text = apply(VAN, load)
    raw = read(text)
    loads, sources = ([row["name"] for row in raw[table]] for table in ("loads", "sources"))
    steps = [*renaming(raw, "loads", loads.index("water pump"), "pump"),
             *renaming(raw, "sources", sources.index("mains charger"), "shore charger")]  # fmt: skip
    after = read(apply(text, steps))
    assert after["cases"][2]["surge"] == ["fridge", "pump"]
    assert after["loads"][0]["inverter_of"] == "shore charger"


@pytest.mark.parametrize("table", ["sources", "loads", "devices"])
def test_a_new_name_is_followed_by_all_that_call_it(table: str) -> None:
    name = 'x "y" = z'
    for index in range(len(read(VAN)[table])):
        after = apply(VAN, renaming(read(VAN), table, index, name))
        plan = planfile.parse(after)
        assert getattr(plan, table)[index].name == name
    old = {entry["name"] for entry in read(VAN)[table]}
    assert old  # the loop ran


@pytest.mark.parametrize(("table", "name"), [("zones", "cabin"), ("routes", "bus locker")])
def test_a_zone_and_a_route_keep_their_runs_under_a_new_name(table: str, name: str) -> None:
    before = planfile.parse(VAN)
    plan = planfile.parse(apply(VAN, renaming(read(VAN), table, name, "new #1 [x]")))
    field = table.removesuffix("s")
    assert [getattr(run, field) for run in plan.runs] == [
        "new #1 [x]" if getattr(run, field) == name else getattr(run, field) for run in before.runs
    ]
    assert "# short, open, cables apart" in apply(VAN, renaming(read(VAN), table, name, "n"))


def test_a_name_that_another_has_takes_no_references_along() -> None:
    steps = renaming(read(VAN), "loads", 0, read(VAN)["loads"][1]["name"])
    assert len(steps) == 1


@pytest.mark.parametrize(
    "text",
    [
        'format = 1\nruns = [{ name = "a" }, { name = "b" }]\n',
        'format = 1\n[[runs]]\nname = "a"\n[[runs]]\nname = "b"\n',
        'format = 1\r\n[[runs]]\r\nname = "a"\r\n\r\n[[runs]]   # [[runs]]\r\nname = "b"\r\n',
        'format = 1\n[[runs]]\nname = """a"""\nnotes = """\n[[runs]]\n# x\n"""\n[[ runs ]]\n  name = \'b\'',
        'format = 1\n[[runs]]\nname = "a"\nlist = [\n  1,\n  [2],\n]\n[["runs"]]\nname = "b"\n[x]\n'
        '[runs.protection]\ntype="t"',
    ],
)
def test_other_ways_of_writing_the_same(text: str) -> None:
    steps = [
        Set("runs", 1, ("length",), "1 m"),
        Duplicate("runs", 0, "c"),
        Add("runs", {"name": "d"}),
        Set("plan", None, ("name",), "p"),
    ]
    after = read(apply(text, steps))
    assert [run["name"] for run in after["runs"]] == ["a", "c", "b", "d"]
    assert after["runs"][2]["length"] == "1 m"
    assert after["plan"] == {"name": "p"}
    if "\r\n" in text:
        assert "\n" not in apply(text, steps[:3]).replace("\r\n", "")


def test_what_cannot_be_changed_is_said() -> None:
    with pytest.raises(FarvoltError, match="not valid TOML"):
        apply("a = = b", [Set("runs", 0, ("length",), "1 m")])
    with pytest.raises(FarvoltError, match="no entry 99"):
        apply(VAN, [Set("runs", 99, ("length",), "1 m")])
    with pytest.raises(FarvoltError, match="no entry"):
        apply('format = 1\nruns = "text"', [Set("runs", 0, ("length",), "1 m")])


TEXTS = st.text(st.characters(exclude_categories=["Cs"]), max_size=12)


@settings(max_examples=60, deadline=None)
@given(data=st.data(), text=st.sampled_from(ALL_TEXTS))
def test_any_text_in_any_field_comes_back_as_it_was_given(data: st.DataObject, text: str) -> None:
    raw = read(text)
    table = data.draw(st.sampled_from([name for name in ("sources", "runs", "loads", "cases") if name in raw]))
    index = data.draw(st.integers(0, len(raw[table]) - 1))
    field, value = data.draw(TEXTS.filter(bool)), data.draw(TEXTS | st.integers() | st.booleans())
    expected = copy.deepcopy(raw)
    expected[table][index][field] = value
    after = apply(text, [Set(table, index, (field,), value)])
    assert tomllib.loads(after) == expected
    untouched = [line for line in changed_lines(text, after) if line.startswith("- ")]
    assert len(untouched) <= (1 if field in raw[table][index] else 0)


@settings(max_examples=40, deadline=None)
@given(name=TEXTS.filter(bool))
def test_any_name_for_a_zone(name: str) -> None:
    after: dict[str, Any] = read(apply(VAN, [Add("zones", {"ambient": "1 degC"}, name)])) if name not in (
        "cabin", "engine", "roof",
    ) else {"zones": {name: {"ambient": "1 degC"}}}  # fmt: skip
    assert after["zones"][name] == {"ambient": "1 degC"}


@pytest.mark.parametrize("text", ALL_TEXTS)
def test_blocks_put_together_are_the_text(text: str) -> None:
    assert "".join(block.text for block in blocks.split(text)) == text
    assert sum(block.path == ("runs",) for block in blocks.split(text)) == len(read(text)["runs"])


def test_no_step_no_change() -> None:
    assert edits.apply(VAN, []) == VAN


def test_two_entries_change_places_with_the_comments_right_above_them() -> None:
    text = (
        'format = 1\n\n# Runs of the van\n\n# to the galley\n[[runs]]\nname = "a"\n\n'
        '# to the bed\n[[runs]]\nname = "b"  # long\n\n[[loads]]\nname = "lamp"\n'
    )
    swapped = (
        'format = 1\n\n# Runs of the van\n\n# to the bed\n[[runs]]\nname = "b"  # long\n\n'
        '# to the galley\n[[runs]]\nname = "a"\n\n[[loads]]\nname = "lamp"\n'
    )
    assert apply(text, [edits.Swap("runs", 0, 1)]) == swapped
    assert apply(swapped, [edits.Swap("runs", 1, 0)]) == text


@pytest.mark.parametrize("text", ALL_TEXTS)
@pytest.mark.parametrize("table", ["runs", "sources", "loads", "zones", "cases"])
def test_a_swap_made_twice_is_none_and_moves_only_the_two(text: str, table: str) -> None:
    before = read(text).get(table, [])
    keys = list(before) if isinstance(before, dict) else list(range(len(before)))
    if len(keys) < 2:
        return
    step = edits.Swap(table, keys[-1], keys[0])
    once = apply(text, [step])
    after = read(once)[table]
    order = list(after) if isinstance(after, dict) else [row["name"] for row in after]
    expected = list(before) if isinstance(before, dict) else [row["name"] for row in before]
    expected[0], expected[-1] = expected[-1], expected[0]
    assert order == expected
    assert sorted(once.splitlines()) == sorted(text.splitlines())
    again = step if isinstance(before, list) else edits.Swap(table, keys[0], keys[-1])
    assert read(apply(once, [again])) == read(text)


def test_entries_that_have_no_block_of_their_own_change_places_too() -> None:
    text = 'format = 1\nloads = [{ name = "a", at = "x" }, { name = "b", at = "y" }]\n'
    assert [row["name"] for row in read(apply(text, [edits.Swap("loads", 0, 1)]))["loads"]] == ["b", "a"]
    with pytest.raises(FarvoltError, match="no entry"):
        apply(text, [edits.Swap("loads", 0, 2)])
