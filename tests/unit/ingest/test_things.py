import pytest

from foresaid.ingest.readers import read_table
from foresaid.ingest.things import parse_forecasters, parse_instruments

KINDS = ("index", "share", "yield", "pair")


@pytest.fixture
def read(tmp_path):
    def reader(text):
        path = tmp_path / "things.csv"
        path.write_text(text, encoding="utf-8")
        return read_table(path)

    return reader


def found(parsed):
    return [(issue.line, issue.column, issue.code) for issue in parsed.issues]


def test_instruments_are_read(read):
    parsed = parse_instruments(
        read(
            "instrument,name,currency,zone,opens,closes,sense,kind,market,benchmark,base,term\n"
            "MARB,Maravel Broad Index,VQN,Europe/Vienna,09:00,17:15,direct,index,XMAR,,,\n"
            "MY10,,VQN,,,,Inverse,Yield,,MARB,,\n"
            "VQNQRT,,,,22:00,21:00,,pair,,,VQN,QRT\n"
            "ODRL,,,,00:00,24:00,,,,TESX,,\n"
        ),
        kinds=KINDS,
        known={"TESX"},
    )
    assert parsed.issues == ()
    assert parsed.lines == (2, 3, 4, 5)
    marb, my10, pair, odrl = parsed.rows
    assert (marb.symbol, marb.zone, marb.opens, marb.closes) == (
        "MARB", "Europe/Vienna", "09:00", "17:15",
    )  # fmt: skip
    assert (my10.sense, my10.kind, my10.benchmark) == ("inverse", "yield", "MARB")
    assert (pair.base, pair.term) == ("VQN", "QRT")
    assert (odrl.kind, odrl.sense, odrl.benchmark) == ("index", "direct", "TESX")


@pytest.mark.parametrize(
    ("header", "row", "column", "code"),
    [
        ("instrument,name", ",x", "instrument", "no-instrument"),
        ("instrument,name", "MARB,x", "instrument", "double-instrument"),
        ("instrument,name", f"{'x' * 201},x", "instrument", "text-too-long"),
        ("instrument,name", "A\x07B,x", "instrument", "control-character"),
        ("instrument,name", 'AB,"x\ny"', "name", "control-character"),
        ("instrument,zone", "AB,Europe/Viena", "zone", "unknown-zone"),
        ("instrument,opens,closes", "AB,9:00,17:00", "opens", "bad-time"),
        ("instrument,opens,closes", "AB,24:00,17:00", "opens", "bad-time"),
        ("instrument,opens,closes", "AB,09:00,25:00", "closes", "bad-time"),
        ("instrument,opens,closes", "AB,09:00,", "closes", "half-hours"),
        ("instrument,opens,closes", "AB,,17:00", "opens", "half-hours"),
        ("instrument,opens,closes", "AB,09:00,09:00", "closes", "no-hours"),
        ("instrument,sense", "AB,inverted", "sense", "unknown-sense"),
        ("instrument,kind", "AB,shares", "kind", "unknown-kind"),
        ("instrument,benchmark", "AB,MARC", "benchmark", "unknown-instrument"),
        ("instrument,benchmark", "AB,AB", "benchmark", "own-benchmark"),
        ("instrument,kind,base,term", "AB,pair,VQN,", "term", "missing-leg"),
        ("instrument,kind,base,term", "AB,pair,VQN,VQN", "term", "one-leg"),
    ],
)
def test_a_wrong_instrument_is_named_and_kept_out(read, header, row, column, code):
    filler = "," * header.count(",")
    parsed = parse_instruments(read(f"{header}\nMARB{filler}\n{row}\n"), kinds=KINDS)
    assert found(parsed) == [(3, column, code)]
    assert [row.symbol for row in parsed.rows] == ["MARB"]
    assert parsed.has_errors


def test_near_misses_get_a_suggestion(read):
    parsed = parse_instruments(
        read("instrument,kind,zone,benchmark\nMARB,shares,Europe/Viena,MARV\n"), kinds=KINDS
    )
    hints = " ".join(issue.hint for issue in parsed.issues)
    assert "`share`" in hints
    assert "`Europe/Vienna`" in hints
    assert "`MARB`" in hints


def test_all_faults_of_all_rows_are_told(read):
    parsed = parse_instruments(
        read("instrument,kind,sense\n,odd,odd\nB,odd,odd\n"), kinds=KINDS
    )
    assert len(parsed.issues) == 5
    assert parsed.rows == ()


def test_a_file_without_its_column_gives_no_rows(read):
    parsed = parse_instruments(read("symbol,name\nMARB,x\n"), kinds=KINDS)
    assert [issue.code for issue in parsed.issues] == [
        "missing-column", "unknown-column",
    ]  # fmt: skip
    assert parsed.rows == ()
    assert parse_instruments(read(""), kinds=KINDS).rows == ()


ODD = ["O'Harrow \"Ned\"", "🙂🏳️‍🌈", "\u202eשלום", "'; DROP TABLE call; --", "[bold]x[/bold]",
       "%s{0}", "=HYPERLINK()", "Nuñez, Ída", "a\u00a0b"]  # fmt: skip


@pytest.mark.parametrize("name", ODD)
def test_odd_names_pass_unchanged(read, name):
    quoted = '"' + name.replace('"', '""') + '"'
    (thing,) = parse_instruments(
        read(f"instrument,name\n{quoted},{quoted}\n"), kinds=KINDS
    ).rows
    assert (thing.symbol, thing.name) == (name, name)
    (person,) = parse_forecasters(read(f"forecaster,name\n{quoted},{quoted}\n")).rows
    assert (person.handle, person.name) == (name, name)


def test_forecasters_are_read(read):
    parsed = parse_forecasters(
        read(
            "forecaster;name;role;desk;aliases\n"
            'm.tarrow;Mirel Tarrow;strategist;Equities;"Tarrow; M. Tarrow;; Tarrow"\n'
            "e.vostrand;;;;\n"
        )
    )
    assert parsed.issues == ()
    first, second = parsed.rows
    assert first.aliases == ("Tarrow", "M. Tarrow")
    assert (first.name, first.role, first.desk) == ("Mirel Tarrow", "strategist", "Equities")
    assert (second.handle, second.aliases) == ("e.vostrand", ())


@pytest.mark.parametrize(
    ("rows", "expected"),
    [
        ("a,\na,\n", [(3, "forecaster", "double-forecaster")]),
        (",x\n", [(2, "forecaster", "no-forecaster")]),
        ("a,b\nb,\n", [(2, "aliases", "double-alias")]),
        ("a,x\nb,x\n", [(3, "aliases", "double-alias")]),
        ("a,x;a\n", []),
        (f"a,{'x' * 201}\n", [(2, "aliases", "text-too-long")]),
    ],
)
def test_names_belong_to_one_forecaster(read, rows, expected):
    assert found(parse_forecasters(read("forecaster,aliases\n" + rows))) == expected


def test_a_list_of_handles_is_enough(read):
    assert [row.handle for row in parse_forecasters(read("forecaster\na\nb\n")).rows] == [
        "a",
        "b",
    ]
