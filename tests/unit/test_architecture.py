"""Rules of the house that no other check holds."""

import importlib
import inspect
import pkgutil
import subprocess
import sys
from pathlib import Path

import pytest

import foresaid
from foresaid import score

ROOT = Path(foresaid.__file__).parent
MODULES = sorted(ROOT.rglob("*.py"))
FORBIDDEN_NAMES = {"utils", "util", "common", "helpers", "helper", "misc"}
HEAVY = ("numpy", "pandas", "scipy", "sqlite_utils", "sqlite3", "matplotlib")
LONGEST = 400


@pytest.mark.parametrize("path", MODULES, ids=lambda p: str(p.relative_to(ROOT)))
def test_modules_are_short_and_have_a_name_and_a_docstring(path):
    text = path.read_text("utf-8")
    assert len(text.splitlines()) <= LONGEST
    assert path.stem not in FORBIDDEN_NAMES
    assert not FORBIDDEN_NAMES & set(path.relative_to(ROOT).parts)
    assert text.startswith('"""')


def score_functions():
    found = []
    for info in pkgutil.iter_modules(score.__path__):
        module = importlib.import_module(f"foresaid.score.{info.name}")
        found += [
            (f"{info.name}.{name}", one)
            for name, one in inspect.getmembers(module, inspect.isfunction)
            if one.__module__ == module.__name__ and not name.startswith("_")
        ]
    return found


# what takes nothing has nothing to refuse
STATISTICS = [
    (name, one) for name, one in score_functions() if inspect.signature(one).parameters
]


@pytest.mark.parametrize(("name", "function"), STATISTICS, ids=[n for n, _ in STATISTICS])
@pytest.mark.parametrize(
    "section", ["Parameters", "Returns", "Raises", "References", "Examples"]
)
def test_every_statistic_says_what_it_refuses_where_it_is_from_and_how_it_is_used(
    name, function, section
):
    lines = inspect.getdoc(function).splitlines()
    assert section in lines, name
    assert set(lines[lines.index(section) + 1]) == {"-"}


def test_statistics_are_found():
    names = {name for name, _ in STATISTICS}
    assert {"proportions.wilson_interval", "overlap.disjoint_windows"} <= names


def test_the_command_tree_loads_nothing_heavy():
    code = (
        "import sys, foresaid.cli.main\n"
        f"print(*sorted(name for name in {HEAVY!r} if name in sys.modules))"
    )
    found = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=True, timeout=60
    )
    assert found.stdout.split() == []


def commands():
    from foresaid.cli.main import app

    groups, found = [app], []
    while groups:
        group = groups.pop()
        groups += [one.typer_instance for one in group.registered_groups]
        found += [one.callback for one in group.registered_commands]
    return found


@pytest.mark.parametrize("command", commands(), ids=lambda c: c.__name__)
def test_every_command_has_an_example(command):
    doc = inspect.getdoc(command)
    example = next(
        line for line in doc.splitlines() if line.startswith(("Example:", "Examples:"))
    )
    assert "foresaid " in doc[doc.index(example) :]


def test_there_are_commands():
    assert {"settle", "score", "trace"} <= {one.__name__ for one in commands()}
