"""Exact tails of a long record against the plain recursion on lists, in the same run."""

import time

import numpy as np
import pytest

from foresaid.score.poisson_binomial import poisson_binomial_tails

N_CALLS, HITS = 6_600, 3_900


def _tail_by_lists(hits, chances):
    """The recursion over calls, as anyone would write it without arrays."""
    terms = [1.0]
    for chance in chances:
        miss = 1.0 - chance
        stayed, moved = [*terms, 0.0], [0.0, *terms]
        terms = [a * miss + b * chance for a, b in zip(stayed, moved, strict=True)]
    return sum(reversed(terms[hits:]))


def _best(function, repeats):
    best, result = float("inf"), None
    for _ in range(repeats):
        begin = time.perf_counter()
        result = function()
        best = min(best, time.perf_counter() - begin)
    return best, result


def test_tail_of_6600_calls_against_lists(benchmark):
    chances = np.random.default_rng(66).uniform(0.2, 0.85, N_CALLS)
    listed = chances.tolist()
    slow, expected = _best(lambda: _tail_by_lists(HITS, listed), repeats=2)
    fast, found = _best(lambda: poisson_binomial_tails(HITS, chances).upper, repeats=50)
    assert found == pytest.approx(expected, rel=1e-12)
    benchmark.extra_info["ratio"] = slow / fast
    benchmark(poisson_binomial_tails, HITS, chances)
    assert slow / fast >= 250, f"only {slow / fast:.0f} times faster"
