"""Scores of simulated records, by the functions of the product, joined as the pipeline does."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from foresaid.chance.field import field_test, timing_test
from foresaid.chance.null_worlds import Field, ShiftRules, null_worlds
from foresaid.chance.per_call import chances
from foresaid.chance.volatility import rolling_volatility
from foresaid.model.codebook import default_codebook
from foresaid.score.e_process import TimedCalls, e_process
from foresaid.score.record import Record, is_long_enough, is_one_sided
from foresaid.score.scoreboard import score_record
from foresaid.score.verdict import AHEAD, AHEAD_ALONE, BEHIND, BEHIND_ALONE, Shifted
from support.no_skill import TOLERANCE, calls_in, many_bars

DEFAULT = default_codebook()
# no verdict depends on the edge; with this one no number of calls that is needed is worked out
BOOK = replace(DEFAULT, verdict=replace(DEFAULT.verdict, edge=1.0))
LEVEL = BOOK.verdict.level
TESTS = ("coin", "base", "pt", "timing", "timing_low", "field", "field_low", "verdict",
         "alone", "verdict_low", "alone_low", "watched", "watched_low")  # fmt: skip


def scored(bars, calls, chance, size, *, shift_marks="ratio", watch=True):
    """Return the p-value of each test for each forecaster, shape (tests, size).

    The pieces are joined as the pipeline joins them. A verdict is 0 where it is given, else 1.
    Where a test has no answer the p-value is 1.
    """
    records = [record_of(calls, chance, calls.record == i) for i in range(size)]
    shifted = hurdles(bars, calls, records, shift_marks)
    result = np.ones((len(TESTS), size))
    for number, record in enumerate(records):
        score = score_record(record, BOOK, shifted[number])
        own = calls.record == number
        where = shifted[number]
        words = score.verdict
        values = {
            "coin": score.p_coin,
            "base": score.p_base,
            "pt": score.p_pesaran_timmermann,
            "timing": score.p_timing,
            "timing_low": score.p_timing_low,
            "field": None if where is None else where.p_field,
            "field_low": None if where is None else where.p_field_low,
            "verdict": float(words != AHEAD),
            "alone": float(words not in (AHEAD, AHEAD_ALONE)),
            "verdict_low": float(words != BEHIND),
            "alone_low": float(words not in (BEHIND, BEHIND_ALONE)),
            "watched": watched(calls, chance, own, "upper") if watch else None,
            "watched_low": watched(calls, chance, own, "lower") if watch else None,
        }
        result[:, number] = [1.0 if values[t] is None else values[t] for t in TESTS]
    return result


def record_of(calls, chance, own):
    n = int(own.sum())
    nothing = np.full(n, np.nan)
    stated = np.where(calls.turned[own], 0.1, nothing)
    return Record(
        came_true=calls.came_true[own],
        leans_against=calls.turned[own],
        chance=chance[own],
        probability_low=stated,
        probability_high=stated,
        instrument=calls.starts.instrument[own],
        start=calls.begin[own],
        end=calls.end[own],
        direction=calls.direction[own],
        went=calls.moved[own],
        weight=np.ones(n),
    )


def hurdles(bars, calls, records, shift_marks="ratio"):
    """Return where each record stands among its shifts and in the field."""
    size = len(records)
    volatility = None
    if shift_marks == "volatility":
        volatility = rolling_volatility(
            bars,
            np.zeros(len(bars.symbols), dtype=bool),
            sessions=BOOK.chance.volatility_sessions,
            minimum=BOOK.chance.volatility_minimum,
        )
    rules = ShiftRules(TOLERANCE, BOOK.chance.shift_span, volatility)
    field = Field(calls.starts, calls.right, calls.turned, calls.record)
    worlds = null_worlds(calls.groups(), bars, field, rules)
    counts = np.zeros((size, worlds.n_shifts), dtype=np.int32)
    counts[: len(worlds.counts)] = worlds.counts
    n_calls = np.zeros(size, dtype=np.int64)
    n_calls[: len(worlds.n_calls)] = worlds.n_calls
    ranked = np.array([is_long_enough(r, BOOK) and not is_one_sided(r) for r in records])
    members = np.flatnonzero(ranked & (n_calls > 0))
    timing = timing_test(counts)
    joint = field_test(counts[members], timing_test(counts[members]))
    place = {int(group): at for at, group in enumerate(members)}
    result = []
    for i in range(size):
        at = place.get(i)
        result.append(
            None
            if not n_calls[i]
            else Shifted(
                n=int(n_calls[i]),
                hits=int(timing.hits[i]),
                mean=float(timing.mean[i]),
                deviation=float(timing.deviation[i]),
                p_upper=float(timing.p_upper[i]),
                p_lower=float(timing.p_lower[i]),
                best_upper=float(timing.best_upper[i]),
                best_lower=float(timing.best_lower[i]),
                shifts=worlds.n_shifts,
                p_field=None if at is None else float(joint.p_upper[at]),
                p_field_low=None if at is None else float(joint.p_lower[at]),
                field_size=joint.n_records,
            )
        )
    return result


def watched(calls, chance, own, side):
    """Return 1 over the largest e-value over the whole record, a p-value at any time."""
    rows = np.flatnonzero(own & np.isfinite(chance))
    if not len(rows):
        return 1.0
    timed = TimedCalls(
        starts=calls.begin[rows],
        ends=calls.end[rows],
        chances=np.where(calls.turned, 1 - chance, chance)[rows],
        right=calls.right[rows],
        settled=np.ones(len(rows), dtype=bool),
    )
    return 1.0 / e_process(timed, as_of=int(timed.ends.max()), level=LEVEL, side=side).peak


def p_values(seed, market, style, worlds, *, fields=None, shift_marks="ratio"):
    """Yield for each world the p-values of ``scored``, one array a size of field."""
    bars_of_worlds = many_bars(seed, market, max(style.spans))
    for world in range(worlds):
        bars = next(bars_of_worlds)
        rng = np.random.default_rng([seed, 1, world])
        calls = calls_in(rng, bars, market, style)
        chance = chances(calls.groups(), bars, calls.starts, BOOK.chance, TOLERANCE).chance
        found = []
        for size in fields or (style.size,):
            rows = np.flatnonzero(calls.record < size)
            watch = size == style.size
            found.append(
                scored(
                    bars,
                    calls.take(rows),
                    chance[rows],
                    size,
                    shift_marks=shift_marks,
                    watch=watch,
                )
            )
        yield found
