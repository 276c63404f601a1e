"""The house: which room may look into which, what importing costs, and what every public name
tells."""

from __future__ import annotations

import ast
import importlib
import inspect
import pkgutil
import subprocess
import sys
from pathlib import Path

import pytest

import pvcard

ROOT = Path(pvcard.__file__).parent
# Lowest first. A module may import those of its own level or below.
LEVELS = [
    {"types", "errors", "progress"},
    {"quantities", "unit_tables"},
    {"unit_display", "units", "uncertainty", "kinematics", "flow", "heat"},
    {
        "gas",
        "gas_charts",
        "gas_components",
        "gas_coolprop",
        "gas_data",
        "gas_exponent",
        "gas_fit",
        "gas_gerg",
        "gas_gibbs",
        "gas_models",
        "gas_stability",
        "gas_table",
        "gas_transport",
        "gas_water",
    },
    {
        "machine",
        "machine_checks",
        "machine_document",
        "machine_keys",
        "machine_parts",
        "machine_reader",
        "machine_settings",
        "machine_values",
    },
    {"ingest"},
    {"card_set"},
    {"windows"},
    {"trace_noise", "closed_lines"},
    {"line_fit"},
    {"events", "repair"},
    {"card", "cycle"},
    {"results"},
    {"findings"},
    {"analysis"},
    {"tables"},
    {"report"},
    {"simulate", "simulate_export", "simulate_plant", "simulate_sensor", "simulate_truth"},
    {"cli", "__main__"},
]
LEVEL = {name: number for number, names in enumerate(LEVELS) for name in names}
# Noise is told with the clearance from which the fit of the closed lines starts.
SAME_LEVEL_ONLY = {("trace_noise", "closed_lines")}
TABLES_AND_PLOTS = {"pandas", "matplotlib"}
COMPUTING = {name for names in LEVELS[1:15] for name in names} - {"ingest"}


def room(path: Path) -> str:
    """First part of a module's name below the package."""
    return path.relative_to(ROOT).parts[0].removesuffix(".py")


def imports(path: Path) -> set[str]:
    """Names of all modules that a file imports, wherever in it."""
    found = set()
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            found |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom):
            assert not node.level, f"{path}: imports say the whole name"
            found.add(str(node.module))
            if node.module == "pvcard":  # a room, unless it is one of the public names
                found |= {f"pvcard.{alias.name}" for alias in node.names if alias.name in LEVEL}
    return found


FILES = sorted(path for path in ROOT.rglob("*.py") if path != ROOT / "__init__.py")


@pytest.mark.parametrize("path", FILES, ids=lambda path: str(path.relative_to(ROOT)))
def test_arrows_point_down(path: Path) -> None:
    # LAW: the order of rooms in DEVELOPERS.md.
    own = room(path)
    for name in imports(path):
        parts = name.split(".")
        if parts[0] == "pvcard" and len(parts) > 1:
            assert LEVEL[parts[1]] <= LEVEL[own], f"{own} looks up into {parts[1]}"
        if own in COMPUTING:
            assert parts[0] not in TABLES_AND_PLOTS, f"{own} imports {parts[0]}"


def test_nothing_but_the_command_line_looks_at_the_simulator() -> None:
    # LAW: the simulator must not leak into what it is used to judge.
    outside = [path for path in FILES if not room(path).startswith(("simulate", "cli", "cycle"))]
    for path in outside:
        assert not any(
            name.startswith(("pvcard.simulate", "pvcard.cycle")) for name in imports(path)
        )


def test_importing_the_package_loads_nothing_heavy() -> None:
    # LAW: plots, tables and a second equation of state are loaded only when they are needed.
    code = (
        "import sys, pvcard, pvcard.analysis, pvcard.ingest, pvcard.machine\n"
        "heavy = ('matplotlib', 'pandas', 'CoolProp', 'h5py', 'pint')\n"
        "print([name for name in heavy if name in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


def test_help_does_not_load_numpy() -> None:
    # LAW: the help answers before anything is computed.
    code = (
        "import sys\nfrom pvcard.cli import main\n"
        "try:\n    main(['--help'])\nexcept SystemExit:\n    pass\n"
        "print('numpy' in sys.modules)"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip().endswith("False")


MODULES = [
    name
    for _, name, package in pkgutil.walk_packages([str(ROOT)], "pvcard.")
    if not package and not name.endswith("__main__")
]


@pytest.mark.parametrize("name", MODULES)
def test_public_functions_say_what_they_take_and_give(name: str) -> None:
    # LAW: style of the house: arguments with shape and unit in a numpydoc section; a helper of one
    # or
    # two arguments may say them in a sentence.
    module = importlib.import_module(name)
    for own, function in inspect.getmembers(module, inspect.isfunction):
        if own.startswith("_") or function.__module__ != name:
            continue
        text = inspect.getdoc(function) or ""
        assert text, f"{name}.{own} has no docstring"
        taken = [p for p in inspect.signature(function).parameters if not p.startswith("_")]
        if len(taken) > 2 and name.split(".")[1] in COMPUTING | {"analysis", "report", "tables"}:
            assert "Parameters\n---" in text, f"{name}.{own} does not list its parameters"
            listed = text.split("Parameters\n---")[1]
            missing = [one for one in taken if one not in listed]
            assert not missing, f"{name}.{own} says nothing of {missing}"


def calls(path: Path) -> set[str]:
    """Dotted names of everything that a file calls."""
    return {
        ast.unparse(node.func)
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8")))
        if isinstance(node, ast.Call)
    }


@pytest.mark.parametrize("path", FILES, ids=lambda path: str(path.relative_to(ROOT)))
def test_rooms_neither_print_nor_draw_chance_nor_show(path: Path) -> None:
    # LAW: style of the house: only the command line prints; chance comes through a generator;
    # figures are drawn on axes that are handed in.
    found = calls(path)
    if room(path) not in ("cli", "__main__", "progress") and room(path) != "simulate_plant":
        assert "print" not in found
    assert not {name for name in found if name.startswith(("np.random.", "numpy.random."))} - {
        "np.random.default_rng",
        "np.random.SeedSequence",
    }
    assert not any("pyplot" in name for name in imports(path))


def test_every_module_has_its_place() -> None:
    # LAW: a room that no level names would be looked into from anywhere.
    assert {room(path) for path in FILES} == set(LEVEL)


def test_fence_sees_every_way_to_import(tmp_path: Path) -> None:
    # LAW: the test of the imports has to notice what it forbids.
    path = tmp_path / "room.py"
    for text in (
        "import pvcard.analysis\n",
        "from pvcard import analysis\n",
        "from pvcard.analysis import analyse\n",
        "def later():\n    from pvcard.analysis.front import analyse\n",
    ):
        path.write_text(text, encoding="utf-8")
        found = imports(path)
        assert any(name.startswith("pvcard.analysis") for name in found), text
    path.write_text("from . import analysis\n", encoding="utf-8")
    with pytest.raises(AssertionError, match="whole name"):
        imports(path)


def test_public_front_is_what_it_says() -> None:
    # LAW: everything promised can be had, nothing else is promised.
    for name in pvcard.__all__:
        assert getattr(pvcard, name) is not None
    with pytest.raises(AttributeError, match="no attribute 'Pump'"):
        pvcard.Pump  # noqa: B018


def test_modules_stay_readable() -> None:
    # LAW: past 600 lines there is a second subject in a module.
    long = {
        str(path.relative_to(ROOT)): count
        for path in FILES
        if (count := len(path.read_text(encoding="utf-8").splitlines())) > 600
    }
    assert not long
