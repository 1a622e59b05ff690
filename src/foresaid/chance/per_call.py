"""The chance of each call: its base rate, with a volatility model where history is short."""

from __future__ import annotations

from dataclasses import dataclass, fields, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from foresaid.chance.base_rate import BaseRate, Starts, base_rates
from foresaid.chance.simulation import draw_steps, simulated_chance
from foresaid.chance.volatility import (
    has_closed_form,
    modelled_chance,
    rolling_volatility,
)

if TYPE_CHECKING:
    from collections.abc import Sequence

    from foresaid.claims.kind import Kind
    from foresaid.model.bars import Bars, BoolArray, FloatArray, IntArray
    from foresaid.model.codebook import ChanceRules

HISTORY, BLEND, MODEL, NOTHING = (
    "history",
    "history and volatility",
    "volatility",
    "none",
)


@dataclass(frozen=True)
class Chances:
    """The chance of each call with no forecaster; arrays (n,).

    Attributes
    ----------
    chance : ndarray of float
        As a fraction, NaN where there is none.
    model : ndarray of str
        What it rests on: history, history and volatility, volatility, or none.
    windows, hits, disjoint : ndarray of int
        Earlier starts, how many came true, and how many of them do not overlap.
    deviation : ndarray of float
        Standard deviation of a session's move before publication, NaN where unknown.
    modelled : ndarray of float
        The volatility model's chance, NaN where there is none.
    """

    chance: FloatArray
    model: np.ndarray[Any, np.dtype[np.object_]]
    windows: IntArray
    hits: IntArray
    disjoint: IntArray
    deviation: FloatArray
    modelled: FloatArray


def chances(
    groups: Sequence[tuple[Kind, IntArray]],
    bars: Bars,
    starts: Starts,
    rules: ChanceRules,
    tolerance: float,
) -> Chances:
    """Return the chance of each call.

    Parameters
    ----------
    groups : sequence of (Kind, ndarray of int)
        The kinds, each with its rows of ``starts``; rows in no group get no chance.
    bars : Bars
        Prices; only those before each call's reference are looked at.
    starts : Starts
        The n calls.
    rules : ChanceRules
        The codebook's numbers.
    tolerance : float
        Two prices this near each other, as a part of their size, are equal.

    Returns
    -------
    Chances
        Shape (n,).

    Notes
    -----
    With ``m`` disjoint earlier windows and ``enough`` of them in the codebook the chance is
    ``w f + (1 - w) v``, where ``f`` is the share of earlier starts that came true, ``v`` the
    volatility model's chance and ``w = min(1, m / enough)``. A claim that never (always) came
    true from ``k`` starts has ``f = 1 / (k + 2)`` (``(k + 1) / (k + 2)``), Laplace's rule of
    succession, so that no call is ever given a chance of nought or one.
    """
    n = len(starts.reference)
    deviation = _deviation(bars, starts, rules)
    modelled = np.full(n, np.nan)
    counts = BaseRate(*(np.zeros(n, dtype=np.int64) for _ in fields(BaseRate)))
    for kind, rows in groups:
        part = starts.take(rows)
        found = base_rates(kind.kernel, len(kind.marks), bars, part, tolerance)
        for field in fields(BaseRate):
            getattr(counts, field.name)[rows] = getattr(found, field.name)
        walk = _Model(bars, part, deviation[rows], found.disjoint < rules.enough_windows)
        modelled[rows] = walk.chance(kind, rules)
    bounded = np.clip(modelled, rules.modelled_floor, 1.0 - rules.modelled_floor)
    chance, model = combine(counts, bounded, enough=rules.enough_windows)
    return Chances(
        chance, model, counts.windows, counts.hits, counts.disjoint, deviation, bounded
    )


@dataclass(frozen=True)
class _Model:
    """The volatility model for the calls of one kind; ``is_short`` where it is needed."""

    bars: Bars
    starts: Starts
    deviation: FloatArray
    is_short: BoolArray

    def chance(self, kind: Kind, rules: ChanceRules) -> FloatArray:
        """Return the chances in closed form, by simulation where there is none."""
        starts, bounds = self.starts, kind.kernel.bounds
        has_range = self.bars.has_range[np.maximum(starts.reference - 1, 0)]
        result = modelled_chance(
            bounds,
            starts.marks,
            additive=starts.additive,
            deviation=self.deviation,
            n_sessions=expected_sessions(self.bars, starts),
            has_range=has_range,
        )
        closed = has_closed_form(
            bounds, starts.marks, additive=starts.additive, has_range=has_range
        )
        open_form = replace(self, is_short=self.is_short & ~closed)
        return np.where(closed, result, open_form._by_simulation(kind, rules))

    def _by_simulation(self, kind: Kind, rules: ChanceRules) -> FloatArray:
        """Return the chances by simulation, only where history is short."""
        result = np.full(len(self.deviation), np.nan)
        rows = np.flatnonzero(self.is_short)
        if len(rows) and not kind.kernel.needs_legs:
            lengths = expected_sessions(self.bars, self.starts)[rows]
            steps = draw_steps(
                np.random.default_rng(rules.walks_seed),
                paths=rules.walks,
                sessions=round(float(lengths.max())),
            )
            result[rows] = simulated_chance(
                kind.kernel,
                self.starts.marks[rows, : len(kind.marks)],
                additive=self.starts.additive[rows],
                deviation=self.deviation[rows],
                n_sessions=lengths,
                steps=steps,
            )
        return result


def combine(
    counts: BaseRate, modelled: FloatArray, *, enough: int
) -> tuple[FloatArray, np.ndarray[Any, np.dtype[np.object_]]]:
    """Return the chance and what it rests on; see ``chances`` for the formula."""
    k, h = counts.windows, counts.hits
    share = h / np.maximum(k, 1)
    share = np.where(h == 0, 1.0 / (k + 2), np.where(h == k, (k + 1) / (k + 2), share))
    weight = np.where(k > 0, np.minimum(1.0, counts.disjoint / enough), 0.0)
    has_model = np.isfinite(modelled)
    blend = weight * share + (1.0 - weight) * np.where(has_model, modelled, 0.0)
    chance = np.where(weight >= 1.0, share, np.where(has_model, blend, np.nan))
    model = np.full(len(k), NOTHING, dtype=object)
    model[has_model] = MODEL
    model[has_model & (weight > 0)] = BLEND
    model[weight >= 1.0] = HISTORY
    return chance, model


def expected_sessions(bars: Bars, starts: Starts) -> FloatArray:
    """Return how many sessions a window holds, by the pace of the history before it.

    Shape (n,); at least 1. A span in days is scaled by the sessions per day before
    publication.
    """
    floor = bars.offsets[starts.instrument]
    before = np.maximum(starts.reference - 1, floor)
    days = np.maximum(bars.day[before] - bars.day[floor], 1)
    pace = np.where(starts.in_sessions, 1.0, np.maximum(before - floor, 1) / days)
    return np.maximum(starts.span * pace, 1.0)


def _deviation(bars: Bars, starts: Starts, rules: ChanceRules) -> FloatArray:
    """Return the volatility known at publication: up to the session before the reference."""
    additive = np.zeros(len(bars.symbols), dtype=bool)
    additive[starts.instrument] = starts.additive
    rolling = rolling_volatility(
        bars, additive, sessions=rules.volatility_sessions, minimum=rules.volatility_minimum
    )
    before = starts.reference - 1
    has_history = before >= bars.offsets[starts.instrument]
    values = rolling[np.maximum(before, 0)] if len(rolling) else np.zeros(len(before))
    return np.where(has_history, values, np.nan)
