import pytest

from foresaid.report.traces import trace_rows, trace_text

CALL = {"ref": "C-1", "outcome": "miss"}
STEPS = [
    ("statement", "ada, 2025-03-14: " + "a long line of words " * 12),
    ("result", "miss"),
]
PRICES = [
    {
        "use": "reference",
        "session": "2025-03-14",
        "open": None,
        "high": 101.0,
        "low": 99.5,
        "close": 100.25,
        "file": "prices.csv",
        "sha256": "0123456789abcdef" * 4,
    }
]


def text(width):
    return trace_text(
        CALL, STEPS, PRICES, {"deadline": "hit", "old_extreme": "miss"}, width=width
    )


@pytest.mark.parametrize("width", [80, 100, 110])
def test_lines_fit(width):
    lines = text(width).splitlines()
    assert max(map(len, lines)) <= width
    assert max(map(len, lines)) > width - 20


def test_lines_are_never_narrower_than_sixty():
    assert text(10) == text(60)


def test_words_are_kept_whole():
    words = text(80).split()
    assert PRICES[0]["sha256"] in words
    assert "2025-03-14" in words


def test_the_text():
    found = text(100)
    assert found.startswith("C-1: miss\n\nstatement     ada, 2025-03-14: a long")
    assert "result        miss\n" in found
    assert "price         2025-03-14 (reference): high 101.0, low 99.5, close 100.25;" in found
    assert "other reading judged at the deadline close alone: hit" in found
    assert "other reading old extreme: miss" in found
    continued = [line for line in found.splitlines()[3:] if line.startswith(" ")]
    assert all(line.startswith(" " * 14) for line in continued)


def test_line_breaks_in_a_quote_do_not_break_the_layout():
    found = trace_text(CALL, [("statement", "one\ntwo\n\nthree")], [], {}, width=80)
    assert "statement     one two" in found


def test_rows():
    rows = trace_rows(STEPS[1:], PRICES, {"deadline": "hit"})
    assert [row["step"] for row in rows] == ["result", "price", "alt_deadline"]
    assert "close 100.25" in rows[1]["text"]
    assert "sha256 0123456789abcdef" in rows[1]["text"]
    assert rows[2]["text"] == "hit"
