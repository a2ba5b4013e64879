"""How the parts lie on each other: app on core on data, light where it can be, each check true to its own rules."""

import ast
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

from farvolt import checks, examples, planfile
from farvolt.study import build_context, load

ROOT = Path(__file__).parent.parent
PACKAGES = {"farvolt_app": ROOT / "app", "farvolt": ROOT / "core", "farvolt_data": ROOT / "data"}
"""Package to its source root, upper layers first."""

HEAVY = {"scipy", "pandas", "openpyxl", "streamlit", "altair", "tomlkit", "pyarrow", "pvlib"}
OF_THE_APP = {"streamlit", "click", "rich", "openpyxl", "pandas", "altair", "tomlkit"}


def modules(package: str) -> list[Path]:
    return sorted((PACKAGES[package] / package).rglob("*.py"))


def tree(path: Path) -> ast.Module:
    return ast.parse(path.read_text(encoding="utf-8"))


def imported(node: ast.AST) -> Iterator[str]:
    """Dotted names of what is imported anywhere under a node."""
    for one in ast.walk(node):
        if isinstance(one, ast.Import):
            yield from (alias.name for alias in one.names)
        elif isinstance(one, ast.ImportFrom) and one.module:
            assert one.level == 0, "imports are absolute"
            yield one.module
            yield from (f"{one.module}.{alias.name}" for alias in one.names)


def tops(node: ast.AST) -> set[str]:
    return {name.split(".")[0] for name in imported(node)}


def at_import(module: ast.Module) -> ast.Module:
    """What runs when a module is imported: without functions, and without what only the type checker reads."""

    class Outer(ast.NodeTransformer):
        def visit_FunctionDef(self, node: ast.FunctionDef) -> None:
            return None

        def visit_If(self, node: ast.If) -> ast.AST | None:
            return None if ast.unparse(node.test) == "TYPE_CHECKING" else self.generic_visit(node)

    Outer().visit(module)
    return module


def python(code: str) -> str:
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False, timeout=120)
    assert done.returncode == 0, done.stderr
    return done.stdout


def test_there_are_modules_to_look_at() -> None:
    assert all(len(modules(package)) > (0 if package == "farvolt_data" else 10) for package in PACKAGES)


@pytest.mark.parametrize("package", PACKAGES)
def test_imports_point_one_way(package: str) -> None:
    layers = list(PACKAGES)
    above = set(layers[: layers.index(package)])
    for path in modules(package):
        assert not tops(tree(path)) & above, path


def test_core_imports_nothing_of_the_app_s() -> None:
    for path in modules("farvolt"):
        assert not tops(tree(path)) & OF_THE_APP, path


def test_data_imports_nothing_but_the_standard_library() -> None:
    for path in modules("farvolt_data"):
        assert tops(tree(path)) <= sys.stdlib_module_names, path


def test_heavy_libraries_are_imported_by_the_functions_that_use_them() -> None:
    light = [*modules("farvolt"), PACKAGES["farvolt_app"] / "farvolt_app" / "cli.py"]
    for path in light:
        assert not tops(at_import(tree(path))) & HEAVY, path


def test_a_plan_knows_nothing_of_solving() -> None:
    later = {"network", "solve", "solution", "operating", "context", "checks", "study", "results", "rulebook"}
    loaded = python("import sys, farvolt.planfile; print(*(n for n in sys.modules if n.startswith('farvolt')))").split()
    assert not {name.removeprefix("farvolt.") for name in loaded} & later


def test_core_never_prints() -> None:
    for path in modules("farvolt"):
        for node in ast.walk(tree(path)):
            text = ast.unparse(node) if isinstance(node, ast.Attribute | ast.Name) else ""
            assert text not in ("print", "sys.stdout", "sys.stderr", "logging", "warnings"), f"{path}: {text}"


def test_core_works_without_the_app_s_libraries() -> None:
    """A small plan is read, solved and checked with every library of the app, and scipy, out of reach."""
    blocked = sorted(OF_THE_APP | HEAVY)
    python(
        f"import sys\nfor name in {blocked!r}:\n    sys.modules[name] = None\n"
        "from farvolt import examples, planfile\n"
        "from farvolt.output import as_object\n"
        "from farvolt.study import study\n"
        "found = as_object(study(planfile.parse(examples.starter_text())))\n"
        "assert all(case['solved'] for case in found['cases'])\n"
    )


