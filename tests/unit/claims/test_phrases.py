import pytest
from hypothesis import given
from hypothesis import strategies as st

from foresaid.claims.claim import Claim, PhraseError, Quantity
from foresaid.claims.phrases import (
    legal_forms,
    parse_claim,
    print_claim,
    print_number,
)
from foresaid.claims.registry import KINDS, NOT_A_CALL
from foresaid.claims.units import unit_faults
from foresaid.model.codebook import default_codebook
from support.phrases import claims, phrases_in

BOOK = default_codebook()


def fault_of(text):
    with pytest.raises(PhraseError) as caught:
        parse_claim(text)
    return caught.value


@given(claims())
def test_a_printed_claim_reads_back(claim):
    text = print_claim(claim)
    assert parse_claim(text) == claim
    assert print_claim(parse_claim(text)) == text


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_a_printed_number_reads_back_and_has_no_exponent(value):
    text = print_number(value)
    assert float(text) == value
    assert "e" not in text
    assert not text.endswith((".", ".0"))


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (5000.0, "5000"),
        (0.1, "0.1"),
        (1e22, "10000000000000000000000"),
        (1e-7, "0.0000001"),
        (-4.25, "-4.25"),
        (0.0, "0"),
        (1 / 3, "0.3333333333333333"),
    ],
)
def test_numbers_are_printed_short(value, text):
    assert print_number(value) == text


@given(claims(), st.randoms(use_true_random=False))
def test_case_and_spacing_do_not_matter(claim, random):
    words = print_claim(claim).split()
    symbols = {*claim.others, *(f"{other}," for other in claim.others)}
    shouted = [
        word if word in symbols else random.choice([word.upper(), word.lower(), word.title()])
        for word in words
    ]
    spaces = [random.choice([" ", "  ", "\t", "\n "]) for _ in words]
    text = "".join(space + word for space, word in zip(spaces, shouted, strict=True))
    assert parse_claim(text + " ") == claim


@pytest.mark.parametrize(
    ("text", "canonical"),
    [
        ("Ends above 5,000", "ends above 5000"),
        ("ends above 1,234,567.5", "ends above 1234567.5"),
        ("ends above +5000", "ends above 5000"),
        ("ends above 5000.00", "ends above 5000"),
        ("ends above -0.25", "ends above -0.25"),
        ("ends  HIGHER by 5.0 %", "ends higher by 5%"),
        ("ends lower by 25 BP", "ends lower by 25bp"),
        ("rises 1,500 pt", "rises 1500pt"),
        ("falls 0.5pp", "falls 0.5pp"),
        ("stays between 90 and 110", "stays between 90 and 110"),
        ("Beats DEF by 5.0 %", "beats DEF by 5%"),
        ("LAGS def", "lags def"),
        ("tops ABC,DEF , GHI", "tops ABC, DEF, GHI"),
        ("tops ABC DEF", "tops ABC, DEF"),
        ("range 10 to 20 at 80 %", "range 10 to 20 at 80%"),
        ("not a call: no date", "not a call: no date"),
        ("NOT A  CALL:   No   Date ", "not a call: no date"),
        ("not a call:no date", "not a call: no date"),
        ("not a call : other: a joke", "not a call: other: a joke"),
    ],
)
def test_canonical_forms(text, canonical):
    assert print_claim(parse_claim(text)) == canonical


def test_a_claim_as_data():
    assert parse_claim("ends between 4,000 and 4100.5") == Claim(
        "ends between and", (Quantity(4000.0), Quantity(4100.5))
    )
    assert parse_claim("ends higher by 5%") == Claim("ends higher by", (Quantity(5.0, "%"),))
    screened = parse_claim("not a call: opinion")
    assert screened == Claim(NOT_A_CALL, reason="opinion")
    assert not screened.is_call
    assert parse_claim("ends higher").is_call


def test_every_legal_form_reads_as_its_own_kind():
    forms = legal_forms()
    assert len(forms) == len(KINDS) + 1
    kinds = [parse_claim(form).kind for form in forms]
    assert kinds == [*KINDS, NOT_A_CALL]


