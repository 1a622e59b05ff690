"""The pages name what the code knows: phrases, reasons, flags, readings, tables, rooms."""

import ast
import importlib
import re
import sqlite3
from pathlib import Path

import pytest

import foresaid
from foresaid.claims.kind import SLOT
from foresaid.claims.registry import KINDS
from foresaid.ledger.migrations import MIGRATIONS
from foresaid.model.codebook import default_codebook
from foresaid.pipeline.outcome_rows import FLAGS
from foresaid.score import verdict
from foresaid.settle.outcomes import alternate_names
from foresaid.settle.windows import REASONS

ROOT = Path(__file__).parents[2]
DOCS = ROOT / "docs"
PACKAGE = Path(foresaid.__file__).parent
BOOK = default_codebook()
LINK = re.compile(r"\]\(([^)#\s]+)[^)]*\)")
ROOM = re.compile(r"^ {6}(\w+)/ ", re.MULTILINE)
# calls that keep a claim from being judged; one of their arguments is the reason
REFUSERS = {"Unfit", "leave", "leave_rows"}
RESULTS = {"void", "open"}


def page(name):
    """Return a page with its line breaks taken out, so that phrases may be wrapped."""
    return " ".join((DOCS / name).read_text("utf-8").split())


def called(node):
    function = node.func
    return function.attr if isinstance(function, ast.Attribute) else getattr(function, "id", "")


def texts(node):
    strings = (one for one in ast.walk(node) if isinstance(one, ast.Constant))
    return {one.value for one in strings if isinstance(one.value, str)}


def given_reasons(file):
    """Return the reasons in calls that keep a claim from being judged."""
    tree = ast.parse(file.read_text("utf-8"))
    calls = (node for node in ast.walk(tree) if isinstance(node, ast.Call))
    refusals = (node for node in calls if called(node) in REFUSERS)
    found = {text for node in refusals for one in node.args for text in texts(one)}
    return found - RESULTS - {""}


def named_reasons(module):
    """Return the texts of a module's constants, which are reasons."""
    names = vars(importlib.import_module(f"foresaid.pipeline.{module}"))
    return {text for name, text in names.items() if name.isupper() and isinstance(text, str)}


def outcome_reasons():
    files = [*PACKAGE.glob("claims/*.py"), *PACKAGE.glob("settle/*.py")]
    found = set(REASONS) - {""}
    found |= {text for file in files for text in given_reasons(file)}
    return sorted(found | named_reasons("world") | named_reasons("conditions"))


OUTCOME_REASONS = outcome_reasons()


def tables():
    connection = sqlite3.connect(":memory:")
    for script in MIGRATIONS:
        connection.executescript(script)
    rows = connection.execute("SELECT name FROM sqlite_master WHERE type IN ('table', 'view')")
    names = sorted(name for (name,) in rows)
    connection.close()
    return names


@pytest.mark.parametrize("form", [kind.form for kind in KINDS.values()])
def test_every_phrase_is_described(form):
    assert f"| `{form}` |" in page("claims.md")


@pytest.mark.parametrize("kind", KINDS.values(), ids=lambda kind: kind.name)
def test_every_phrase_has_an_example(kind):
    pattern = SLOT.sub(r"[^`{}]+", kind.form)
    assert re.search(f"`{pattern}`:? ", page("claims.md").replace(f"| `{kind.form}` |", ""))


@pytest.mark.parametrize("reason", OUTCOME_REASONS)
def test_every_reason_of_an_outcome_is_described(reason):
    assert f"`{reason}`" in page("settlement.md")


def test_reasons_are_found():
    assert {"the window still runs", "no price before the call"} <= set(OUTCOME_REASONS)
    assert len(OUTCOME_REASONS) >= 15


@pytest.mark.parametrize("flag", FLAGS)
def test_every_flag_is_described(flag):
    assert f"| `{flag}` |" in page("settlement.md")


@pytest.mark.parametrize("name", alternate_names())
def test_every_other_reading_is_described(name):
    assert re.search(rf"\| (`alt_\w+`, )*`alt_{name}`(, `alt_\w+`)* \|", page("settlement.md"))


@pytest.mark.parametrize("reason", BOOK.not_a_call_reasons)
def test_every_reason_for_no_call_is_described(reason):
    assert f"| `{reason}` |" in page("claims.md")


@pytest.mark.parametrize(("word", "entry"), BOOK.horizon_words.items())
def test_every_horizon_word_is_described_with_its_lengths(word, entry):
    row = f"| `{word}` | {entry.length} | {entry.shorter} | {entry.longer} |"
    assert row in page("claims.md")


def test_silence_is_described_with_its_lengths():
    entry = BOOK.horizon_default
    row = f"| (nothing said) | {entry.length} | {entry.shorter} | {entry.longer} |"
    assert row in page("claims.md")


@pytest.mark.parametrize(
    ("scale", "word"),
    [(name, word) for name, scale in BOOK.likelihood_scales.items() for word in scale.words],
)
def test_every_likelihood_word_is_described_with_its_band(scale, word):
    low, high = (round(100 * bound) for bound in BOOK.likelihood_scales[scale].words[word])
    words = rf"(`[a-z ]+`, )*`{word}`(, `[a-z ]+`)*"
    assert re.search(rf"\| {words} \| {low} to {high} \|", page("claims.md"))


@pytest.mark.parametrize(
    "name",
    [
        *(one.name for one in BOOK.horizon_classes),
        BOOK.undated,
        *(one.name for one in BOOK.specificity_classes),
    ],
)
def test_every_class_is_described(name):
    assert f"| `{name}` |" in page("claims.md")


@pytest.mark.parametrize("kind", BOOK.instrument_kinds)
def test_every_kind_of_instrument_is_described(kind):
    assert f"`{kind}`" in page("claims.md")


@pytest.mark.parametrize(
    "words",
    [
        verdict.AHEAD,
        verdict.AHEAD_ALONE,
        verdict.BEHIND,
        verdict.BEHIND_ALONE,
        verdict.NO_DIFFERENT,
        verdict.TOO_FEW,
        verdict.NOT_ESTIMABLE,
    ],
)
def test_every_verdict_is_described(words):
    assert f"| `{words}` |" in page("methods.md")


@pytest.mark.parametrize("name", tables())
def test_every_table_and_view_is_described(name):
    assert f"| `{name}` |" in page("ledger.md")


def test_the_map_of_the_readme_is_the_tree():
    block = (ROOT / "README.md").read_text("utf-8").partition("## Map")[2].partition("\n## ")[0]
    rooms = {file.parent.name for file in PACKAGE.glob("*/__init__.py")}
    assert set(ROOM.findall(block)) == rooms


@pytest.mark.parametrize(
    "file",
    [ROOT / "README.md", ROOT / "DEVELOPERS.md", *sorted(DOCS.glob("*.md"))],
    ids=lambda file: file.name,
)
def test_linked_files_exist(file):
    links = [link for link in LINK.findall(file.read_text("utf-8")) if "://" not in link]
    assert [link for link in links if not (file.parent / link).exists()] == []
