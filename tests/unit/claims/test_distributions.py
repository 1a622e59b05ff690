import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from foresaid.claims.claim import PhraseError
from foresaid.claims.distribution_kernels import BinsKernel, bin_of
from foresaid.claims.phrases import parse_claim, print_claim, stated_probability
from foresaid.claims.registry import KINDS
from support.phrases import distributions, phrases_in
from support.windows import TOLERANCE, bars_from, marks_of, windows_from

QUANTILES, BINS = KINDS["quantiles"], KINDS["bins"]


@pytest.mark.parametrize(
    ("typed", "canonical", "stated"),
    [
        ("quantiles 10%=A", None, None),
        ("Quantiles 10%=4,800, 90 % = 5,300.5", "quantiles 10%=4800, 90%=5300.5", 0.8),
        ("quantiles 5%=-1,50%=0,95%=1", "quantiles 5%=-1, 50%=0, 95%=1", 0.9),
        ("quantiles 25%=1,200,75%=1,400", "quantiles 25%=1200, 75%=1400", 0.5),
        ("bins <98: 20%, 98 to 102: 50%, >102: 30%", None, 0.5),
        (
            "BINS <98:20%,98 TO 102:50%,>102:30%",
            "bins <98: 20%, 98 to 102: 50%, >102: 30%",
            0.5,
        ),
        ("bins <98: 40%, 98 to 102: 20%, >102: 40%", None, 0.8),
        ("bins < 1,000: 35 %, > 1,000: 65 %", "bins <1000: 35%, >1000: 65%", 0.65),
    ],
)
def test_phrases_are_read_and_printed(typed, canonical, stated):
    if stated is None:
        with pytest.raises(PhraseError):
            parse_claim(typed)
        return
    claim = parse_claim(typed)
    assert print_claim(claim) == (canonical or typed)
    assert parse_claim(print_claim(claim)) == claim
    assert stated_probability(claim) == pytest.approx(stated, abs=1e-12)


@pytest.mark.parametrize(
    ("typed", "message"),
    [
        ("quantiles", "stops after"),
        ("quantiles 10%=95", "1 part"),
        ("quantiles 10%=95, 90=105", "`90=105` is no quantile"),
        ("quantiles 90%=95, 10%=105", "percentages do not rise: 90 comes before 10"),
        ("quantiles 10%=105, 90%=95", "levels do not rise: 105 comes before 95"),
        ("quantiles 10%=95, 90%=95", "levels do not rise: 95 comes before 95"),
        ("quantiles 0%=95, 90%=105", "above 0%"),
        ("quantiles 10%=95, 100%=105", "`100%` is no share"),
        ("quantiles 10%=95, 90%=x5", "`x5` is not a number"),
        ("quantiles " + ", ".join(f"{i}%={i}" for i in range(1, 11)), "10 parts"),
        ("bins <98: 20%, 98 to 102: 50%, >102: 20%", "add up to 90, not to 100"),
        ("bins <98: 20%, 99 to 102: 50%, >102: 30%", "does not begin at 98"),
        ("bins 98 to 102: 50%, >102: 50%", "out of place"),
        ("bins <98: 50%, 98 to 102: 50%", "out of place"),
        ("bins <98: 50%, <102: 50%", "out of place"),
        ("bins <98: 20%, 98 to 97: 50%, >97: 30%", "edges do not rise"),
        ("bins <98: 20, >98: 80", "`<98: 20` is no bin"),
    ],
)
def test_faults_say_what_is_wrong_and_what_to_write(typed, message):
    with pytest.raises(PhraseError, match=message.replace("(", r"\(")) as caught:
        parse_claim(typed)
    for phrase in phrases_in(caught.value.hint):
        assert parse_claim(phrase).is_call


def at(close, phrase, kind, *, additive=False):
    bars, windows = bars_from([100.0, close]), windows_from([0], [1], [1], additive=additive)
    marks = marks_of(kind, phrase, bars, windows)
    return bars, windows, marks, kind.kernel.judge(bars, windows, marks, TOLERANCE)


@pytest.mark.parametrize(
    ("close", "hit"),
    [(94.9, False), (95.0, True), (101.0, True), (104.0, True), (104.1, False)],
)
@pytest.mark.parametrize("additive", [False, True])
def test_quantiles_hit_between_the_outer_ones(close, hit, additive):
    phrase = "quantiles 10%=95, 50%=101, 90%=104"
    *_, judged = at(close, phrase, QUANTILES, additive=additive)
    assert judged.hit.tolist() == [hit]


@pytest.mark.parametrize(
    ("close", "into"),
    [(97.0, 0), (98.0, 1), (100.0, 1), (100.1, 2), (102.0, 2), (102.1, 3), (98.0 - 1e-12, 1)],
)
@pytest.mark.parametrize("additive", [False, True])
def test_edges_belong_to_inner_bins_and_to_the_lower_of_two(close, into, additive):
    phrase = "bins <98: 10%, 98 to 100: 40%, 100 to 102: 40%, >102: 10%"
    bars, windows, marks, judged = at(close, phrase, BINS, additive=additive)
    assert bin_of(bars, windows, marks, TOLERANCE).tolist() == [into]
    assert judged.hit.tolist() == [into in (1, 2)]


def test_the_edge_of_two_bins_belongs_to_the_upper():
    *_, judged = at(98.0, "bins <98: 40%, >98: 60%", BINS)
    assert judged.hit.tolist() == [True]


def test_a_narrow_claim_beside_a_wide_one_ignores_what_it_has_not():
    wide = np.array(
        [[0.2, 0.98, 0.5, 1.02, 0.3, np.nan], [0.4, 1.0, 0.6, np.nan, np.nan, np.nan]]
    )
    bars, windows = bars_from([100.0, 103.0]), windows_from([0, 0], [1, 1], [1, 1])
    assert bin_of(bars, windows, wide, TOLERANCE).tolist() == [2, 1]
    assert BinsKernel().judge(bars, windows, wide, TOLERANCE).hit.tolist() == [False, True]


@given(st.data(), st.integers(-60, 9000), st.booleans())
def test_every_price_falls_into_the_bin_a_loop_finds(data, close, additive):
    numbers = [one.value for one in data.draw(distributions(bins=True))]
    shares, edges = numbers[0::2], numbers[1::2]
    into = 0
    for i, edge in enumerate(edges):
        into += close >= edge if i == 0 else close > edge
    bars = bars_from([100.0, float(close)])
    windows = windows_from([0], [1], [1], additive=additive)
    marks = np.array(numbers) / 100.0
    marks[1::2] = np.array(edges) - 100.0 if additive else np.array(edges) / 100.0
    assert bin_of(bars, windows, marks[None, :], TOLERANCE).tolist() == [into]
    judged = BINS.kernel.judge(bars, windows, marks[None, :], TOLERANCE)
    assert judged.hit[0] == (shares[into] == max(shares))
