import pytest
from hypothesis import given
from hypothesis import strategies as st

from foresaid.model.issues import Issue, clip


@pytest.mark.parametrize(
    ("value", "limit", "text"),
    [
        ("abc", 5, "abc"),
        ("abcde", 5, "abcde"),
        ("abcdef", 5, "abcd…"),
        ("a\nb\t c  d", 60, "a b c d"),
        (12.5, 60, "12.5"),
        (None, 60, "None"),
        ("", 60, ""),
        ("x" * 10_000_000, 3, "xx…"),
    ],
)
def test_clip(value, limit, text):
    assert clip(value, limit=limit) == text


@given(st.text(), st.integers(1, 80))
def test_clipped_text_is_one_line_and_fits(value, limit):
    text = clip(value, limit=limit)
    assert len(text) <= limit
    assert text.splitlines() in ([], [text])


def test_an_issue_as_a_dictionary():
    issue = Issue("bad-date", "no such day", "calls.csv", 3, "said_at", "2025-02-30", "Mend.")
    assert issue.to_dict() == {
        "code": "bad-date",
        "message": "no such day",
        "file": "calls.csv",
        "line": 3,
        "column": "said_at",
        "value": "2025-02-30",
        "hint": "Mend.",
        "severity": "error",
    }
