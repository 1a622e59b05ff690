import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from foresaid.claims.bounds import BoundKernel, at_any_time, at_deadline, extreme_of, on_closes
from foresaid.claims.kernels import Bound, Kernel, On, Over
from foresaid.claims.registry import KINDS
from support.windows import TOLERANCE, bars_from, coarse_bars, windows_from, windows_in

BOUNDED = sorted(name for name, kind in KINDS.items() if isinstance(kind.kernel, BoundKernel))
BOUNDS = [
    Bound(side, strict=strict, over=over, on=on)
    for side in (1, -1, 0)
    for strict in (True, False)
    for over in Over
    for on in On
]


def with_inverse(names):
    kinds = [KINDS[name] for name in names]
    return kinds + [kind.inverse for kind in kinds if kind.inverse is not None]


def slow(bound, bars, windows, i, mark):
    """Return hit, deciding position and the price looked at, session by session."""
    reference = bars.close[windows.reference[i]]
    additive = bool(windows.additive[i])
    limit = reference + mark if additive else reference * mark
    slack = TOLERANCE * max(abs(limit), abs(reference))
    side = bound.side or (1 if mark >= (0.0 if additive else 1.0) else -1)

    def meets(price):
        near = abs(price - limit) <= slack
        beyond = (price - limit) * side > 0
        return beyond and not near if bound.strict else beyond or near

    first, last = int(windows.first[i]), int(windows.last[i])
    if bound.over is Over.END:
        return meets(bars.close[last]), last, bars.close[last]
    prices = bars.close
    if bound.on is On.RANGE:
        wants_high = (side > 0) == (bound.over is Over.ANY)
        prices = bars.high if wants_high else bars.low
    stops = bound.over is Over.ANY
    for at in range(first, last + 1):
        if meets(prices[at]) == stops:
            return stops, at, prices[at]
    return not stops, last, None


marks = st.sampled_from([0.9, 0.95, 0.97, 0.98, 0.99, 1.0, 1.01, 1.02, 1.03, 1.05, 1.1])
points = st.sampled_from([-5.0, -3.0, -2.0, -1.0, 0.0, 1.0, 2.0, 3.0, 5.0])


@given(st.data(), st.sampled_from(BOUNDS), st.booleans())
def test_one_bound_against_a_loop(data, bound, additive):
    bars = data.draw(coarse_bars())
    windows = data.draw(windows_in(bars, additive=additive))
    n = len(windows)
    own = data.draw(st.lists(points if additive else marks, min_size=n, max_size=n))
    judged = BoundKernel((bound,)).judge(bars, windows, np.array(own)[:, None], TOLERANCE)
    for i in range(n):
        hit, decided, value = slow(bound, bars, windows, i, own[i])
        assert (bool(judged.hit[i]), int(judged.decided[i])) == (hit, decided)
        if value is not None:
            assert judged.value[i] == value
        reference = bars.close[windows.reference[i]]
        move = judged.value[i] - reference
        assert judged.measured[i] == pytest.approx(move if additive else move / reference)
        stopped_early = {Over.ANY: hit, Over.ALL: not hit, Over.END: False}[bound.over]
        assert bool(judged.final[i]) == stopped_early


@given(st.data(), st.sampled_from(BOUNDS))
def test_what_is_final_stays_so_in_every_longer_window(data, bound):
    bars = data.draw(coarse_bars())
    windows = data.draw(windows_in(bars))
    own = np.full((len(windows), 1), data.draw(marks))
    kernel = BoundKernel((bound,))
    judged = kernel.judge(bars, windows, own, TOLERANCE)
    full = windows_from(
        windows.reference, windows.first, np.full(len(windows), len(bars.day) - 1)
    )
    later = kernel.judge(bars, full, own, TOLERANCE)
    for i in np.flatnonzero(judged.final):
        assert later.hit[i] == judged.hit[i]
        assert later.decided[i] == judged.decided[i]


@pytest.mark.parametrize("kind", with_inverse(sorted(KINDS)), ids=lambda k: k.form)
@settings(max_examples=15)
@given(data=st.data())
def test_hits_and_judge_and_outcomes_agree_for_every_kind(kind, data):
    bars = data.draw(coarse_bars())
    additive = data.draw(st.booleans())
    windows = data.draw(windows_in(bars, additive=additive))
    one = st.tuples(*[points if additive else marks] * len(kind.marks))
    if kind.loss in ("pinball", "ranked"):
        parts = data.draw(st.integers(2, 9))
        one = st.tuples(
            *[st.sampled_from([0.1, 0.25, 0.4]), points if additive else marks] * parts
        )
    elif kind.loss == "interval":
        one = st.tuples(*[points if additive else marks] * 2, st.just(0.8))
    elif any(mark.role == "share" for mark in kind.marks):
        one = st.tuples(st.sampled_from([0.05, 0.2, 0.4, 0.8]))
    several = np.array(data.draw(st.lists(one, min_size=1, max_size=4)))
    if kind.loss == "ranked":
        several = several[:, :-1]  # the last bin has no edge
    table = kind.kernel.outcomes(bars, windows, several, TOLERANCE)
    assert table.shape == (len(several), len(windows))
    assert table.dtype == bool
    by_loop = Kernel.outcomes(kind.kernel, bars, windows, several, TOLERANCE)
    assert (table == by_loop).all()
    for row, outcome in zip(several, table, strict=True):
        own = np.broadcast_to(row, (len(windows), len(row)))
        judged = kind.kernel.judge(bars, windows, own, TOLERANCE)
        assert (judged.hit == kind.kernel.hits(bars, windows, own, TOLERANCE)).all()
        assert (judged.hit == outcome).all()
        assert (judged.decided >= windows.first).all()
        assert (judged.decided <= windows.last).all()


