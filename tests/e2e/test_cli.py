"""The program as a process: help, environment, pipes, kills and two writers at once."""

import json
import os
import random
import re
import signal
import sqlite3
import subprocess
import sys
import tomllib
from contextlib import closing
from pathlib import Path

import pytest
from typer.main import get_command

from foresaid.cli.main import app
from support.desk import CALL_HEADER, Desk, count, dump, invoke, table_text

ROOT = Path(__file__).parents[2]
COMMANDS = sorted(get_command(app).commands)
PROGRAM = (sys.executable, "-m", "foresaid")
HEAVY = ("pandas", "scipy", "matplotlib", "sqlite_utils", "numpy")


def spawn(*args, **more):
    """Run the program as a process of its own."""
    return subprocess.run(
        [*PROGRAM, *map(str, args)], capture_output=True, text=True, check=False, **more
    )


@pytest.fixture
def desk(tmp_path):
    return Desk(tmp_path)


def big_prices(n_rows, symbols=("ORVA", "NELT")):
    """Return a long price file of many invented sessions, and how many rows it has."""
    lines = ["instrument,session,open,high,low,close,volume"]
    draw = random.Random(5)
    for symbol in symbols:
        price = 100.0
        for number in range(n_rows // len(symbols)):
            price *= 1 + draw.uniform(-0.01, 0.0101)
            year, rest = divmod(number, 336)
            session = f"{1800 + year}-{rest // 28 + 1:02d}-{rest % 28 + 1:02d}"
            lines.append(f"{symbol},{session},,,,{price:.4f},{number}")
    return "\n".join(lines) + "\n"


# ------------------------------------------------------------------------------------- help
def test_commands_are_those_of_the_readme():
    page = (ROOT / "README.md").read_text("utf-8")
    assert set(COMMANDS) >= set(re.findall(r"^    foresaid (\w+)", page, re.MULTILINE))
    assert len(COMMANDS) >= 8


@pytest.mark.parametrize("command", COMMANDS)
def test_every_command_has_help_with_an_example(command):
    text = invoke(command, "--help").stdout
    assert re.search(rf"Example: foresaid {command}( |\n)", text)
    options = text.split("\nOptions:\n", 1)[1]
    assert all(
        re.match(r" {2}-\w, --|  --[a-z-]+( |$)| {3,}\S|\s*$", one)
        for one in options.split("\n")
    )
    assert max(map(len, text.splitlines())) <= 80


@pytest.mark.parametrize("command", COMMANDS)
def test_an_example_names_options_that_there_are(command):
    text = " ".join(invoke(command, "--help").stdout.split())
    example = re.search(r"Example: foresaid (.*?) (?:Arguments|Options):", text)[1]
    for option in re.findall(r"--[a-z-]+", example):
        assert option in text.replace(example, "")


def test_examples_of_the_readme_run(desk):
    """Everything under "Use it", on the demo's own files."""
    page = (ROOT / "README.md").read_text("utf-8")
    block = page.split("## Use it", 1)[1].split("\n\n", 2)[1]
    lines = [line.split()[1:] for line in block.splitlines() if line.strip()]
    assert len(lines) > 8
    refs = {}
    for args in lines:
        if args[0] in ("new", "FORESAID_LEDGER=desk.foresaid"):
            continue
        args = [str(ROOT / "data" / "demo" / a) if a.endswith(".csv") else a for a in args]
        args = ["C0412" if a == "C-0412" else a for a in args]
        if args[0] == "settle":
            args += ["--as-of", "2025-12-31"]
        if args[0] in ("withdraw", "decide"):
            continue
        refs[" ".join(args)] = desk.run(*args)
    assert len(refs) > 8


def test_the_help_screen_of_the_program():
    for args in ((), ("--help",), ("-h",)):
        done = spawn(*args)
        assert done.returncode == (0 if args else 2)
        text = done.stdout + done.stderr
        for command in COMMANDS:
            assert f"\n  {command} " in text
        assert "Exit status: 0 done" in text
        assert "..." not in text.split("\nCommands:\n")[1], "a summary is cut"


def test_help_loads_nothing_heavy():
    code = (
        "import sys, json\n"
        "sys.argv = ['foresaid', '--help']\n"
        "from foresaid.cli.main import main\n"
        "try:\n    main()\n"
        "except SystemExit as end:\n    assert not end.code\n"
        "print(json.dumps(sorted(sys.modules)), file=sys.stderr)\n"
    )
    done = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=True
    )
    loaded = json.loads(done.stderr.splitlines()[-1])
    assert not set(HEAVY) & set(loaded)
    assert "Usage: foresaid" in done.stdout


def test_the_version_is_that_of_the_package():
    wanted = tomllib.loads((ROOT / "pyproject.toml").read_text("utf-8"))["project"]["version"]
    assert spawn("--version").stdout == f"foresaid {wanted}\n"


