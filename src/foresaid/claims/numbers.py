"""Numbers in phrases: read and printed in one way."""

from __future__ import annotations

import math
import re

import numpy as np

from foresaid.claims.claim import PhraseError
from foresaid.model.issues import clip

NUMBER = re.compile(r"[+-]?(\d{1,3}(,\d{3})+|\d+)(\.\d+)?")


def print_number(value: float) -> str:
    """Return the shortest decimal text that reads back as ``value``.

    Examples
    --------
    >>> print_number(5000.0), print_number(0.1)
    ('5000', '0.1')
    """
    return np.format_float_positional(value, trim="-")


def read_number(text: str) -> float:
    """Return a number written with a decimal point, commas setting off thousands only.

    Raises
    ------
    PhraseError
        If it is no such number, or too large for one.

    Examples
    --------
    >>> read_number("5,000.5")
    5000.5
    """
    if not NUMBER.fullmatch(text):
        raise PhraseError(*bad_number(text))
    value = float(text.replace(",", ""))
    if not math.isfinite(value):
        raise PhraseError(f"`{clip(text)}` is too large", "Write a smaller number.")
    return value


def bad_number(word: str) -> tuple[str, str]:
    """Return what is wrong with a word that should be a number, and what to write."""
    plain = word.rstrip("%pbt")
    if "," in plain and not NUMBER.fullmatch(plain):
        return (
            f"`{word}` is not a number here: a comma may only set off thousands",
            "Write the decimal mark as a point, such as 4.25, and no other marks.",
        )
    return f"`{word}` is not a number", "Write digits, such as 5000 or 4.25 or 5%."
