import numpy as np
import pytest

from foresaid.chance.shifts import ShiftedHits


def block(**changed):
    """Two signatures over six sessions, the second with a cycle of its own, three calls."""
    given = {
        "outcomes": np.array([[1, 0, 0, 1, 1, 0], [9, 1, 0, 1, 9, 9]], dtype=np.uint8),
        "low": np.array([0, 1]),
        "cycle": np.array([6, 3]),
        "record": np.array([0, 1, 1]),
        "signature": np.array([0, 0, 1]),
        "start": np.array([0, 4, 2]),
    }
    return given | changed


def counted(n_records=2, n_shifts=6, **changed):
    hits = ShiftedHits(n_records, n_shifts)
    given = block(**changed)
    hits.add(given.pop("outcomes"), **given)
    return hits.counts


def random_block(rng, *, m, sessions, calls, records):
    low = rng.integers(0, sessions // 3, m)
    cycle = rng.integers(1, sessions - low + 1)
    signature = rng.integers(0, m, calls)
    return {
        "outcomes": rng.integers(0, 2, (m, sessions), dtype=np.uint8),
        "low": low,
        "cycle": cycle,
        "record": rng.integers(0, records, calls),
        "signature": signature,
        "start": low[signature] + rng.integers(0, cycle[signature]),
    }


def rolled(given, n_records, n_shifts):
    """The same counts by turning each signature's own cycle call by call."""
    result = np.zeros((n_records, n_shifts), dtype=np.int64)
    for who, row, start in zip(
        given["record"], given["signature"], given["start"], strict=True
    ):
        low, cycle = given["low"][row], given["cycle"][row]
        own = np.roll(given["outcomes"][row, low : low + cycle], low - start)
        result[who] += np.resize(own, n_shifts)
    return result


def test_by_hand():
    # first record: the row from session 0 on; second: the row from session 4 on, with wrap,
    # and 0, 1, 1 of the short cycle, twice
    assert counted().tolist() == [[1, 0, 0, 1, 1, 0], [1, 1, 2, 0, 1, 2]]


def test_shift_nought_is_the_record_itself():
    given = random_block(np.random.default_rng(5), m=40, sessions=30, calls=500, records=7)
    observed = given["outcomes"][given["signature"], given["start"]]
    expected = np.bincount(given["record"], weights=observed, minlength=7)
    assert (counted(7, 30, **given)[:, 0] == expected).all()


@pytest.mark.parametrize("n_shifts", [1, 7, 50, 333])
def test_fewer_and_more_shifts_than_a_cycle_is_long(n_shifts):
    given = random_block(np.random.default_rng(6), m=30, sessions=50, calls=400, records=9)
    assert (counted(9, n_shifts, **given) == rolled(given, 9, n_shifts)).all()


def test_more_hits_than_a_byte_holds():
    calls = 3_000
    found = counted(
        1,
        4,
        outcomes=np.ones((1, 4), dtype=np.uint8),
        low=np.array([0]),
        cycle=np.array([4]),
        record=np.zeros(calls, dtype=np.int64),
        signature=np.zeros(calls, dtype=np.int64),
        start=np.arange(calls) % 4,
    )
    assert found.dtype == np.int32
    assert found.tolist() == [[calls] * 4]


def test_a_calendar_longer_than_is_gathered_at_once():
    sessions = 700_000
    row = np.random.default_rng(7).integers(0, 2, (1, sessions), dtype=np.uint8)
    found = counted(
        1,
        sessions,
        outcomes=row,
        low=np.array([0]),
        cycle=np.array([sessions]),
        record=np.array([0, 0]),
        signature=np.array([0, 0]),
        start=np.array([0, 10]),
    )
    assert (found[0] == row[0].astype(int) + np.roll(row[0], -10)).all()


def test_second_opinion_by_the_fourier_transform():
    rng = np.random.default_rng(8)
    sessions = 210
    row = rng.integers(0, 2, (1, sessions), dtype=np.uint8)
    start = rng.integers(0, sessions, 900)
    found = counted(
        1,
        sessions,
        outcomes=row,
        low=np.array([0]),
        cycle=np.array([sessions]),
        record=np.zeros(900, dtype=np.int64),
        signature=np.zeros(900, dtype=np.int64),
        start=start,
    )
    made = np.bincount(start, minlength=sessions)
    correlated = np.fft.irfft(np.fft.rfft(row[0]) * np.fft.rfft(made).conj(), sessions)
    assert (found[0] == np.rint(correlated)).all()


def test_blocks_in_any_order_and_counters_added_give_the_same():
    rng = np.random.default_rng(9)
    given = random_block(rng, m=90, sessions=40, calls=700, records=6)
    whole = counted(6, 40, **given)
    shared, others = ShiftedHits(6, 40), []
    for begin in (60, 0, 30):
        mine = (given["signature"] >= begin) & (given["signature"] < begin + 30)
        part = {name: given[name][mine] for name in ("record", "signature", "start")}
        part["signature"] = part["signature"] - begin
        part |= {name: given[name][begin : begin + 30] for name in ("low", "cycle")}
        outcomes = given["outcomes"][begin : begin + 30]
        shared.add(outcomes, **part)
        alone = ShiftedHits(6, 40)
        alone.add(outcomes, **part)
        others.append(alone.counts)
    assert (shared.counts == whole).all()
    assert (sum(others) == whole).all()


def test_order_and_kind_of_the_arrays_do_not_matter():
    given = random_block(np.random.default_rng(10), m=20, sessions=25, calls=300, records=4)
    whole = counted(4, 25, **given)
    order = np.random.default_rng(11).permutation(300)
    mixed = {name: given[name][order] for name in ("record", "signature", "start")}
    assert (counted(4, 25, **given | mixed) == whole).all()
    narrow = {
        name: given[name].astype(np.int16)
        for name in ("low", "cycle", "record", "signature", "start")
    }
    logical = {"outcomes": np.asfortranarray(given["outcomes"]).astype(bool)}
    assert (counted(4, 25, **given | narrow | logical) == whole).all()


def test_what_lies_outside_the_cycle_or_is_not_used_is_not_looked_at():
    changed = block()["outcomes"]
    changed[1, [0, 4, 5]] = 77
    assert (counted(outcomes=changed) == counted()).all()
    unused = np.vstack([changed, np.full((1, 6), 3, dtype=np.uint8)])
    more = {"outcomes": unused, "low": np.array([0, 1, 0]), "cycle": np.array([6, 3, 0])}
    assert (counted(**more) == counted()).all()


def test_arguments_are_left_as_they_were():
    given = block()
    before = {name: values.copy() for name, values in given.items()}
    counted(**given)
    assert all((given[name] == before[name]).all() for name in given)


def test_no_calls_and_no_records():
    none = np.array([], dtype=np.int64)
    assert counted(record=none, signature=none, start=none).tolist() == [[0] * 6] * 2
    nothing = {"record": none, "signature": none, "start": none, "low": none, "cycle": none}
    assert counted(0, 3, outcomes=np.zeros((0, 6), dtype=np.uint8), **nothing).shape == (0, 3)


@pytest.mark.parametrize(
    ("changed", "named"),
    [
        ({"outcomes": np.ones(6, dtype=np.uint8)}, "outcomes has shape"),
        ({"outcomes": np.ones((2, 6))}, "outcomes has dtype float64"),
        ({"outcomes": np.full((2, 6), 2, dtype=np.uint8)}, "outcomes holds 2"),
        ({"low": np.array([0])}, "low has shape"),
        ({"low": np.array([0.0, 1.0])}, "low has dtype float64"),
        ({"low": np.array([0, -1])}, r"low\[1\]=-1"),
        ({"cycle": np.array([6, 6])}, r"cycle\[1\]=6 leave the 6 sessions"),
        ({"cycle": np.array([-1, 3])}, r"cycle\[0\]=-1"),
        ({"record": np.array([0, 1])}, "record has shape"),
        ({"record": np.array([0, 1, 2])}, r"record\[2\]=2 must lie in \[0, 2\)"),
        ({"record": np.array([0, -1, 1])}, r"record\[1\]=-1"),
        ({"signature": np.array([0, 2, 1])}, r"signature\[1\]=2"),
        ({"signature": np.array([[0], [0], [1]])}, "signature has shape"),
        ({"start": np.array([0, 4])}, "start has shape"),
        ({"start": np.array([0, 6, 2])}, r"start\[1\]=6 is no valid start"),
        ({"start": np.array([0, 4, 0])}, r"start\[2\]=0 is no valid start"),
    ],
)
def test_refusals(changed, named):
    with pytest.raises(ValueError, match=named):
        counted(**changed)


def test_a_refused_block_counts_nothing():
    hits = ShiftedHits(2, 6)
    given = block(outcomes=np.full((2, 6), 2, dtype=np.uint8))
    with pytest.raises(ValueError, match="outcomes"):
        hits.add(given.pop("outcomes"), **given)
    assert not hits.counts.any()


@pytest.mark.parametrize(("n_records", "n_shifts"), [(-1, 3), (2, 0)])
def test_sizes_are_checked(n_records, n_shifts):
    with pytest.raises(ValueError, match=r"n_(records|shifts)=(-1|0)"):
        ShiftedHits(n_records, n_shifts)