FAULTS = [
    ("ends abov 5000", "`abov`", "ends above 5000"),
    ("end above 5000", "`end`", "ends above 5000"),
    ("ends above", "stops after `above`", "ends above 5000"),
    ("ends", "stops after `ends`", None),
    ("ends above 5000 soon", "`soon`", "ends above 5000"),
    ("will rise 5%", "`will`", None),
    ("rise 5%", "`rise`", "rises 5%"),
    ("falls by 150%", "`by`", None),
    ("rises to 5.000,00", "`to`", None),
    ("ends between 6000 or 5000", "`or`", "ends between 5000 and 5500"),
    ("ends between 4000 or 4500", "`or`", "ends between 4000 and 4500"),
    ("ends between 6000", "stops after `6000`", None),
    ("5000", "`5000`", None),
    ("Kurs steigt über 5000", "`Kurs`", None),
    ("ends above 5.000,5", "`5.000,5`", None),
    ("ends above 5,00", "`5,00`", None),
    ("ends above 1,2345", "`1,2345`", None),
    ("ends above $5000", "`$5000`", None),
    ("ends above 5k", "`5k`", None),
    ("ends above 5e3", "`5e3`", None),
    ("ends above 5..0", "`5..0`", None),
    ("ends above -", "`-`", None),
    ("ends above 5%", "`5%`", "ends higher by 5%"),
    ("ends above -5%", "`-5%`", "ends higher by 5%"),
    ("ends above 0%", "`0%`", "ends higher by 5%"),
    ("ends above 25BP", "`25BP`", "ends higher by 25bp"),
    ("ends higher by 5", "`5`", "ends above 5"),
    ("ends higher by 5 percent", "`percent`", "ends higher by 5%"),
    ("ends higher by 0%", "`0%`", None),
    ("ends higher by -5%", "`-5%`", None),
    ("ends higher by -5", "`-5`", None),
    ("ends higher by 5,5%", "`5,5%`", None),
    ("ends lower by 100%", "`100%`", None),
    ("falls 100%", "`100%`", None),
    ("weakens by 120%", "`120%`", None),
    ("ends within 100%", "`100%`", None),
    ("ends between 110 and 90", "from 110 to 90", "ends between 90 and 110"),
    ("stays between 90 and 90", "from 90 to 90", "stays between 5000 and 5500"),
    ("not a call", "needs a reason", "not a call: no date"),
    ("not a call:", "needs a reason", "not a call: no date"),
    ("not a call because of the date", "needs a reason", "not a call: no date"),
    ("", "there is no claim", "ends above 5000"),
    ("   ", "there is no claim", "ends above 5000"),
    ("tops ,", "`,` names no instrument", "tops ABC, DEF"),
    ("tops", "stops after `tops`", "tops ABC, DEF"),
    ("tops ABC, ABC", "names an instrument twice", None),
    ("beats", "stops after `beats`", "beats ABC"),
    ("beats ABC by 5", "`5` is no percentage", "beats ABC by 20%"),
    ("beats ABC on 5%", "`on`", "beats ABC by 5%"),
    ("volatility above 20", "`20` is no percentage", "volatility above 20%"),
    ("range 10 to 20 at 100%", "`100%` is no probability", None),
    ("range 20 to 10 at 80%", "from 20 to 10", "range 10 to 20 at 80%"),
    ("ends above " + "9" * 400, "is too large", None),
    ("ends higher by " + "9" * 400 + "%", "is too large", None),
]


@pytest.mark.parametrize(("text", "told", "offered"), FAULTS)
def test_a_fault_names_the_word_and_offers_a_phrase(text, told, offered):
    fault = fault_of(text)
    assert told in fault.message
    assert fault.hint
    assert str(fault) == fault.message
    phrases = [phrase for phrase in phrases_in(fault.hint) if " " in phrase]
    for phrase in phrases:
        parse_claim(phrase)
    if offered is not None:
        assert offered in phrases


WORDS = sorted({w for kind in KINDS.values() for w in kind.form.split() if "{" not in w})


@given(
    st.lists(
        st.one_of(
            st.sampled_from(WORDS),
            st.from_regex(r"[+-]?\d{1,3}([.,]\d{1,3})?(%|pt|bp|pp)?", fullmatch=True),
            st.text(max_size=6),
        ),
        max_size=7,
    ).map(" ".join)
)
def test_whatever_is_typed_is_a_claim_or_a_fault_with_a_legal_phrase(text):
    fault, claim = None, None
    try:
        claim = parse_claim(text)
    except PhraseError as raised:
        fault = raised
    if claim is not None:
        assert parse_claim(print_claim(claim)) == claim
        return
    assert fault.message
    # a word of the text may hold a backtick itself, and would be taken for a phrase
    for phrase in [] if "`" in text else phrases_in(fault.hint):
        if " " in phrase:
            parse_claim(phrase)


def unit_fault(text, kind):
    return unit_faults(parse_claim(text), kind, BOOK.instrument_kinds[kind])


@pytest.mark.parametrize(
    ("text", "kind"),
    [
        ("ends higher by 5%", "share"),
        ("ends higher by 5pt", "index"),
        ("ends above 100", "share"),
        ("ends above 0.0001", "coin"),
        ("ends higher by 0.5pp", "yield"),
        ("ends lower by 25bp", "yield"),
        ("ends above -0.5", "yield"),
        ("ends below 0", "yield"),
        ("not a call: no date", "share"),
        ("ends higher", "yield"),
        ("volatility above 20%", "yield"),
    ],
)
def test_units_that_fit(text, kind):
    assert unit_fault(text, kind) is None


@pytest.mark.parametrize(
    ("text", "kind", "message", "hint"),
    [
        (
            "ends higher by 10%",
            "yield",
            "`10%` of a yield has two readings: 10 percentage points, or 10 percent of its "
            "value (at 4.00 that is 40bp)",
            "Write `10pp` for the first, or the second in basis points, such as `40bp`.",
        ),
        (
            "ends higher by 25bp",
            "share",
            "a share does not move in `bp`",
            "Write `25%` or `25pt`.",
        ),
        ("rises 1pp", "index", "an index does not move in `pp`", "Write `1%` or `1pt`."),
        ("falls 3pt", "yield", "a yield does not move in `pt`", "Write `3pp` or `3bp`."),
        (
            "ends above 0",
            "share",
            "the level 0 cannot be a price of a share",
            "Write a level above zero.",
        ),
        (
            "touches -5",
            "pair",
            "the level -5 cannot be a price of a pair",
            "Write a level above zero.",
        ),
        (
            "ends between -1 and 5",
            "fund",
            "the level -1 cannot be a price of a fund",
            "Write a level above zero.",
        ),
    ],
)
def test_units_that_do_not_fit(text, kind, message, hint):
    fault = unit_fault(text, kind)
    assert (fault.message, fault.hint) == (message, hint)
