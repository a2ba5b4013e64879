"""Saving a plan file: whole or not at all, the previous version kept, nobody else's change overwritten."""

import codecs
import os
import sys
from pathlib import Path

import pytest

from farvolt import planfile
from farvolt.errors import SaveError
from plan_text import BASE


def test_saving_writes_what_was_given_and_keeps_the_previous_version(tmp_path: Path) -> None:
    path = tmp_path / "plan.toml"
    planfile.save(path, BASE, expected=None)
    changed = BASE + "# a remark\n"
    planfile.save(path, changed, expected=planfile.stamp(BASE))
    assert path.read_text() == changed
    assert (tmp_path / "plan.toml.previous").read_text() == BASE
    assert sorted(one.name for one in tmp_path.iterdir()) == ["plan.toml", "plan.toml.previous"]


def test_saving_never_overwrites_what_it_has_not_read(tmp_path: Path) -> None:
    path = tmp_path / "plan.toml"
    path.write_text("not ours")
    with pytest.raises(SaveError, match="exists already"):
        planfile.save(path, BASE, expected=None)
    with pytest.raises(SaveError, match="changed on disk"):
        planfile.save(path, BASE, expected=planfile.stamp(BASE))
    path.write_bytes(b"\xff\x00")
    with pytest.raises(SaveError, match="changed on disk"):
        planfile.save(path, BASE, expected=planfile.stamp(BASE))
    assert path.read_bytes() == b"\xff\x00"
    assert [one.name for one in tmp_path.iterdir()] == ["plan.toml"]


@pytest.mark.parametrize("data", [BASE.replace("\n", "\r\n").encode(), codecs.BOM_UTF8 + BASE.encode()])
def test_a_file_from_another_system_is_not_taken_for_a_changed_one(tmp_path: Path, data: bytes) -> None:
    path = tmp_path / "plan.toml"
    path.write_bytes(data)
    text = planfile.read(path).text
    planfile.save(path, text + "# more\n", expected=planfile.stamp(text))
    assert path.read_bytes().endswith(b"# more\n")
    assert (tmp_path / "plan.toml.previous").read_bytes() == data


def test_saving_follows_a_link(tmp_path: Path) -> None:
    (tmp_path / "real.toml").write_text(BASE)
    (tmp_path / "link.toml").symlink_to("real.toml")
    planfile.save(tmp_path / "link.toml", BASE + "#\n", expected=planfile.stamp(BASE))
    assert (tmp_path / "link.toml").is_symlink()
    assert (tmp_path / "real.toml").read_text() == BASE + "#\n"


def test_a_file_that_cannot_be_written_is_left_alone(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "plan.toml"
    path.write_text(BASE)

    def full(descriptor: int) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, "fsync", full)
    with pytest.raises(SaveError, match="No space left on device"):
        planfile.save(path, BASE + "#\n", expected=planfile.stamp(BASE))
    assert path.read_text() == BASE
    assert [one.name for one in tmp_path.iterdir()] == ["plan.toml"]
    with pytest.raises(SaveError, match="cannot be written"):
        planfile.save(tmp_path / "none" / "plan.toml", BASE, expected=None)


@pytest.mark.skipif(sys.platform == "win32", reason="file modes of POSIX")
def test_saving_keeps_the_file_s_mode(tmp_path: Path) -> None:
    path = tmp_path / "plan.toml"
    path.write_text(BASE)
    path.chmod(0o640)
    planfile.save(path, BASE + "#\n", expected=planfile.stamp(BASE))
    assert path.stat().st_mode & 0o777 == 0o640
