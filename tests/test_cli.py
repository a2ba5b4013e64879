"""The command line: what it prints, where, and how it ends. Text of a plan stays text on a terminal."""

import codecs
import json
import os
import subprocess
import sys
import tomllib
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import click
import jsonschema
import pytest
from click.testing import CliRunner, Result

from farvolt import examples, planfile
from farvolt.schema import json_schema
from farvolt_app import server
from farvolt_app.cli import main
from farvolt_app.shown import CAUTION

VAN = "instrument-repair-van"

SOUND = """\
format = 1
[plan]
name = "Lamp"
nominal = "12 V"
[[sources]]
name = "bank"
kind = "battery"
at = "bank"
emf = "12.8 V"
resistance = "15 mohm"
[[runs]]
name = "feed"
from = "bank"
to = "lamp"
length = "15 ft"
size = "2.5 mm2"
protection = { type = "blade", rating = "10 A", distance = "0.1 m" }
[[loads]]
name = "lamp"
at = "lamp"
power = "10 W"
min_volts = "10 V"
max_volts = "15 V"
[[cases]]
name = "Night"
[[cases]]
name = "Day"
loads = "none"
"""

FAILING = SOUND.replace('power = "10 W"', 'power = "300 W"')


def run(*arguments: str | Path, text: str | None = None) -> Result:
    """One command in this process."""
    return CliRunner().invoke(main, [str(one) for one in arguments], input=text)


def process(*arguments: str | Path, **options: Any) -> subprocess.CompletedProcess[bytes]:
    """One command in a process of its own."""
    code = "from farvolt_app.cli import main; main(prog_name='farvolt')"
    command = [sys.executable, "-c", code, *map(str, arguments)]
    settings: dict[str, Any] = {"capture_output": True, "timeout": 120, **options}
    return subprocess.run(command, check=False, **settings)


@pytest.fixture
def plan(tmp_path: Path) -> Path:
    path = tmp_path / "lamp.toml"
    path.write_text(SOUND)
    return path


def refused(result: Result) -> list[str]:
    """The lines of a refusal: exit code 2, nothing on standard output, no traceback."""
    assert result.exit_code == 2, result.output
    assert result.stdout == ""
    assert isinstance(result.exception, SystemExit)
    assert "Traceback" not in result.stderr
    return result.stderr.splitlines()


# check -----------------------------------------------------------------------------------------------------------


def test_check_ends_with_0_where_nothing_fails(plan: Path) -> None:
    result = run("check", plan)
    assert (result.exit_code, result.stderr) == (0, "")
    for shown in ("Lamp", "Night", "Day", "15 ft (4.57 m)", "2.5 mm2", "0 failing", "check local codes"):
        assert shown in result.stdout


def test_check_ends_with_1_where_something_fails(plan: Path) -> None:
    plan.write_text(FAILING)
    result = run("check", plan)
    assert (result.exit_code, result.stderr) == (1, "")
    assert "FAIL protection.under-load" in result.stdout or "FAIL conductor.ampacity" in result.stdout


@pytest.mark.parametrize("text", [SOUND, FAILING])
def test_json_is_one_object_that_agrees_with_the_exit_code(plan: Path, text: str) -> None:
    plan.write_text(text)
    result = run("check", plan, "--json")
    found = json.loads(result.stdout)
    failing = any(finding["severity"] == "fail" for finding in found["findings"])
    assert (result.exit_code, result.stderr) == (int(failing), "")
    assert result.stdout.count("\n") == 1
    assert (found["output"], found["plan"]) == (1, "Lamp")


def test_check_reads_standard_input(plan: Path) -> None:
    from_file, from_input = run("check", plan, "--json"), run("check", "-", "--json", text=SOUND)
    assert from_input.exit_code == 0
    assert from_input.stdout == from_file.stdout


def test_one_case_shows_all_its_numbers(plan: Path) -> None:
    result = run("check", plan, "--case", "Night")
    assert result.exit_code == 0
    for heading in ("Points", "Sources", "Runs", "Loads", "feed V", "return V", "loss W", "drop %"):
        assert heading in result.stdout


def test_an_unknown_case_is_told_before_anything_is_printed(plan: Path) -> None:
    assert refused(run("check", plan, "--case", "Nigt")) == [
        'there is no case "Nigt"; accepted: "Night", "Day"; did you mean "Night"?'
    ]


def test_working_shows_formula_and_numbers(plan: Path) -> None:
    plan.write_text(FAILING)
    plain, working = run("check", plan), run("check", plan, "--working")
    assert working.exit_code == plain.exit_code == 1
    assert len(working.stdout.splitlines()) > len(plain.stdout.splitlines())


@pytest.mark.parametrize("options", [["--case", "Night"], ["--working"]])
def test_options_that_do_not_go_together_are_refused(plan: Path, options: list[str]) -> None:
    assert "--json prints all cases" in refused(run("check", plan, "--json", *options))[-1]


