import datetime as dt

import pytest

from foresaid.ingest.readers import read_table
from foresaid.ingest.things import parse_actions

KNOWN = ("MARB", "ODRL")
HEAD = "instrument,effective,action,ratio,amount,currency,into\n"


@pytest.fixture
def parse(tmp_path):
    def parser(text, **keywords):
        path = tmp_path / "actions.csv"
        path.write_text(text, encoding="utf-8")
        return parse_actions(read_table(path), KNOWN, **keywords)

    return parser


def test_actions_are_read(parse):
    parsed = parse(
        HEAD
        + "MARB,2025-03-14,split,2,,,\n"
        + "MARB,2025-03-17,Dividend,,0.6,VQN,\n"
        + "MARB,2025-03-18,rebase,0.1,,,\n"
        + "MARB,2025-03-19,halt,,,,\n"
        + "MARB,2025-03-20,resume,,,,\n"
        + "MARB,2025-03-21,merger,0.5,1.25,VQN,ODRL\n"
        + "ODRL,2025-03-24,cash-out,,12,VQN,\n"
        + "ODRL,2025-03-25,wind-up,,0,,\n"
    )
    assert parsed.issues == ()
    split, dividend = parsed.rows[:2]
    assert (split.kind, split.ratio, split.amount) == ("split", 2.0, None)
    assert split.effective == dt.date(2025, 3, 14)
    assert (dividend.kind, dividend.amount, dividend.currency) == ("dividend", 0.6, "VQN")
    assert parsed.rows[5].into == "ODRL"
    assert parsed.rows[7].amount == 0.0
    assert parsed.lines == tuple(range(2, 10))


@pytest.mark.parametrize(
    ("row", "column", "code"),
    [
        ("NONE,2025-03-14,halt,,,,", "instrument", "unknown-instrument"),
        (",2025-03-14,halt,,,,", "instrument", "unknown-instrument"),
        ("MARB,2025-02-30,halt,,,,", "effective", "no-such-date"),
        ("MARB,03/04/2025,halt,,,,", "effective", "ambiguous-date"),
        ("MARB,2025-03-14,splitt,,,,", "action", "unknown-action"),
        ("MARB,2025-03-14,,,,,", "action", "unknown-action"),
        ("MARB,2025-03-14,split,,,,", "ratio", "no-ratio"),
        ("MARB,2025-03-14,split,0,,,", "ratio", "bad-ratio"),
        ("MARB,2025-03-14,split,-2,,,", "ratio", "bad-ratio"),
        ("MARB,2025-03-14,split,2:1,,,", "ratio", "not-a-number"),
        ("MARB,2025-03-14,split,nan,,,", "ratio", "not-finite"),
        ("MARB,2025-03-14,dividend,,,,", "amount", "no-amount"),
        ("MARB,2025-03-14,dividend,,-1,,", "amount", "bad-amount"),
        ("MARB,2025-03-14,dividend,2,1,,", "ratio", "not-needed"),
        ("MARB,2025-03-14,halt,,,,ODRL", "into", "not-needed"),
        ("MARB,2025-03-14,merger,1,,,", "into", "no-into"),
        ("MARB,2025-03-14,merger,1,,,NONE", "into", "unknown-instrument"),
        ("MARB,2025-03-14,merger,1,,,MARB", "into", "into-itself"),
        ("MARB,2025-03-14,merger,,,,ODRL", "ratio", "no-ratio"),
        ("ODRL,2025-03-14,halt,,,,", "action", "double-action"),
    ],
)
def test_a_wrong_action_is_named_and_kept_out(parse, row, column, code):
    parsed = parse(HEAD + "ODRL,2025-03-14,halt,,,,\n" + row + "\n")
    assert [(issue.line, issue.column, issue.code) for issue in parsed.issues] == [
        (3, column, code)
    ]
    assert len(parsed.rows) == 1


def test_dates_in_another_order(parse):
    (action,) = parse(HEAD + "MARB,03/04/2025,halt,,,,\n", dates="mdy").rows
    assert action.effective == dt.date(2025, 3, 4)


def test_decimal_commas(parse):
    (action,) = parse("instrument;effective;action;amount\nMARB;2025-03-14;dividend;0,6\n").rows
    assert action.amount == 0.6


def test_missing_columns_are_named_together(parse):
    (issue,) = parse("instrument,ratio\nMARB,2\n").issues
    assert "`effective`, `action`" in issue.message
