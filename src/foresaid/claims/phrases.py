"""Claim phrases: text to claim, claim to canonical text, and helpful words for the rest."""

from __future__ import annotations

import difflib
import re
from functools import lru_cache
from typing import TYPE_CHECKING

from foresaid.claims.claim import Claim, PhraseError, Quantity
from foresaid.claims.distributions import (
    BINS_EXAMPLE,
    QUANTILES_EXAMPLE,
    print_bins,
    print_quantiles,
    read_bins,
    read_quantiles,
)
from foresaid.claims.kind import SLOT
from foresaid.claims.numbers import NUMBER, bad_number, print_number, read_number
from foresaid.claims.registry import KINDS, NOT_A_CALL

if TYPE_CHECKING:
    from collections.abc import Iterable

    from foresaid.claims.kind import Kind

SIZE = re.compile(r"(?P<number>[+-]?[\d,.]+)(?P<unit>%|pp|bp|pt)?")
GAP_BEFORE_UNIT = re.compile(r"(?<=\d)\s+(?=(%|pp|bp|pt)(\s|$))", re.IGNORECASE)
EXAMPLES = {
    "level": ("5000", "5500"),
    "size": ("5%", "10%"),
    "percent": ("20%",),
    "instrument": ("ABC",),
    "instruments": ("ABC, DEF",),
    "quantiles": (QUANTILES_EXAMPLE,),
    "bins": (BINS_EXAMPLE,),
}
LIST = "{instruments}"
OTHERS = ("{instrument}", LIST)
DISTRIBUTIONS = {
    "{quantiles}": (read_quantiles, print_quantiles),
    "{bins}": (read_bins, print_bins),
}


@lru_cache(maxsize=100_000)
def parse_claim(text: str) -> Claim:
    """Return the claim that a phrase states.

    Parameters
    ----------
    text : str
        A phrase as typed; case and spacing do not matter.

    Returns
    -------
    Claim

    Raises
    ------
    PhraseError
        If the phrase is on no registered form; names the word and the nearest legal phrase.

    Examples
    --------
    >>> parse_claim("Ends above 5,000").quantities[0].value
    5000.0
    """
    words = GAP_BEFORE_UNIT.sub("", text).split()
    if not words:
        raise PhraseError("there is no claim", f"Write one such as `{_example('ends above')}`.")
    if _says_not_a_call(words):
        return _not_a_call(text)
    for kind in KINDS.values():
        if _shape_fits(kind, words):
            return _fill(kind, words)
    raise _unreadable(words)


def print_claim(claim: Claim) -> str:
    """Return the canonical phrase of a claim.

    Examples
    --------
    >>> print_claim(parse_claim("ends  HIGHER by 5.0 %"))
    'ends higher by 5%'
    """
    if claim.reason:
        return f"{NOT_A_CALL}: {claim.reason}"
    numbers = iter(print_number(q.value) + q.unit for q in claim.quantities)
    others = iter(claim.others)

    def fill(slot: re.Match[str]) -> str:
        if slot.group(1) == "instruments":
            return ", ".join(others)
        if slot.group(0) in DISTRIBUTIONS:
            return DISTRIBUTIONS[slot.group(0)][1](claim.quantities)
        return next(others) if slot.group(1) == "instrument" else next(numbers)

    return SLOT.sub(fill, KINDS[claim.kind].form)


def stated_probability(claim: Claim) -> float | None:
    """Return the probability that a phrase itself states, None for most.

    Examples
    --------
    >>> stated_probability(parse_claim("range 10 to 20 at 80%"))
    0.8
    """
    states = KINDS[claim.kind].states if claim.is_call else None
    return states([one.value for one in claim.quantities]) if states else None


def legal_forms() -> list[str]:
    """Return every legal phrase with examples in its slots, in the order of the registry."""
    return [_example(name) for name in KINDS] + [f"{NOT_A_CALL}: no date"]


def _example(name: str) -> str:
    return _in_words(KINDS[name], ())


def _tokens(kind: Kind) -> list[str]:
    return kind.form.split()


def _shape_fits(kind: Kind, words: list[str]) -> bool:
    """Whether the words are those of the form, with something number-like in each slot."""
    tokens = _tokens(kind)
    if tokens[-1] in DISTRIBUTIONS:
        return len(words) >= len(tokens) and all(map(_fits, tokens, words))
    if tokens[-1] == LIST and len(words) >= len(tokens):
        tokens = tokens[:-1] + ["{instrument}"] * (len(words) - len(tokens) + 1)
    return len(tokens) == len(words) and all(
        _fits(token, word) for token, word in zip(tokens, words, strict=True)
    )


def _fits(token: str, word: str) -> bool:
    if token in OTHERS or token in DISTRIBUTIONS:
        return True
    if SLOT.fullmatch(token):
        return word[:1] in "+-.0123456789" or word[1:2].isdigit()
    return token == word.lower()