@pytest.mark.parametrize("as_json", [[], ["--json"]])
@pytest.mark.parametrize(
    ("text", "lines"),
    [
        ("", ["the file is empty"]),
        ("format = 9\n", ["line 1: format: this file is of a later format"]),
        (SOUND.replace("15 ft", "-15 ft"), ['line 15: runs "feed", length: must be more than zero (given: "-15 ft")']),
        (SOUND.replace('at = "bank"', 'att = "bank"'), ["line 5: ", "line 8: "]),
        (
            SOUND.replace('nominal = "12 V"', 'nominal = "12 V"\nrulebook = "craft"'),
            ["line 5: plan, rulebook: no rulebook"],
        ),
        (
            SOUND.replace('power = "10 W"', 'power = "10 W"\nclass = "x"'),
            ['line 22: loads "lamp", class: the rulebook'],
        ),
    ],
)
def test_bad_input_is_told_by_place_with_exit_code_2(
    plan: Path, text: str, lines: list[str], as_json: list[str]
) -> None:
    plan.write_text(text)
    told = refused(run("check", plan, *as_json))
    assert len(told) == len(lines)
    for found, expected in zip(told, lines, strict=True):
        assert found.startswith(f"{plan}: {expected}")
    assert [line.replace(str(plan), "standard input") for line in told] == refused(
        run("check", "-", *as_json, text=text)
    )


@pytest.mark.parametrize("command", [["check"], ["schedule", "--output", "cables.csv"], ["open", "--no-browser"]])
def test_files_that_cannot_be_read_are_told(tmp_path: Path, command: list[str]) -> None:
    (tmp_path / "binary.toml").write_bytes(b"\x00\x01\xff")
    (tmp_path / "latin.toml").write_bytes(SOUND.replace("Lamp", "Lämp").encode("latin-1"))
    for path, problem in (
        (tmp_path / "none.toml", "there is no such file"),
        (tmp_path, "this is a folder"),
        (tmp_path / "binary.toml", "this is a binary file"),
        (tmp_path / "latin.toml", "line 3: the text is not UTF-8"),
        (tmp_path / "binary.toml" / "x.toml", "cannot be read"),
    ):
        (line,) = refused(run(*command, path))
        assert line.startswith(f"{path}: {problem}")


def test_a_rulebook_of_one_s_own_is_looked_for_beside_the_plan(plan: Path) -> None:
    plan.write_text(SOUND.replace('nominal = "12 V"', 'nominal = "12 V"\nrulebook = "own.toml"'))
    (line,) = refused(run("check", plan))
    assert line.startswith(f"{plan}: line 5: plan, rulebook: own.toml: ")


# Text of a plan --------------------------------------------------------------------------------------------------

TRICKS = ["[red]stop[/red]", "[link=https://example.org]x[/link]", ":smile:", "[/]", "\\[b]", "{name}", "%s %d", "=1+1"]


@pytest.mark.parametrize("trick", TRICKS)
def test_names_stay_text_in_tables_and_findings(plan: Path, trick: str, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("COLUMNS", "300")  # so that no name is folded
    text = SOUND
    for name in ("Lamp", "bank", "feed", "lamp", "Night"):
        text = text.replace(json.dumps(name), json.dumps(trick if name != "lamp" else f"{trick} 2"))
    plan.write_text(text)
    for arguments in ([], ["--case", trick], ["--working"]):
        result = run("check", plan, *arguments)
        assert result.exit_code in (0, 1)
        assert result.stdout.count(trick) >= 5


@pytest.mark.skipif(sys.platform == "win32", reason="a pseudo-terminal of POSIX")
def test_names_stay_text_on_a_terminal(plan: Path) -> None:
    import pty

    tricks = "[red]stop[/red] :smile: [link=https://example.org]x[/link]"
    plan.write_text(SOUND.replace('name = "Lamp"', f'name = "{tricks}"'))
    control, terminal = pty.openpty()
    done = process("check", plan, capture_output=False, stdout=terminal, stderr=terminal, stdin=terminal)
    os.close(terminal)
    shown = b"".join(read_all(control)).decode()
    assert done.returncode == 0
    assert tricks in shown
    assert "\x1b]8" not in shown  # the escape that makes a link


def read_all(descriptor: int) -> Iterator[bytes]:
    try:
        while data := os.read(descriptor, 65536):
            yield data
    except OSError:  # the terminal's other end is closed
        return


def test_escapes_of_a_file_or_its_path_never_reach_the_terminal(tmp_path: Path) -> None:
    path = tmp_path / "red\x1b[31m.toml"
    path.write_text(SOUND.replace('name = "lamp"', 'name = "la\\u001b[31mmp"\n"\\u001b]0;x\\u0007" = 1'))
    told = refused(run("check", path))
    assert len(told) == 2
    assert all(line.isprintable() for line in told)
    (line,) = refused(run("examples", "a\x1b[31m"))
    assert line.isprintable()


# Output that goes elsewhere --------------------------------------------------------------------------------------


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="needs the device that is always full")
@pytest.mark.parametrize("command", [["check", "PLAN"], ["check", "PLAN", "--json"], ["schema"], ["new", "-"]])
def test_a_full_disk_is_told(plan: Path, command: list[str]) -> None:
    with Path("/dev/full").open("wb") as full:
        done = process(
            *[plan if one == "PLAN" else one for one in command],
            capture_output=False,
            stdout=full,
            stderr=subprocess.PIPE,
        )
    assert done.returncode == 2
    assert done.stderr == b"The output cannot be written (No space left on device)\n"


