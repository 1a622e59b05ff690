from datetime import date

import numpy as np
import pytest

from foresaid.ledger import queries, writes
from foresaid.ledger.store import Ledger
from foresaid.model.codebook import default_codebook
from foresaid.model.errors import LedgerError
from foresaid.model.records import Action, CodedCall, Forecaster, Instrument

AT = "2025-03-14T12:00:00+00:00"
BOOK = default_codebook()


@pytest.fixture
def ledger(tmp_path):
    with Ledger.create(tmp_path / "desk.foresaid") as made:
        yield made


def load(ledger, what, *, file="f.csv", series=""):
    return writes.add_load(
        ledger,
        {
            "what": what,
            "file": file,
            "sha256": "0" * 64,
            "series": series,
            "n_rows": 1,
            "loaded_at": AT,
        },
    )


def with_instruments(ledger, *symbols):
    with ledger.writing():
        rows = [Instrument(symbol, currency="EUR") for symbol in symbols]
        writes.add_instruments(ledger, rows, load(ledger, "instruments"))
    return {symbol: key for symbol, (key, _) in queries.instruments(ledger).items()}


def add_prices(ledger, *rows, series="raw", file="p.csv"):
    """Add rows of (instrument, session, close) in one load and return its id."""
    with ledger.writing():
        number = load(ledger, "prices", series=series, file=file)
        writes.add_prices(
            ledger,
            [
                (instrument, session, number, None, close + 1, close - 1, close, None, None)
                for instrument, session, close in rows
            ],
        )
    return number


def coded(ref, **changes):
    plain = {
        "ref": ref,
        "forecaster": "ada",
        "said_at": "2025-03-14",
        "said_zone": "",
        "instrument": "ABC",
        "claim_typed": "Ends higher",
        "claim": "ends higher",
        "not_a_call": "",
        "horizon_typed": "1 month",
        "horizon": "1 month",
        "horizon_imputed": False,
        "deadline": date(2025, 4, 14),
        "sessions": None,
        "probability_low": None,
        "probability_high": None,
        "digest": f"digest of {ref}",
    }
    names = CodedCall.__dataclass_fields__
    return CodedCall(**(dict.fromkeys(names, "") | plain | changes))


def add_calls(ledger, *rows):
    with ledger.writing():
        writes.add_codebook(ledger, BOOK, at=AT)
        writes.add_calls(
            ledger,
            rows,
            load(ledger, "calls"),
            forecasters={h: key for h, (key, _) in queries.forecasters(ledger).items()},
            instruments={s: key for s, (key, _) in queries.instruments(ledger).items()},
            codebook=BOOK.digest,
        )


def days(found):
    return found.day.astype("datetime64[D]").astype(str).tolist()


def test_instruments_come_back_as_they_went_in(ledger):
    one = Instrument(
        "EURUSD", "a pair", "USD", "Europe/Vienna", "09:00", "17:30", "inverse", "pair",
        "XWBO", "ABC", "EUR", "USD",
    )  # fmt: skip
    with ledger.writing():
        writes.add_instruments(ledger, [Instrument("Z"), one], load(ledger, "instruments"))
    found = queries.instruments(ledger)
    assert list(found) == ["Z", "EURUSD"]
    assert found["EURUSD"] == (2, one)


def test_forecasters_come_back_with_their_aliases(ledger):
    rows = [Forecaster("ada", "Ada", "analyst", "rates", ("A.", "ada b")), Forecaster("bo")]
    with ledger.writing():
        writes.add_forecasters(ledger, rows, load(ledger, "forecasters"))
    assert [one for _, one in queries.forecasters(ledger).values()] == rows


def test_actions_are_ordered_and_of_a_vintage(ledger):
    ids = with_instruments(ledger, "ABC")
    first = Action("ABC", date(2025, 6, 1), "split", ratio=2.0)
    second = Action("ABC", date(2025, 1, 1), "dividend", amount=0.5, currency="EUR")
    vintages = []
    for one in (first, second):
        with ledger.writing():
            number = load(ledger, "actions")
            writes.add_actions(ledger, [one], number, ids)
            vintages.append(number)
    assert queries.actions(ledger, vintage=vintages[0]) == [first]
    assert queries.actions(ledger, vintage=vintages[1]) == [second, first]
    assert queries.actions(ledger, vintage=0) == []


