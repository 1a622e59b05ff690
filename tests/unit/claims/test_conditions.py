from datetime import date

import pytest

from foresaid.claims.claim import PhraseError
from foresaid.claims.conditions import HINT, Condition, parse_condition
from foresaid.claims.phrases import parse_claim
from support.phrases import phrases_in

SAID = date(2025, 1, 2)


def read(text):
    return parse_condition(text, said=SAID)


def test_a_claim_on_an_instrument():
    found = read("ABC  Ends above 1,000 by 2025-06-30")
    assert found == Condition(
        "ABC ends above 1000 by 2025-06-30",
        date(2025, 6, 30),
        "ABC",
        parse_claim("ends above 1000"),
    )


@pytest.mark.parametrize(
    ("text", "canonical", "fact"),
    [
        (
            "fact: the bridge opens by 2025-06-30",
            "fact: the bridge opens by 2025-06-30",
            "the bridge opens",
        ),
        (
            "FACT:  it   is\nsigned BY 2025-01-02",
            "fact: it is signed by 2025-01-02",
            "it is signed",
        ),
        (
            "fact: paid by instalments by 2025-02-01",
            "fact: paid by instalments by 2025-02-01",
            "paid by instalments",
        ),
    ],
)
def test_a_fact(text, canonical, fact):
    found = read(text)
    assert (found.text, found.fact) == (canonical, fact)
    assert (found.instrument, found.claim) == ("", None)
    assert read(found.text) == found


def test_a_canonical_condition_reads_as_itself():
    found = read("X rises 5 % by 2025-06-30")
    assert found.text == "X rises 5% by 2025-06-30"
    assert read(found.text) == found


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("ABC ends above 100", "has no `by` with a date"),
        ("ABC ends above 100 by June", "has no `by` with a date"),
        ("by 2025-06-30", "has no `by` with a date"),
        ("", "has no `by` with a date"),
        ("ABC ends above 100 by 2025-06-31", "there is no day 2025-06-31"),
        ("ABC ends above 100 by 2025-01-01", "ends on 2025-01-01, before the statement"),
        ("fact:  by 2025-06-30", "the fact is empty"),
        ("ABC by 2025-06-30", "there is no claim"),
        ("ABC not a call: no date by 2025-06-30", "cannot be a condition"),
        ("ABC ends over 100 by 2025-06-30", "the word `over` is not understood"),
    ],
)
def test_faults(text, message):
    with pytest.raises(PhraseError) as caught:
        read(text)
    assert message in caught.value.message
    assert caught.value.hint


def test_the_hint_is_legal():
    assert [read(text).deadline for text in phrases_in(HINT)] == [date(2025, 6, 30)] * 2