@pytest.mark.skipif(sys.platform == "win32", reason="pipes of POSIX")
def test_a_reader_that_goes_away_is_no_fault(plan: Path) -> None:
    reading, writing = os.pipe()
    os.close(reading)
    done = process("schema", capture_output=False, stdout=writing, stderr=subprocess.PIPE)
    os.close(writing)
    assert (done.returncode, done.stderr) == (0, b"")


@pytest.mark.parametrize("encoding", ["ascii", "cp1252", "utf-8"])
def test_any_encoding_of_the_terminal_will_do(plan: Path, encoding: str) -> None:
    plan.write_text(SOUND.replace('name = "feed"', 'name = "Ωfeed→"'))
    environment = {**os.environ, "PYTHONIOENCODING": encoding, "PYTHONUTF8": "0"}
    shown = process("check", plan, env=environment)
    assert (shown.returncode, shown.stderr) == (0, b"")
    assert b"feed" in shown.stdout
    for_machines = process("check", plan, "--json", env=environment)
    assert json.loads(for_machines.stdout.decode("utf-8"))["cases"][0]["runs"][0]["name"] == "Ωfeed→"
    told = process("check", plan, "--case", "Ω", env=environment)
    assert (told.returncode, told.stdout) == (2, b"")
    assert b"Traceback" not in told.stderr