@pytest.mark.parametrize("name", sorted(KINDS))
def test_every_kind_judges_no_windows(name):
    kind, bars = KINDS[name], bars_from([1.0, 2.0])
    none = windows_from([], [], [])
    own = np.zeros((0, len(kind.marks)))
    assert len(kind.kernel.judge(bars, none, own, TOLERANCE).hit) == 0
    assert len(kind.kernel.hits(bars, none, own, TOLERANCE)) == 0
    assert kind.kernel.outcomes(bars, none, np.ones((2, len(kind.marks))), TOLERANCE).shape == (
        2,
        0,
    )


@given(st.data())
def test_two_bounds_hold_where_both_hold_and_the_first_failure_decides(data):
    bars = data.draw(coarse_bars())
    windows = data.draw(windows_in(bars))
    over = data.draw(st.sampled_from(Over))
    both = (
        Bound(1, strict=False, over=over, mark=0),
        Bound(-1, strict=False, over=over, mark=1),
    )
    own = np.broadcast_to(np.array([0.98, 1.02]), (len(windows), 2))
    judged = BoundKernel(both).judge(bars, windows, own, TOLERANCE)
    apart = [BoundKernel((one,)).judge(bars, windows, own, TOLERANCE) for one in both]
    for i in range(len(windows)):
        assert judged.hit[i] == (apart[0].hit[i] and apart[1].hit[i])
        failed = [int(one.decided[i]) for one in apart if not one.hit[i]]
        expected = min(failed) if failed else max(int(one.decided[i]) for one in apart)
        assert judged.decided[i] == expected


@given(st.data(), st.booleans())
def test_extremes_against_slices(data, largest):
    bars = data.draw(coarse_bars())
    windows = data.draw(windows_in(bars))
    found = extreme_of(bars.close, windows.first, windows.last, largest=largest)
    best = max if largest else min
    pairs = zip(windows.first, windows.last, strict=True)
    assert found.tolist() == [best(bars.close[a : b + 1].tolist()) for a, b in pairs]


@pytest.mark.parametrize(
    ("close", "tie", "hit"),
    [(101.0, True, False), (101.0 + 1e-9, True, False), (101.1, False, True)],
)
def test_a_tie_is_an_equal_price_that_fails_a_strict_bound(close, tie, hit):
    bars, windows = bars_from([100.0, close]), windows_from([0], [1], [1])
    bound = Bound(1, strict=True, over=Over.END)
    judged = BoundKernel((bound,)).judge(bars, windows, np.array([[1.01]]), TOLERANCE)
    assert (judged.tie.tolist(), judged.hit.tolist()) == ([tie], [hit])
    loose = BoundKernel((Bound(1, strict=False, over=Over.END),))
    judged = loose.judge(bars, windows, np.array([[1.01]]), TOLERANCE)
    assert (judged.tie.tolist(), judged.hit.tolist()) == ([False], [True])


@pytest.mark.parametrize(
    ("mark", "unsound"), [(1.0, True), (1.0 + 1e-10, True), (1.001, False)]
)
def test_a_level_at_the_reference_has_no_side(mark, unsound):
    bars, windows = bars_from([100.0, 101.0]), windows_from([0], [1], [1])
    kernel = BoundKernel((Bound(0, strict=False, over=Over.ANY, on=On.RANGE),))
    ((mask, reason, _result),) = kernel.unsound(bars, windows, np.array([[mark]]), TOLERANCE)
    assert (mask.tolist(), reason) == ([unsound], "the level is the reference price")
    sided = BoundKernel((Bound(1, strict=False, over=Over.ANY),))
    assert sided.unsound(bars, windows, np.array([[mark]]), TOLERANCE) == []


def test_other_readings_of_a_kernel():
    kernel = BoundKernel((Bound(1, strict=True, over=Over.ALL, on=On.RANGE, mark=1),))
    (end,), (any_time,), (closes,) = (
        change(kernel).bounds for change in (at_deadline, at_any_time, on_closes)
    )
    assert end == Bound(1, strict=True, over=Over.END, on=On.CLOSE, mark=1)
    assert any_time == Bound(1, strict=True, over=Over.ANY, on=On.RANGE, mark=1)
    assert closes == Bound(1, strict=True, over=Over.ALL, on=On.CLOSE, mark=1)
