import datetime as dt

import pytest

from foresaid.ingest.cells import CellFault, parse_number, parse_probability


@pytest.mark.parametrize(
    ("text", "decimal", "number"),
    [
        ("1234.5", ".", 1234.5),
        ("-3", ".", -3.0),
        ("+2.50", ".", 2.5),
        (".5", ".", 0.5),
        ("7.", ".", 7.0),
        ("1e-3", ".", 0.001),
        ("1234,5", ",", 1234.5),
        ("12", ",", 12.0),
        (" 8 ", ".", 8.0),
    ],
)
def test_numbers_are_read(text, decimal, number):
    assert parse_number(text, decimal=decimal) == number


@pytest.mark.parametrize(
    ("text", "decimal", "code", "hint"),
    [
        ("1,234.5", ".", "thousands-mark", "Write 1234.5."),
        ("1 234", ".", "thousands-mark", "Write 1234."),
        ("1.234,5", ".", "thousands-mark", "Write 1234.5."),
        ("1.234,5", ",", "thousands-mark", "Write 1234,5."),
        ("1,234,567", ".", "thousands-mark", "Write 1234567."),
        ("1\u202f234,5", ",", "thousands-mark", "Write 1234,5."),
        ("1,234", ".", "ambiguous-number", "Write 1234 or 1.234."),
        ("1.234", ",", "ambiguous-number", "Write 1234 or 1,234."),
        ("1,5", ".", "decimal-mark", "Write 1.5."),
        ("1.5", ",", "decimal-mark", "Write 1,5."),
        ("5%", ".", "percent-sign", "Write 5 if the column counts percent."),
        ("$12.50", ".", "not-a-number", "Write 12.50."),
        ("(12.5)", ".", "not-a-number", "Write -12.5."),
        ("\u22125", ".", "not-a-number", "Write -5."),
    ],
)
def test_a_dressed_number_comes_with_what_to_write(text, decimal, code, hint):
    fault = parse_number(text, decimal=decimal)
    assert isinstance(fault, CellFault)
    assert (fault.code, fault.hint) == (code, hint)


@pytest.mark.parametrize("text", ["nan", "NaN", "inf", "-Infinity", "1e999"])
def test_what_is_not_finite_is_refused(text):
    assert parse_number(text).code == "not-finite"


@pytest.mark.parametrize(
    "text", ["abc", "1_000", "0x10", "\u0661\u0662", "=1+1", "--1", "#N/A", "1.2.3"]
)
def test_what_is_no_number_is_refused(text):
    assert parse_number(text).code == "not-a-number"


def test_an_empty_cell_is_no_number():
    assert parse_number("").code == "empty"


@pytest.mark.parametrize(
    ("text", "fraction"),
    [("0.65", 0.65), ("65%", 0.65), ("0,65", 0.65), ("65,5 %", 0.655), ("0", 0.0), ("1", 1.0),
     ("100%", 1.0), ("0%", 0.0)],
)  # fmt: skip
def test_probabilities_are_fractions(text, fraction):
    assert parse_probability(text) == pytest.approx(fraction, abs=1e-15)


def test_no_probability_is_none():
    assert parse_probability(" ") is None


@pytest.mark.parametrize(
    ("text", "code"),
    [("65", "not-a-probability"), ("1.5", "not-a-probability"), ("-0.1", "not-a-probability"),
     ("101%", "not-a-probability"), ("likely", "not-a-number"), ("nan", "not-finite")],
)  # fmt: skip
def test_probabilities_outside_are_refused(text, code):
    assert parse_probability(text).code == code


def test_a_percentage_without_its_sign_is_asked_back():
    assert parse_probability("65").hint == "Write 65% or 0.65."


def test_faults_are_values_and_hashable():
    assert len({CellFault("a", "b"), CellFault("a", "b"), dt.date.min}) == 2
