"""Single cells: the text of a number or probability to a value or a fault."""

from __future__ import annotations

import math
import re

from foresaid.ingest.dates import DATE_ORDERS, parse_date, parse_said_at
from foresaid.model.issues import clip
from foresaid.model.said import CellFault

__all__ = [
    "DATE_ORDERS", "NUMBER", "CellFault", "parse_date", "parse_number", "parse_probability",
    "parse_said_at",
]  # fmt: skip

NUMBER = re.compile(r"[+-]?(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]+)?")
_NOT_FINITE = re.compile(r"[+-]?(?:nan|inf|infinity)", re.IGNORECASE)
_GROUPED = re.compile(
    r"[+-]?[0-9]{1,3}(?:([,. '\u00a0\u202f\u2019])[0-9]{3})+(?:([.,])[0-9]*)?"
)
_DRESSED = re.compile(r"[$€£¥]\s*|\s*[$€£¥]|\s*[A-Z]{3}$|^[A-Z]{3}\s*")
_LONGEST = 400


def parse_number(text: str, *, decimal: str = ".") -> float | CellFault:
    """Return the number in a cell.

    Parameters
    ----------
    text : str
        The cell. Digits with at most one decimal mark, sign and exponent; nothing else.
    decimal : {".", ","}
        The decimal mark of the file.

    Returns
    -------
    float or CellFault
        A finite number, or what is wrong and what to write.

    Examples
    --------
    >>> parse_number("1234.5")
    1234.5
    >>> parse_number("1,234.5").hint
    'Write 1234.5.'
    """
    text = text.strip()
    plain = text.replace(",", ".") if decimal == "," and "." not in text else text
    if not (decimal == "," and "." in text) and NUMBER.fullmatch(plain):
        return _finite(float(plain), text)
    return _number_fault(text[:_LONGEST], decimal)


def _finite(number: float, text: str) -> float | CellFault:
    if math.isfinite(number):
        return number
    return CellFault("not-finite", f"`{clip(text)}` is too large for a number")


def _number_fault(text: str, decimal: str) -> CellFault:
    if not text:
        return CellFault("empty", "the cell is empty", "Write a number.")
    if _NOT_FINITE.fullmatch(text):
        hint = "Leave the cell empty, or take the row out."
        return CellFault("not-finite", f"`{clip(text)}` is no price or amount", hint)
    if text.endswith("%") and NUMBER.fullmatch(text[:-1].strip().replace(",", ".")):
        hint = f"Write {text[:-1].strip()} if the column counts percent."
        return CellFault("percent-sign", f"`{clip(text)}` has a percent sign", hint)
    return _separator_fault(text, decimal) or _dress_fault(text, decimal)


def _separator_fault(text: str, decimal: str) -> CellFault | None:
    """Return the fault of a number with thousands marks or with the other decimal mark."""
    other = "." if decimal == "," else ","
    grouped = _GROUPED.fullmatch(text)
    if grouped and grouped[1] != grouped[2]:
        if grouped[1] == other and not grouped[2] and text.count(other) == 1:
            whole, part = text.replace(other, ""), text.replace(other, decimal)
            message = f"`{text}` may be {whole} with a thousands mark or {part} with a fraction"
            return CellFault("ambiguous-number", message, f"Write {whole} or {part}.")
        digits = text.replace(grouped[1], "")
        clean = digits.replace(grouped[2], decimal) if grouped[2] else digits
        return CellFault(
            "thousands-mark", f"`{text}` has a mark between thousands", f"Write {clean}."
        )
    swapped = text.replace(other, decimal)
    if text.count(other) == 1 and decimal not in text and _is_number(swapped):
        message = f"`{text}` has `{other}` for a decimal mark, this file has `{decimal}`"
        return CellFault("decimal-mark", message, f"Write {swapped}.")
    return None


def _is_number(text: str) -> bool:
    return NUMBER.fullmatch(text.replace(",", ".")) is not None


def _dress_fault(text: str, decimal: str) -> CellFault:
    """Return the fault of a number with a currency or brackets, or of no number at all."""
    bare = _DRESSED.sub("", text).replace("\u2212", "-")
    if bare.startswith("(") and bare.endswith(")"):
        bare = f"-{bare[1:-1]}"
    hint = "Write digits only, or leave the cell empty where there is no value."
    if (
        bare != text
        and _is_number(bare)
        and isinstance(parse_number(bare, decimal=decimal), float)
    ):
        hint = f"Write {bare}."
    return CellFault("not-a-number", f"`{clip(text)}` is no number", hint)


def parse_probability(text: str) -> float | CellFault | None:
    """Return a probability as a fraction from 0 to 1, None for an empty cell.

    Parameters
    ----------
    text : str
        A fraction (``0.65``, ``0,65``) or a percentage with its sign (``65%``).

    Returns
    -------
    float, CellFault or None
        Words are the fault ``not-a-number``: the caller may know them.

    Examples
    --------
    >>> parse_probability("65%"), parse_probability("0,65")
    (0.65, 0.65)
    >>> parse_probability("65").hint
    'Write 65% or 0.65.'
    """
    text = text.strip()
    if not text:
        return None
    bare = text.removesuffix("%").rstrip()
    number = parse_number(bare.replace(",", ".") if bare.count(",") == 1 else bare)
    if isinstance(number, CellFault):
        return CellFault(number.code, number.message, "Write a fraction such as 0.65, or 65%.")
    fraction = number / 100.0 if text != bare else number
    if 0.0 <= fraction <= 1.0:
        return fraction
    return _probability_fault(text, number, has_sign=text != bare)


def _probability_fault(text: str, number: float, *, has_sign: bool) -> CellFault:
    hint = "Write a fraction from 0 to 1, or a percentage from 0% to 100%."
    if 1.0 < number <= 100.0 and not has_sign:
        hint = f"Write {number:g}% or {number / 100.0:g}."
    return CellFault("not-a-probability", f"`{clip(text)}` is no probability", hint)