def _fill(kind: Kind, words: list[str]) -> Claim:
    quantities, others = [], []
    for at, (token, word) in enumerate(zip(_tokens(kind), words, strict=False)):
        slot = SLOT.fullmatch(token)
        if token == LIST:
            others += " ".join(words[at:]).replace(",", " ").split()
        elif token in OTHERS:
            others.append(word)
        elif token in DISTRIBUTIONS:
            quantities += DISTRIBUTIONS[token][0](" ".join(words[at:]))
        elif slot:
            quantities.append(_READERS[slot.group(1)](word, kind))
    if not others and kind.form.endswith(LIST):
        raise PhraseError(
            f"`{words[-1]}` names no instrument", f"Write `{_example(kind.name)}`."
        )
    if len(set(others)) != len(others):
        raise PhraseError(f"`{words[-1]}` names an instrument twice", "Name each one once.")
    if kind.ascending and quantities[0].value >= quantities[1].value:
        low, high = (print_number(one.value) for one in quantities[:2])
        turned = [] if low == high else [high, low, *words[-1:]]
        raise PhraseError(
            f"the range goes from {low} to {high}; the lower level comes first",
            f"Write `{_in_words(kind, turned)}`.",
        )
    return Claim(kind.name, tuple(quantities), others=tuple(others))


def _level(word: str, kind: Kind) -> Quantity:
    if NUMBER.fullmatch(word):
        return Quantity(read_number(word))
    size = SIZE.fullmatch(word.lower())
    if size and NUMBER.fullmatch(size["number"]):
        other = _legal_phrase(KINDS["ends higher by"], [word.lower().lstrip("+-")])
        raise PhraseError(
            f"`{word}` is a size where `{kind.name}` needs a level, the price itself",
            f"Write a level, `{_example(kind.name)}`, or a size, `{other}`.",
        )
    raise PhraseError(*bad_number(word))


def _size(word: str, kind: Kind) -> Quantity:
    match = SIZE.fullmatch(word.lower())
    if match is None or not NUMBER.fullmatch(match["number"]):
        raise PhraseError(*bad_number(word))
    value = read_number(match["number"])
    unit = match["unit"]
    if value <= 0:
        raise PhraseError(
            f"the size `{word}` must be above zero", "The words higher and lower give the side."
        )
    if unit is None:
        raise PhraseError(
            f"`{word}` has no unit; `{kind.name}` needs a size",
            f"Write `{word}%`, `{word}pt` (points), `{word}pp` (percentage points of a yield) "
            f"or `{word}bp` (basis points); for a price, `ends above {word}`.",
        )
    if unit == "%" and value >= 100 and any(m.role.startswith("loss") for m in kind.marks):
        raise PhraseError(f"nothing can lose `{word}`", "Write a size below 100%.")
    return Quantity(value, unit)


def _percent(word: str, kind: Kind) -> Quantity:
    if not word.endswith("%"):
        raise PhraseError(
            f"`{word}` is no percentage; `{kind.name}` needs one",
            f"Write `{_example(kind.name)}`.",
        )
    quantity = _size(word, kind)
    if kind.states and quantity.value >= 100:
        raise PhraseError(f"`{word}` is no probability", "Write a percentage below 100%.")
    return quantity


_READERS = {"level": _level, "size": _size, "percent": _percent}


def _says_not_a_call(words: list[str]) -> bool:
    head = " ".join(words).lower().partition(":")[0].split()
    return head[:3] == NOT_A_CALL.split()


def _not_a_call(text: str) -> Claim:
    reason = " ".join(text.partition(":")[2].split()).lower()
    if not reason:
        raise PhraseError(
            "`not a call` needs a reason", f"Write `{NOT_A_CALL}: no date` or another reason."
        )
    return Claim(NOT_A_CALL, reason=reason)


def _unreadable(words: list[str]) -> PhraseError:
    """Return the fault of a phrase on no form: the word at fault and the nearest phrase."""
    kind = _nearest(words)
    at = _first_misfit(_tokens(kind), words)
    example = _legal_phrase(kind, words)
    if at < len(words):
        message = f"the word `{words[at]}` is not understood here"
    else:
        message = f"the phrase stops after `{words[-1]}`"
    return PhraseError(message, f"The nearest phrase is `{example}`.")


def _nearest(words: list[str]) -> Kind:
    shape = " ".join(_shape(word) for word in words)

    def likeness(kind: Kind) -> tuple[float, int]:
        form = " ".join(SLOT.sub("0", token) for token in _tokens(kind))
        ratio = difflib.SequenceMatcher(None, shape, form).ratio()
        return ratio, -abs(len(_tokens(kind)) - len(words))

    return max(KINDS.values(), key=likeness)


def _shape(word: str) -> str:
    return "0" if word[:1] in "+-.0123456789" or word[1:2].isdigit() else word.lower()


def _first_misfit(tokens: list[str], words: list[str]) -> int:
    for at, (token, word) in enumerate(zip(tokens, words, strict=False)):
        if not _fits(token, word):
            return at
    return min(len(tokens), len(words))


def _legal_phrase(kind: Kind, words: Iterable[str]) -> str:
    """Return the form of ``kind`` with the numbers of ``words``, or others if wrong."""
    phrase = _in_words(kind, words)
    try:
        _fill(kind, phrase.split())
    except PhraseError:
        return _in_words(kind, ())
    return phrase


def _in_words(kind: Kind, words: Iterable[str]) -> str:
    """Return the form of ``kind``, with the numbers of ``words`` where they fit."""
    numbers = [word for word in words if _shape(word) == "0"]
    spare = {slot: iter(texts) for slot, texts in EXAMPLES.items()}

    def fill(slot: re.Match[str]) -> str:
        if slot.group(0) in OTHERS or slot.group(0) in DISTRIBUTIONS:
            return next(spare[slot.group(1)])
        number = numbers.pop(0) if numbers else next(spare[slot.group(1)])
        has_unit = number[-1:] in "%pbt"
        if slot.group(1) != "level":
            return number if has_unit else number + "%"
        return number.rstrip("%pbt") if has_unit else number

    return SLOT.sub(fill, kind.form)