@pytest.mark.parametrize("arguments", [["check"], ["check", "--json"]])
def test_a_check_of_a_small_plan_loads_nothing_heavy(tmp_path: Path, arguments: list[str]) -> None:
    path = tmp_path / "plan.toml"
    path.write_text(examples.starter_text())
    loaded = python(
        "import contextlib, io, sys\nfrom farvolt_app.cli import main\n"
        "out = io.TextIOWrapper(io.BytesIO())\n"
        "with contextlib.redirect_stdout(out), contextlib.suppress(SystemExit):\n"
        f"    main({[*arguments, str(path)]!r})\n"
        "print(*sorted({name.split('.')[0] for name in sys.modules}))"
    ).split()
    assert "farvolt" in loaded
    assert not HEAVY & set(loaded)


def test_help_loads_no_core_but_its_errors() -> None:
    loaded = python(
        "import contextlib, io, sys\nfrom farvolt_app.cli import main\n"
        "with contextlib.redirect_stdout(io.StringIO()), contextlib.suppress(SystemExit):\n    main(['--help'])\n"
        "print(*sys.modules)"
    ).split()
    assert not {"numpy", "pydantic", "rich", "farvolt.plan"} & set(loaded)


def public(node: ast.AST, prefix: str) -> Iterator[tuple[str, ast.AST]]:
    """Every public class, function and method under a node, by name."""
    for one in getattr(node, "body", ()):
        if isinstance(one, ast.FunctionDef | ast.ClassDef) and not one.name.startswith("_"):
            yield f"{prefix}.{one.name}", one
            if isinstance(one, ast.ClassDef):
                yield from public(one, f"{prefix}.{one.name}")


@pytest.mark.parametrize("package", PACKAGES)
def test_every_public_name_has_a_docstring(package: str) -> None:
    for path in modules(package):
        module = tree(path)
        named = [(path.stem, module), *public(module, path.stem)]
        without = [
            name
            for name, one in named
            if isinstance(one, ast.Module | ast.ClassDef | ast.FunctionDef) and not ast.get_docstring(one)
        ]
        assert without == [], path


BAD = """\
format = 1
[plan]
name = "All kinds of trouble"
nominal = "12 V"
rulebook = "RULEBOOK"
[zones.engine]
ambient = "70 degC"
engine_space = true
[[sources]]
name = "bank"
kind = "battery"
at = "bank"
chemistry = "agm"
capacity = "100 Ah"
[[sources]]
name = "mains"
kind = "charger"
at = "bus"
volts = "16 V"
amps = "60 A"
[[runs]]
name = "main"
from = "bank"
to = "bus"
length = "4 m"
size = "1 mm2"
insulation = "70 degC"
zone = "engine"
[[runs]]
name = "twin"
from = "bank"
to = "bus"
length = "9 m"
material = "aluminium"
size = "4 mm2"
protection = { type = "blade", rating = "200 A", distance = "3 m" }
[[runs]]
name = "long"
from = "bus"
to = "winch"
length = "20 m"
size = "2.5 mm2"
return = "chassis"
protection = { type = "blade", rating = "1 A" }
[[runs]]
name = "open"
from = "bus"
to = "lamp"
length = "3 m"
carries = "feed"
[[loads]]
name = "winch"
at = "winch"
power = "400 W"
min_volts = "12.5 V"
max_volts = "13 V"
[[loads]]
name = "lamp"
at = "lamp"
power = "5 W"
max_protection = "2 A"
[[loads]]
name = "stray"
at = "nowhere"
power = "5 W"
[[cases]]
name = "Resting"
sources = { "mains" = "off", "bank" = { charge = "20 %" } }
[[cases]]
name = "Charging"
loads = { "lamp" = 1.0 }
sources = { "bank" = "full" }
"""

PLANS = {
    "starter": examples.starter_text(),
    "every field": (Path(__file__).parent / "plans" / "every_field.toml").read_text(),
    **{name: examples.text(name) for name in examples.names()},
    **{name: BAD.replace("RULEBOOK", name) for name in ("small-craft-us", "small-craft-iso", "cabin-nec", "cabin-iec")},
    **{name: BAD.replace("RULEBOOK", name) for name in ("leisure-vehicle-us", "leisure-vehicle-eu")},
}


@pytest.mark.parametrize("name", PLANS)
def test_each_check_tells_only_of_the_rules_it_registered(name: str) -> None:
    read = planfile.parse(PLANS[name])
    context = build_context(read, load(read.plan.rulebook))
    told = {one.title: {finding.rule for finding in one.run(context)} - set(one.rules) for one in checks.checks()}
    assert {title: rules for title, rules in told.items() if rules} == {}


def test_rules_have_one_form_and_every_check_a_title() -> None:
    registered = checks.checks()
    assert len(registered) > 10
    for one in registered:
        assert one.title
        assert one.rules
        assert all(rule.count(".") == 1 and rule == rule.lower() for rule in one.rules)