def test_the_newest_load_of_a_session_counts_by_its_vintage(ledger):
    ids = with_instruments(ledger, "ABC", "DEF")
    a, d = ids["ABC"], ids["DEF"]
    first = add_prices(ledger, (d, "2025-03-13", 5.0), (a, "2025-03-14", 11.0))
    second = add_prices(ledger, (a, "2025-03-13", 10.0), (a, "2025-03-14", 12.0))
    third = add_prices(ledger, (a, "2025-03-14", 13.0))
    assert queries.vintage(ledger) == third
    newest = queries.prices(ledger, vintage=third)
    assert newest.instrument.tolist() == [a, a, d]
    assert days(newest) == ["2025-03-13", "2025-03-14", "2025-03-13"]
    assert newest.close.tolist() == [10.0, 13.0, 5.0]
    assert newest.load.tolist() == [second, third, first]
    assert newest.high.tolist() == [11.0, 14.0, 6.0]
    assert np.isnan(newest.open).all()
    assert queries.prices(ledger, vintage=second).close.tolist() == [10.0, 12.0, 5.0]
    assert queries.prices(ledger, vintage=first).close.tolist() == [11.0, 5.0]
    assert queries.prices(ledger, vintage=0).close.tolist() == []


def test_prices_up_to_a_day(ledger):
    a = with_instruments(ledger, "ABC")["ABC"]
    number = add_prices(
        ledger, (a, "1969-12-31", 1.0), (a, "1970-01-01", 2.0), (a, "2025-03-14", 3.0)
    )
    early = queries.prices(ledger, vintage=number, as_of=date(1970, 1, 1))
    assert early.day.tolist() == [-1, 0]
    assert len(queries.prices(ledger, vintage=number, as_of=date(2025, 3, 13)).day) == 2
    assert len(queries.prices(ledger, vintage=number, as_of=date(2025, 3, 14)).day) == 3


def test_a_price_with_its_source(ledger):
    a = with_instruments(ledger, "ABC")["ABC"]
    first = add_prices(ledger, (a, "2025-03-14", 11.0), file="one.csv")
    second = add_prices(ledger, (a, "2025-03-14", 12.0), file="two.csv")
    for vintage, close, file in ((first, 11.0, "one.csv"), (second, 12.0, "two.csv")):
        found = queries.price_source(ledger, "ABC", "2025-03-14", vintage=vintage)
        assert (found["close"], found["file"], found["sha256"]) == (close, file, "0" * 64)
    assert queries.price_source(ledger, "ABC", "2025-03-15", vintage=second) is None


def test_series_kinds(ledger):
    ids = with_instruments(ledger, "ABC", "DEF", "GHI")
    add_prices(ledger, (ids["ABC"], "2025-03-14", 1.0))
    number = add_prices(ledger, (ids["DEF"], "2025-03-14", 1.0), series="split-adjusted")
    assert queries.series_kinds(ledger, vintage=number) == {
        "ABC": "raw",
        "DEF": "split-adjusted",
    }
    assert queries.series_kinds(ledger, vintage=number - 1) == {"ABC": "raw"}


def with_people(ledger):
    with_instruments(ledger, "ABC")
    with ledger.writing():
        rows = [Forecaster("ada"), Forecaster("bo")]
        writes.add_forecasters(ledger, rows, load(ledger, "forecasters"))


