import pytest

from foresaid.claims.claim import PhraseError
from foresaid.claims.likelihood import Likelihood, parse_likelihood_word
from foresaid.model.codebook import default_codebook

BOOK = default_codebook()


@pytest.mark.parametrize(
    ("typed", "low", "high", "text"),
    [
        ("likely", 0.55, 0.80, "icd-203: likely"),
        ("Very  LIKELY", 0.80, 0.95, "icd-203: very likely"),
        ("ipcc-ar5: likely", 0.66, 1.0, "ipcc-ar5: likely"),
        ("IPCC-AR5 :  Very likely ", 0.90, 1.0, "ipcc-ar5: very likely"),
        ("icd-203:remote", 0.01, 0.05, "icd-203: remote"),
    ],
)
def test_words(typed, low, high, text):
    assert parse_likelihood_word(typed, BOOK) == Likelihood(low, high, text)


def test_canonical_text_reads_as_itself():
    for scale, content in BOOK.likelihood_scales.items():
        for word in content.words:
            found = parse_likelihood_word(f"{scale}: {word}", BOOK)
            assert parse_likelihood_word(found.text, BOOK) == found
            assert (found.low, found.high) == content.words[word]


def test_the_middle_of_a_band():
    assert parse_likelihood_word("likely", BOOK).middle == pytest.approx(0.675, abs=1e-15)
    assert Likelihood(0.3, 0.3).middle == 0.3


@pytest.mark.parametrize(
    ("typed", "message", "hint"),
    [
        ("ipcc: likely", "there is no scale `ipcc`", "The codebook has icd-203, ipcc-ar5."),
        ("likly", "`likly` is no word of the scale icd-203", "The nearest is `likely`."),
        (
            "virtually certain",
            "`virtually certain` is no word of the scale icd-203",
            "The nearest is `nearly certain`.",
        ),
        (": likely", "there is no scale ``", "The codebook has"),
        ("zzz", "`zzz` is no word", "It has almost no chance, remote,"),
    ],
)
def test_faults(typed, message, hint):
    with pytest.raises(PhraseError) as caught:
        parse_likelihood_word(typed, BOOK)
    assert message in caught.value.message
    assert hint in caught.value.hint
