from dataclasses import replace
from datetime import date

import pytest

from foresaid.claims.classes import horizon_class, specificity_class
from foresaid.claims.horizons import parse_horizon
from foresaid.claims.phrases import parse_claim
from foresaid.model.codebook import default_codebook

BOOK = default_codebook()


@pytest.mark.parametrize(
    ("said", "horizon", "name"),
    [
        (date(2025, 1, 31), "2025-02-28", "up to 1 month"),
        (date(2025, 1, 31), "2025-03-01", "up to 3 months"),
        (date(2025, 1, 31), "1 month", "up to 1 month"),
        (date(2025, 1, 31), "3 months", "up to 3 months"),
        (date(2025, 1, 31), "2025-05-01", "up to 12 months"),
        (date(2025, 1, 31), "12 months", "up to 12 months"),
        (date(2025, 1, 31), "2026-02-01", "beyond 12 months"),
        (date(2025, 1, 31), "21 sessions", "up to 1 month"),
        (date(2025, 1, 31), "22 sessions", "up to 3 months"),
        (date(2025, 1, 31), "63 sessions", "up to 3 months"),
        (date(2025, 1, 31), "252 sessions", "up to 12 months"),
        (date(2025, 1, 31), "253 sessions", "beyond 12 months"),
        (date(2025, 1, 31), "soon", "undated"),
        (date(2025, 1, 31), "", "undated"),
        (date(2025, 1, 31), "2025-01-31", "up to 1 month"),
    ],
)
def test_bounds_are_inclusive(said, horizon, name):
    found = parse_horizon(horizon, said=said, codebook=BOOK)
    assert horizon_class(found, said=said, codebook=BOOK) == name


def test_a_codebook_without_an_open_class_is_a_bug():
    book = replace(BOOK, horizon_classes=BOOK.horizon_classes[:-1])
    found = parse_horizon("60 months", said=date(2025, 1, 31), codebook=book)
    with pytest.raises(ValueError, match="no open last horizon class"):
        horizon_class(found, said=date(2025, 1, 31), codebook=book)


@pytest.mark.parametrize(
    ("claim", "dated", "probability", "name"),
    [
        ("not a call: no date", True, True, "not checkable"),
        ("ends higher", False, False, "direction only"),
        ("ends higher", True, False, "direction with date"),
        ("ends above 100", True, False, "size or level with date"),
        ("rises 5%", True, False, "size or level with date"),
        ("ends above 100", False, False, "direction only"),
        ("ends higher", True, True, "probability with date"),
        ("ends above 100", True, True, "probability with date"),
        ("ends above 100", False, True, "direction only"),
    ],
)
def test_the_last_class_whose_needs_are_met(claim, dated, probability, name):
    found = specificity_class(
        parse_claim(claim), dated=dated, has_probability=probability, codebook=BOOK
    )
    assert found == name


def test_nothing_met_falls_back_on_the_first_class():
    book = replace(BOOK, specificity_classes=BOOK.specificity_classes[1:])
    claim = parse_claim("not a call: no date")
    name = specificity_class(claim, dated=True, has_probability=False, codebook=book)
    assert name == "direction only"
