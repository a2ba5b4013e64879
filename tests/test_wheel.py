"""The wheel: everything it needs, nothing else, and it works where only the wheel is."""

import json
import os
import subprocess
import sys
import zipfile
from pathlib import Path

import pytest

pytest.importorskip("hatchling", reason="the wheel is built with hatchling")

ROOT = Path(__file__).parent.parent
SOURCES = {"farvolt": ROOT / "core", "farvolt_app": ROOT / "app", "farvolt_data": ROOT / "data"}


def succeed(*command: str | Path, **options: object) -> str:
    done = subprocess.run(
        [str(one) for one in command],
        capture_output=True,
        text=True,
        check=False,
        timeout=300,
        **options,  # type: ignore[call-overload]
    )
    assert done.returncode == 0, done.stderr
    return str(done.stdout)


@pytest.fixture(scope="module")
def wheel(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The wheel, built from this tree without fetching anything."""
    folder = tmp_path_factory.mktemp("wheel")
    quiet = ("--no-deps", "--no-build-isolation", "--no-index", "--disable-pip-version-check")
    succeed(sys.executable, "-m", "pip", "wheel", ROOT, *quiet, "--wheel-dir", folder)
    (built,) = folder.glob("*.whl")
    return built


@pytest.fixture(scope="module")
def installed(wheel: Path, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder that holds nothing but the installed wheel."""
    folder = tmp_path_factory.mktemp("installed")
    quiet = ("--no-deps", "--no-index", "--no-compile", "--disable-pip-version-check")
    succeed(sys.executable, "-m", "pip", "install", *quiet, "--target", folder, wheel)
    return folder


def expected() -> set[str]:
    """Every file of the three packages, as git would have it: no caches."""
    return {
        path.relative_to(root).as_posix()
        for package, root in SOURCES.items()
        for path in (root / package).rglob("*")
        if path.is_file() and "__pycache__" not in path.parts and not path.name.startswith(".")
    }


def test_the_wheel_holds_every_file_of_the_packages_and_no_other(wheel: Path) -> None:
    names = set(zipfile.ZipFile(wheel).namelist())
    packed = {name for name in names if ".dist-info/" not in name}
    assert packed == expected()
    for package in SOURCES:
        assert f"{package}/py.typed" in packed
    for suffix in (".csv", ".toml", ".py"):
        assert any(name.startswith("farvolt_data/") and name.endswith(suffix) for name in packed)
    for folder in ("batteries", "conductors", "examples", "protection", "rulebooks", "rulebooks/tables"):
        assert any(name.startswith(f"farvolt_data/{folder}/") for name in packed)
    assert not [name for name in names if "test" in name.lower()]


def test_the_wheel_says_what_it_needs(wheel: Path) -> None:
    archive = zipfile.ZipFile(wheel)
    (metadata,) = (name for name in archive.namelist() if name.endswith("METADATA"))
    text = archive.read(metadata).decode()
    needed = {line.split(": ")[1].split(">")[0] for line in text.splitlines() if line.startswith("Requires-Dist: ")}
    assert {"click", "numpy", "pydantic", "rich", "scipy", "tomlkit"} <= needed
    (entries,) = (name for name in archive.namelist() if name.endswith("entry_points.txt"))
    assert "farvolt = farvolt_app.cli:main" in archive.read(entries).decode()


def farvolt(installed: Path, folder: Path, *arguments: str) -> str:
    """The installed program, run where no source of it is in reach."""
    code = (
        "import sys\n"
        f"installed, sources = {str(installed)!r}, {[str(root) for root in SOURCES.values()]!r}\n"
        # What makes the development tree importable must not stand in for the wheel.
        "sys.meta_path = [one for one in sys.meta_path if 'editable' not in repr(one).lower()]\n"
        "sys.path = [installed, *(one for one in sys.path if one not in sources)]\n"
        "import farvolt, farvolt_app, farvolt_data\n"
        "for package in (farvolt, farvolt_app, farvolt_data):\n"
        "    assert package.__file__.startswith(installed), package.__file__\n"
        "from farvolt_app.cli import main\n"
        f"main({list(arguments)!r}, prog_name='farvolt')\n"
    )
    environment = {name: value for name, value in os.environ.items() if name != "PYTHONPATH"}
    return succeed(sys.executable, "-c", code, cwd=folder, env=environment)


def test_the_installed_program_works_from_any_folder(installed: Path, tmp_path: Path) -> None:
    farvolt(installed, tmp_path, "new", "plan.toml")
    found = json.loads(farvolt(installed, tmp_path, "check", "plan.toml", "--json"))
    assert all(case["solved"] for case in found["cases"])
    assert "instrument-repair-van" in farvolt(installed, tmp_path, "examples")
    assert json.loads(farvolt(installed, tmp_path, "schema"))["title"].startswith("Farvolt plan")
    farvolt(installed, tmp_path, "schedule", "plan.toml", "--output", "cables.xlsx")
    assert (tmp_path / "cables.xlsx").read_bytes().startswith(b"PK")


def test_the_installed_command_runs(installed: Path, tmp_path: Path) -> None:
    script = installed / "bin" / "farvolt"
    if not script.exists():
        pytest.skip("the command is installed elsewhere on this system")
    environment = {**os.environ, "PYTHONPATH": str(installed)}
    assert "farvolt, version " in succeed(script, "--version", cwd=tmp_path, env=environment)