@pytest.mark.skipif(sys.platform == "win32", reason="closed descriptors of POSIX")
def test_closed_standard_input_is_told() -> None:
    code = (
        "import os; os.close(0); import sys; sys.stdin = None; from farvolt_app.cli import main; main(['check', '-'])"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert (done.returncode, done.stdout) == (2, "")
    assert done.stderr.startswith("standard input: is closed; accepted: ")


def test_ctrl_c_ends_without_a_traceback(plan: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def interrupted(*_: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(planfile, "read", interrupted)
    result = run("check", plan)
    assert (result.exit_code, result.stdout, result.stderr) == (130, "", "Ended.\n")


# new, examples, schema, schedule, open ---------------------------------------------------------------------------


def test_new_writes_a_plan_that_can_be_checked(tmp_path: Path) -> None:
    path = tmp_path / "my plan.toml"
    result = run("new", path)
    assert (result.exit_code, result.stdout) == (0, "")
    assert result.stderr == f"Wrote {path}. Next: farvolt check {path}\n"
    assert path.read_text() == examples.starter_text() == run("new", "-").stdout
    assert run("check", path).exit_code == 0


@pytest.mark.parametrize("command", [["new"], ["examples", VAN, "--output"]])
def test_nothing_is_ever_overwritten(tmp_path: Path, command: list[str]) -> None:
    path = tmp_path / "mine.toml"
    path.write_text("mine")
    for taken in (path, tmp_path):
        (line,) = refused(run(*command, taken))
        assert line.startswith(f"{taken}: it exists already; nothing was written")
    assert path.read_text() == "mine"
    assert [one.name for one in tmp_path.iterdir()] == ["mine.toml"]
    (line,) = refused(run(*command, tmp_path / "no" / "folder.toml"))
    assert "cannot be written (No such file or directory)" in line


def test_examples_are_listed_and_copied(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    listed = run("examples")
    assert listed.exit_code == 0
    assert [line.split()[0] for line in listed.stdout.splitlines()] == list(examples.names())
    copied = run("examples", VAN)
    assert (copied.exit_code, copied.stdout) == (0, "")
    assert Path(f"{VAN}.toml").read_text() == examples.text(VAN) == run("examples", VAN, "--output", "-").stdout
    (line,) = refused(run("examples", "instrument-repair-vna"))
    assert line.endswith(f'did you mean "{VAN}"?')


def test_the_standard_cases_of_a_plan_are_printed_to_be_put_into_it(tmp_path: Path) -> None:
    bare = examples.starter_text()
    path = tmp_path / "plan.toml"
    path.write_text(bare)
    printed = run("cases", str(path)).stdout
    assert planfile.parse(f"{bare}\n{printed}").cases == planfile.parse(bare).checked_cases
    assert printed.startswith('[[cases]]\nname = "Everything on, low charge"\nloads = "all"\n')
    assert 'sources = { battery = { charge = "20 %" } }\n' in printed


def test_schema_is_printed_and_takes_the_starter() -> None:
    result = run("schema")
    assert (result.exit_code, result.stderr) == (0, "")
    printed = json.loads(result.stdout)
    assert printed == json_schema()
    jsonschema.validate(tomllib.loads(examples.starter_text()), printed)


@pytest.mark.parametrize("suffix", [".csv", ".xlsx"])
def test_schedule_is_written_whole_beside_nothing_else(plan: Path, suffix: str) -> None:
    target = plan.with_name(f"cables{suffix}")
    result = run("schedule", plan, "--output", target)
    assert (result.exit_code, result.stdout, result.stderr) == (0, "", f"Wrote {target}. {CAUTION}\n")
    assert target.read_bytes().startswith(b"PK" if suffix == ".xlsx" else codecs.BOM_UTF8)
    assert sorted(one.name for one in plan.parent.iterdir()) == sorted([plan.name, target.name])


def test_schedule_goes_to_standard_output(plan: Path) -> None:
    result = run("schedule", plan, "-o", "-")
    assert (result.exit_code, result.stderr) == (0, "")
    assert len(result.stdout.splitlines()) == 2
    assert "feed,bank,lamp" in result.stdout


def test_schedule_says_what_it_writes(plan: Path) -> None:
    assert '".pdf" is not written; accepted: .xlsx, .csv' in refused(run("schedule", plan, "-o", "cables.pdf"))[-1]
    assert "Missing option '--output'" in refused(run("schedule", plan))[-1]
    itself = plan.rename(plan.with_suffix(".csv"))
    assert "is the plan itself" in refused(run("schedule", itself, "-o", itself))[-1]
    assert itself.read_text() == SOUND
    (line,) = refused(run("schedule", itself, "-o", itself.parent / "none" / "cables.csv"))
    assert "cannot be written (No such file or directory)" in line


def test_open_serves_the_plan_on_this_machine_only(plan: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    asked: list[tuple[Path | None, dict[str, Any]]] = []

    def serve(path: Path | None, **options: Any) -> int:
        asked.append((path, options))
        return 0

    monkeypatch.setattr(server, "serve", serve)
    assert run().exit_code == 0
    assert run("open", plan, "--port", "8600", "--no-browser").exit_code == 0
    assert asked == [
        (None, {"port": None, "address": "127.0.0.1", "open_browser": True}),
        (plan, {"port": 8600, "address": "127.0.0.1", "open_browser": False}),
    ]


# Help ------------------------------------------------------------------------------------------------------------


def test_help_teaches_where_to_start() -> None:
    result = run("--help")
    assert (result.exit_code, result.stderr) == (0, "")
    assert run("-h").stdout == result.stdout
    for part in ("farvolt new my-van.toml", "farvolt check my-van.toml", "Exit codes", "check local codes"):
        assert part in result.stdout
    for name in main.commands:
        assert f"\n  {name} " in result.stdout


@pytest.mark.parametrize("name", sorted(main.commands))
def test_every_command_and_option_has_help(name: str) -> None:
    command = main.commands[name]
    result = run(name, "--help")
    assert result.exit_code == 0
    words = " ".join(result.stdout.split())
    for parameter in command.params:
        if isinstance(parameter, click.Option):
            assert parameter.help, parameter.name
            assert parameter.help.endswith("."), parameter.name
            assert any(one.startswith("--") for one in parameter.opts), parameter.name
        else:
            assert parameter.name
            # The text says what the argument is, beside the line of usage.
            assert words.count(parameter.name.upper()) >= 2, parameter.name


def test_a_slip_in_a_command_or_option_is_told_with_the_nearest(plan: Path) -> None:
    assert "'check'" in refused(run("chek", plan))[-1]
    assert "--json" in refused(run("check", plan, "--jsn"))[-1]
    assert "Missing argument 'PLAN'" in refused(run("check"))[-1]
    assert run("--version").stdout.startswith("farvolt, version ")


def test_a_schedule_that_is_there_already_is_kept(tmp_path: Path) -> None:
    """A workbook may hold somebody's changes: the one before stays beside the new one."""
    plan = examples.path("instrument-repair-van")
    target = tmp_path / "cables.csv"
    target.write_text("mine", encoding="utf-8")
    result = CliRunner().invoke(main, ["schedule", str(plan), "-o", str(target)])
    assert result.exit_code == 0
    assert "check local codes" in result.stderr
    assert (tmp_path / "cables.csv.previous").read_text(encoding="utf-8") == "mine"
    assert "bank gauge lead" in target.read_text(encoding="utf-8-sig")
