"""Probabilities as they are said: a number, or a word on a codebook's scale."""

from __future__ import annotations

import difflib
from dataclasses import dataclass
from typing import TYPE_CHECKING

from foresaid.claims.claim import PhraseError

if TYPE_CHECKING:
    from foresaid.model.codebook import Codebook


@dataclass(frozen=True, slots=True)
class Likelihood:
    """A probability, exact (``low == high``) or a word's band.

    Attributes
    ----------
    low, high : float
        Bounds as fractions.
    text : str
        The word with its scale, such as ``icd-203: likely``; empty for a number.
    """

    low: float
    high: float
    text: str = ""

    @property
    def middle(self) -> float:
        """The middle of the band."""
        return (self.low + self.high) / 2.0


def parse_likelihood_word(text: str, codebook: Codebook) -> Likelihood:
    """Return the band of a likelihood word, such as ``likely`` or ``ipcc-ar5: likely``.

    Raises
    ------
    PhraseError
        If the scale or the word is not in the codebook.

    Examples
    --------
    >>> from foresaid.model.codebook import default_codebook
    >>> parse_likelihood_word("Very likely", default_codebook()).low
    0.8
    """
    scale_name, colon, word = text.rpartition(":")
    scale_name = scale_name.strip().lower() if colon else codebook.likelihood_default
    word = " ".join(word.lower().split())
    if scale_name not in codebook.likelihood_scales:
        scales = ", ".join(codebook.likelihood_scales)
        raise PhraseError(f"there is no scale `{scale_name}`", f"The codebook has {scales}.")
    words = codebook.likelihood_scales[scale_name].words
    if word not in words:
        close = difflib.get_close_matches(word, words, n=1)
        hint = f"The nearest is `{close[0]}`." if close else f"It has {', '.join(words)}."
        raise PhraseError(f"`{word}` is no word of the scale {scale_name}", hint)
    low, high = words[word]
    return Likelihood(low, high, f"{scale_name}: {word}")
