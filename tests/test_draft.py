"""The draft keeps what was typed, the last valid results, and the way back."""

from pathlib import Path

import pytest

from farvolt import examples, planfile
from farvolt.errors import PlanError, SaveError
from farvolt_app import draft
from farvolt_app.edits import Set, apply

VAN = examples.text("instrument-repair-van")
LONGER = apply(VAN, [Set("runs", 7, ("length",), "9 m")])
FAULTY = apply(VAN, [Set("runs", 7, ("length",), "9")])


def drop_of_fridge(one: draft.Draft) -> float | None:
    """Drop of the first load of the last case, in volt."""
    assert one.results is not None
    return one.results.cases[2].loads[0].drop_V


def test_an_edit_has_its_own_results_and_can_be_taken_back_and_made_again() -> None:
    first = draft.begin(VAN)
    second = first.edit(LONGER)
    before, after = drop_of_fridge(first), drop_of_fridge(second)
    assert before is not None
    assert after is not None
    assert after > before
    back = second.undo()
    assert (back.text, drop_of_fridge(back)) == (VAN, before)
    assert (back.redo().text, drop_of_fridge(back.redo())) == (LONGER, after)


def test_a_fault_keeps_the_text_and_the_results_of_the_last_valid_one() -> None:
    first = draft.begin(VAN)
    faulty = first.edit(FAULTY)
    assert faulty.text == FAULTY
    assert faulty.results is first.results
    assert faulty.valid_text == VAN
    assert [(fault.place, fault.field, fault.nearest) for fault in faulty.faults] == [
        ('runs "fridge feed"', "length", '"9 m"')
    ]
    mended = faulty.edit(LONGER)
    assert mended.faults == ()
    assert mended.valid_text == LONGER
    assert mended.undo().text == FAULTY
    assert mended.undo().faults == faulty.faults


def test_what_only_the_study_finds_is_a_fault_as_well() -> None:
    first = draft.begin(VAN)
    for field, value, place in (
        (("protection", "type"), "bladd", 'runs "fridge feed"'),
        (("length",), "-1 m", 'runs "fridge feed"'),
    ):
        faulty = first.edit(apply(VAN, [Set("runs", 7, field, value)]))
        assert faulty.faults[0].place == place
        assert faulty.results is first.results
    faulty = first.edit(apply(VAN, [Set("plan", None, ("rulebook",), "no-such-rulebook")]))
    assert faulty.faults[0].field == "rulebook"
    assert "no-such-rulebook" in str(faulty.faults[0])


def test_a_change_after_undo_leaves_nothing_to_redo() -> None:
    one = draft.begin(VAN).edit(LONGER).undo().edit(FAULTY)
    assert one.redo() is one
    assert one.undo().undo() is not one
    assert draft.begin(VAN).undo().text == VAN


def test_the_same_text_is_no_change() -> None:
    first = draft.begin(VAN)
    assert first.edit(VAN) is first


def test_a_text_that_was_never_valid_has_no_results() -> None:
    one = draft.begin("format = 1\n[[runs")
    assert one.results is None
    assert one.plan is None
    assert "not valid TOML" in one.faults[0].problem
    assert one.edit(VAN).results is not None


def test_saving_and_saving_again(tmp_path: Path) -> None:
    file = tmp_path / "van.toml"
    saved = draft.begin(VAN).save(file)
    assert saved.saved
    edited = saved.edit(LONGER)
    assert not edited.saved
    again = edited.save(file)
    assert planfile.read_text(file) == LONGER
    assert (tmp_path / "van.toml.previous").read_text() == VAN
    assert again.saved
    assert draft.open_file(file).saved


def test_a_file_that_somebody_else_changed_is_not_overwritten(tmp_path: Path) -> None:
    file = tmp_path / "van.toml"
    saved = draft.begin(VAN).save(file)
    file.write_text(VAN + "# another hand\n")
    with pytest.raises(SaveError, match="changed on disk"):
        saved.edit(LONGER).save(file)
    assert file.read_text().endswith("# another hand\n")
    with pytest.raises(SaveError, match="exists already"):
        draft.begin(LONGER).save(file)
    with pytest.raises(SaveError, match="no folder"):
        saved.save(tmp_path / "none" / "van.toml")


def test_a_faulty_draft_can_be_saved_and_opened_again(tmp_path: Path) -> None:
    file = tmp_path / "van.toml"
    draft.begin(VAN).edit(FAULTY).save(file)
    opened = draft.open_file(file)
    assert opened.text == FAULTY
    assert opened.faults
    assert opened.results is None
    with pytest.raises(PlanError, match="no such file"):
        draft.open_file(tmp_path / "vam.toml")


def test_a_rulebook_of_ones_own_is_found_beside_the_file(tmp_path: Path) -> None:
    text = apply(VAN, [Set("plan", None, ("rulebook",), "mine.toml")])
    (tmp_path / "mine.toml").write_text('starts_from = "leisure-vehicle-eu"\n')
    assert draft.begin(text).faults
    saved = draft.begin(text).save(tmp_path / "van.toml")
    assert saved.faults == ()
    assert saved.results is not None
    assert saved.results.rulebook.name == "mine"