# ------------------------------------------------------------------------------ environment
def test_the_ledger_may_be_named_in_the_environment(desk, tmp_path):
    env = os.environ | {"FORESAID_LEDGER": str(desk.ledger)}
    done = spawn("calls", "--format", "csv", env=env)
    assert (done.returncode, done.stdout.count("\n")) == (0, 1)
    # the option goes before the environment
    done = spawn("calls", "--ledger", tmp_path / "none", env=env)
    assert done.returncode == 4
    env.pop("FORESAID_LEDGER")
    done = spawn("calls", env=env)
    assert done.returncode == 2
    assert "FORESAID_LEDGER" in done.stderr


@pytest.mark.parametrize(
    "args", [("cals",), ("calls", "--frmat", "csv"), ("new",), ("--nope",)]
)
def test_requests_the_program_cannot_read(args):
    done = spawn(*args)
    assert done.returncode == 2
    assert done.stdout == ""
    assert "Traceback" not in done.stderr


def test_a_reader_that_goes_away_is_no_fault(tmp_path):
    desk = Desk(tmp_path).stock()
    rows = [
        (f"C{n}", "t.mavren", "2025-03-03", "ORVA", "ends higher", "1 week", "so " * 50)
        for n in range(2_000)
    ]
    desk.bring("calls", table_text(CALL_HEADER + ",quote", rows))
    command = [*PROGRAM, "calls", "--format", "csv", "--ledger", str(desk.ledger)]
    with subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE) as running:
        assert running.stdout.readline().startswith(b"ref,")
        running.stdout.close()
        said = running.stderr.read().decode()
        assert running.wait() == 0
    assert "Traceback" not in said
    assert "BrokenPipe" not in said


def test_output_is_utf_8_even_where_the_locale_is_not(tmp_path):
    desk = Desk(tmp_path).stock()
    row = ("C1", "t.mavren", "2025-03-03", "ORVA", "ends higher", "1 week", "Ōno 😀 – so")
    desk.bring("calls", table_text(CALL_HEADER + ",quote", [row]))
    env = os.environ | {"LC_ALL": "C", "PYTHONIOENCODING": "", "PYTHONUTF8": "0"}
    done = subprocess.run(
        [*PROGRAM, "calls", "--format", "csv", "--ledger", str(desk.ledger)],
        capture_output=True, check=False, env=env,
    )  # fmt: skip
    assert done.returncode == 0, done.stderr.decode()
    assert "Ōno 😀 – so" in done.stdout.decode("utf-8")


# --------------------------------------------------------------------------- kills, writers
def test_a_killed_import_leaves_all_or_nothing(tmp_path):
    desk = Desk(tmp_path).stock(prices=False)
    n_rows = 40_000
    path = desk.file("big.csv", big_prices(n_rows))
    command = [*PROGRAM, "import", "prices", str(path), "--ledger", str(desk.ledger)]
    empty = dump(desk.ledger)
    draw = random.Random(11)
    killed = 0
    for _ in range(5):
        with subprocess.Popen(command, stderr=subprocess.DEVNULL) as running:
            try:
                running.wait(timeout=draw.uniform(0.3, 1.2))
            except subprocess.TimeoutExpired:
                running.send_signal(signal.SIGKILL)
                killed += 1
        held = count(desk.ledger, "price")
        assert held in (0, n_rows)
        assert len(dump(desk.ledger)["load"]) == len(empty["load"]) + (held > 0)
        with closing(sqlite3.connect(desk.ledger)) as opened:
            assert opened.execute("PRAGMA integrity_check").fetchone() == ("ok",)
        if held:
            break
    assert killed or held
    spawn(*command[len(PROGRAM) :])
    assert count(desk.ledger, "price") == n_rows
    desk.settle()


def test_two_imports_at_once_both_end_well(tmp_path):
    desk = Desk(tmp_path).stock(prices=False)
    n_rows = 10_000
    paths = [
        desk.file("one.csv", big_prices(n_rows, ("ORVA",))),
        desk.file("two.csv", big_prices(n_rows, ("NELT",))),
        desk.file("three.csv", big_prices(n_rows, ("ORVA",))),
    ]
    running = [
        subprocess.Popen(
            [*PROGRAM, "import", "prices", str(path), "--ledger", str(desk.ledger)],
            stderr=subprocess.PIPE, text=True,
        )
        for path in paths
    ]  # fmt: skip
    said = [one.communicate()[1] for one in running]
    assert [one.returncode for one in running] == [0, 0, 0], said
    # the same rows in two files are stored once, whoever comes first
    assert count(desk.ledger, "price") == 2 * n_rows
    assert sum("nothing to add" in text for text in said) == 1