def test_calls_with_copies_revisions_and_collections(ledger):
    with_people(ledger)
    add_calls(
        ledger,
        coded("C-1", collection="morning notes", quote="up", probability_low=0.6,
              probability_high=0.6),
        coded("C-2", copy_of="C-1", outlet="elsewhere"),
        coded("C-3", forecaster="bo", copy_of="C-1"),
        coded("C-4", revises="C-1", deadline=None, sessions=10, horizon="10 sessions"),
        coded("C-5", instrument="", not_a_call="no date", claim="", deadline=None),
    )  # fmt: skip
    found = queries.calls(ledger)
    assert found["ref"].tolist() == ["C-1", "C-4", "C-5"]
    assert found["copies"].tolist() == [2, 0, 0]
    assert found["revises"].tolist() == ["", "C-1", ""]
    assert found["collection"].tolist() == ["morning notes", "", ""]
    assert found["deadline"].tolist() == ["2025-04-14", None, None]
    assert found["sessions"].tolist() == [None, 10, None]
    assert found["instrument"].tolist() == ["ABC", "ABC", ""]
    assert found["probability_low"].tolist() == [0.6, None, None]
    assert queries.last_call(ledger) == 3
    assert queries.statement_owners(ledger)["C-3"] == "bo"
    assert queries.statement_digests(ledger)["C-2"] == "digest of C-2"


@pytest.mark.parametrize(
    "changes",
    [
        {"instrument": ""},
        {"deadline": None},
        {"sessions": 5},
        {"probability_low": 0.7, "probability_high": 0.6},
        {"probability_low": 1.1, "probability_high": 1.2},
    ],
)
def test_a_call_that_contradicts_itself_is_refused(ledger, changes):
    with_people(ledger)
    with pytest.raises(LedgerError, match=r"(?s)CHECK constraint failed.*Nothing was changed"):
        add_calls(ledger, coded("C-1", **changes))
    assert queries.last_call(ledger) == 0


def test_a_codebook_is_kept_once(ledger):
    for _ in range(2):
        with ledger.writing():
            writes.add_codebook(ledger, BOOK, at=AT)
    assert ledger.scalar("SELECT count(*) FROM codebook") == 1
    assert queries.codebook_source(ledger, BOOK.digest) == BOOK.source


def test_settlements(ledger):
    assert queries.latest_settlement(ledger) is None
    with_people(ledger)
    add_calls(ledger, coded("C-1"))
    header = {
        "as_of": "2025-03-14",
        "codebook": BOOK.digest,
        "vintage": 0,
        "last_call": 1,
        "program": "0",
        "settled_at": AT,
    }
    columns = [row[1] for row in ledger.db.execute("PRAGMA table_info(settlement)")][1:]
    header = dict.fromkeys(columns, 0) | header
    names = [row[1] for row in ledger.db.execute("PRAGMA table_info(outcome)")][1:]
    row = dict.fromkeys(names, None) | {"call": 1, "result": "open", "reason": "why"}
    row |= {"matured": 0, "direction": "up", "alternates": "{}", "flags": ""}
    row |= {"chance_model": "none", "chance_windows": 0, "chance_hits": 0, "chance_disjoint": 0}
    with ledger.writing():
        number = writes.add_settlement(ledger, header, [tuple(row.values())])
        later = writes.add_settlement(ledger, header | {"as_of": "2025-03-15"}, [])
    latest = queries.latest_settlement(ledger)
    assert (latest.id, latest.as_of, latest.codebook) == (
        later,
        date(2025, 3, 15),
        BOOK.digest,
    )
    found = queries.outcomes(ledger, number)
    assert found.to_dict("records") == [row]
    assert queries.outcomes(ledger, later).empty
    assert ledger.scalar("SELECT count(*) FROM history WHERE what = 'settle'") == 2


def test_an_import_is_recorded_in_the_history(ledger):
    with ledger.writing():
        load(ledger, "prices", file="p.csv", series="raw")
    detail = ledger.scalar("SELECT detail FROM history")
    assert detail == (
        '{"file":"p.csv","n_rows":1,"series":"raw","sha256":"' + "0" * 64 + '","what":"prices"}'
    )


def test_an_empty_ledger(ledger):
    assert queries.vintage(ledger) == 0
    assert queries.last_call(ledger) == 0
    assert queries.calls(ledger).empty
    assert queries.instruments(ledger) == {}
    assert len(queries.prices(ledger, vintage=0).day) == 0
