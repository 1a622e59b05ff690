import hashlib
import json
from importlib import resources

import pytest

from foresaid.model.codebook import (
    Codebook,
    HorizonClass,
    default_codebook,
    load_codebook,
    parse_codebook,
)
from foresaid.model.errors import InputRejected

TEXT = resources.files("foresaid.model").joinpath("codebook.toml").read_text("utf-8")


def changed(old, new):
    """Return the default codebook's text with one passage replaced, once."""
    assert TEXT.count(old) >= 1, old
    return TEXT.replace(old, new, 1)


def issues_of(text):
    with pytest.raises(InputRejected) as caught:
        parse_codebook(text, file="mine.toml")
    return caught.value.issues


def test_the_default_is_read_once():
    assert default_codebook() is default_codebook()
    assert load_codebook(None) is default_codebook()


def test_rules_of_the_default():
    book = default_codebook()
    assert book.horizon_default.length == "12 months"
    assert book.horizon_words["soon"].length == "1 month"
    assert book.horizon_classes == (
        HorizonClass("up to 1 month", 1, 1.0),
        HorizonClass("up to 3 months", 3, 1.0),
        HorizonClass("up to 12 months", 12, 1.0),
        HorizonClass("beyond 12 months", None, 1.0),
    )
    assert book.sessions_per_month == 21
    assert book.settlement.day_only == "before-close"
    assert (book.settlement.default_opens, book.settlement.default_closes) == (0, 1440)
    assert book.chance.coin == 0.5
    assert book.verdict.level == 0.05
    assert book.instrument_kinds["yield"].scale == "difference"
    assert book.instrument_kinds["yield"].units == ("pp", "bp")
    assert book.instrument_kinds["coin"].weekends
    assert not book.instrument_kinds["share"].weekends
    assert [one.needs for one in book.specificity_classes][:2] == [(), ("checkable",)]


def test_every_length_of_the_default_rises_around_its_word():
    def days(length):
        count, unit = length.split()
        return int(count) * {"session": 1, "week": 7, "month": 30}[unit.rstrip("s")]

    words = [*default_codebook().horizon_words.values(), default_codebook().horizon_default]
    for word in words:
        assert days(word.shorter) < days(word.length) < days(word.longer)


def test_the_digest_is_the_hash_of_the_rules():
    book = default_codebook()
    assert book.digest == hashlib.sha256(book.canonical.encode()).hexdigest()
    rules = json.loads(book.canonical)
    assert "source" not in rules
    assert rules["verdict"]["minimum_matured"] == 20
    assert book.canonical == json.dumps(rules, sort_keys=True, separators=(",", ":"))


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ("coin = 0.5 ", "coin = 0.6 "),
        ("tolerance = 1e-9", "tolerance = 1e-8"),
        ('length = "1 week"', 'length = "2 weeks"'),
        ('name = "foresaid default"', 'name = "another"'),
        ("months = 3\nweight = 1.0", "months = 4\nweight = 1.0"),
        ('{ word = "remote", low = 1, high = 5 }', '{ word = "remote", low = 1, high = 6 }'),
        ('"no date", "no direction"', '"no direction", "no date"'),
        ("weekends = true", "weekends = false"),
    ],
)
def test_a_changed_rule_changes_the_digest(old, new):
    book = parse_codebook(changed(old, new), file="mine.toml")
    assert book.digest != default_codebook().digest
    assert book != default_codebook()


@pytest.mark.parametrize(
    "text",
    [
        "# a remark\n" + TEXT,
        TEXT.replace("\n\n", "\n\n\n"),
        changed("coin = 0.5 ", "coin   =   0.5   "),
        changed("tolerance = 1e-9", "tolerance = 0.000000001"),
        changed("weight = 0.0", "weight = 0"),
        changed(
            "[chance]\nenough_windows = 10        # disjoint earlier windows below which the "
            "volatility model joins in\nvolatility_sessions = 252",
            "[chance]\nvolatility_sessions = 252\nenough_windows = 10\n#",
        ),
    ],
    ids=["comment", "blank lines", "spaces", "other digits", "whole number", "order"],
)
def test_layout_and_comments_leave_the_digest(text):
    book = parse_codebook(text, file="mine.toml")
    assert book.digest == default_codebook().digest
    assert book == default_codebook()
    assert book.source == text


WRONG = [
    ("version = 2", "version = 3", "version", "3", "1 or 2"),
    ("version = 2", "version = true", "version", "True", "1 or 2"),
    ('name = "foresaid default"', 'name = ""', "name", "", "a text that is not empty"),
    ('name = "foresaid default"', "name = 7", "name", "7", "a text that is not empty"),
    (
        'length = "1 week"',
        'length = "a week"',
        "horizon_words.immediately.length",
        "a week",
        "a length such as '10 sessions', '2 weeks' or '6 months'",
    ),
    (
        'length = "1 week"',
        'length = "0 weeks"',
        "horizon_words.immediately.length",
        "0 weeks",
        "a length such as '10 sessions', '2 weeks' or '6 months'",
    ),
    (
        "sessions_per_month = 21",
        "sessions_per_month = 21.5",
        "horizon_classes.sessions_per_month",
        "21.5",
        "a whole number from 1 to 31",
    ),
    (
        "months = 1\n",
        "months = 0\n",
        "horizon_classes.bound[1].months",
        "0",
        "a whole number from 1 to 1200",
    ),
    (
        "months = 3\n",
        "months = true\n",
        "horizon_classes.bound[2].months",
        "True",
        "a whole number from 1 to 1200",
    ),
    (
        'name = "not checkable"\nneeds = []\nweight = 0.0',
        'name = "not checkable"\nneeds = []\nweight = -1.0',
        "specificity_classes[1].weight",
        "-1.0",
        "a number of at least 0",
    ),
    (
        'needs = ["checkable", "dated"]',
        'needs = ["checkable", "date"]',
        "specificity_classes[3].needs",
        "date",
        "one of checkable, dated, sized, probability",
    ),
    (
        "needs = []",
        'needs = "none"',
        "specificity_classes[1].needs",
        "none",
        "a list of checkable, dated, sized, probability",
    ),
    ('default = "icd-203"', 'default = "icd"', "likelihood.default", "icd", "'icd-203'"),
    (
        '{ word = "remote", low = 1, high = 5 }',
        '{ word = "remote", low = 1, high = 101 }',
        "likelihood.scales.icd-203.words[2].high",
        "101",
        "a number from 1 to 100",
    ),
    (
        '{ word = "remote", low = 1, high = 5 }',
        '{ word = "remote", low = 6, high = 5 }',
        "likelihood.scales.icd-203.words[2].high",
        "5",
        "a number from 6 to 100",
    ),
    (
        'index = { scale = "ratio"',
        'index = { scale = "log"',
        "instrument_kinds.index.scale",
        "log",
        "'ratio' or 'difference'",
    ),
    (
        'share = { scale = "ratio", negative = false',
        'share = { scale = "ratio", negative = true',
        "instrument_kinds.share.negative",
        "True",
        'false, or scale = "difference"',
    ),
    (
        'fund = { scale = "ratio", negative = false',
        'fund = { scale = "ratio", negative = 0',
        "instrument_kinds.fund.negative",
        "0",
        "true or false",
    ),
    (
        'units = ["pp", "bp"]',
        'units = ["pp", "percent"]',
        "instrument_kinds.yield.units",
        "percent",
        "one of %, pp, bp, pt",
    ),
    (
        "tolerance = 1e-9",
        "tolerance = nan",
        "settlement.tolerance",
        "nan",
        "a number from 0 to 0.001",
    ),
    (
        "tolerance = 1e-9",
        'tolerance = "small"',
        "settlement.tolerance",
        "small",
        "a number from 0 to 0.001",
    ),
    (
        'day_only = "before-close"',
        'day_only = "before"',
        "settlement.day_only",
        "before",
        "'before-close' or 'after-close'",
    ),
    (
        "roll_back_days = 10",
        "roll_back_days = 61",
        "settlement.roll_back_days",
        "61",
        "a whole number from 1 to 60",
    ),
    (
        'default_closes = "24:00"',
        'default_closes = "24:01"',
        "settlement.default_closes",
        "24:01",
        "a time of day from '00:00' to '24:00'",
    ),
    (
        'default_opens = "00:00"',
        "default_opens = 0",
        "settlement.default_opens",
        "0",
        "a time of day from '00:00' to '24:00'",
    ),
    (
        "modelled_floor = 0.001",
        "modelled_floor = 0.3",
        "chance.modelled_floor",
        "0.3",
        "a number from 0 to 0.25",
    ),
    (
        "interval_level = 0.95",
        "interval_level = 1.0",
        "verdict.interval_level",
        "1.0",
        "a number from 0.5 to 0.9999",
    ),
    ("level = 0.05 ", "level = 0.0 ", "verdict.level", "0.0", "a number from 1e-06 to 0.5"),
    (
        "minimum_disjoint = 10",
        "minimum_disjoint = 0",
        "verdict.minimum_disjoint",
        "0",
        "a whole number from 1 to 1e+06",
    ),
]


@pytest.mark.parametrize(("old", "new", "key", "value", "allowed"), WRONG)
def test_a_wrong_value_is_told_with_key_value_and_what_is_allowed(
    old, new, key, value, allowed
):
    (issue,) = issues_of(changed(old, new))
    assert (issue.code, issue.file, issue.column) == ("bad-codebook", "mine.toml", key)
    assert issue.value == value
    assert issue.message.startswith(f"{key} is ")
    assert allowed in issue.message.partition("allowed: ")[2]


def test_all_faults_are_told_at_once():
    text = TEXT
    for old, new in [
        ("coin = 0.5 ", "coin = 5 "),
        ('name = "foresaid default"', "name = 1"),
        ("roll_back_days = 10", "roll_back_days = 0"),
        ("weekends = true", 'weekends = "yes"'),
    ]:
        text = text.replace(old, new, 1)
    found = [issue.column for issue in issues_of(text)]
    assert sorted(found) == [
        "chance.coin",
        "instrument_kinds.coin.weekends",
        "name",
        "settlement.roll_back_days",
    ]


def test_an_unknown_key_is_refused_with_those_that_are_known():
    (issue,) = issues_of(changed("coin = 0.5 ", "coin = 0.5\nconi = 0.5\n#"))
    assert issue.column == "chance.coni"
    assert "no such key here" in issue.message
    assert "coin, enough_windows, modelled_floor" in issue.message
    (issue,) = issues_of('extra = "x"\n' + TEXT)
    assert issue.column == "extra"


@pytest.mark.parametrize(
    ("old", "key"),
    [
        ("coin = 0.5 ", "chance.coin"),
        ("version = 2", "version"),
        ('day_only = "before-close"', "settlement.day_only"),
        ('undated = "undated"', "horizon_classes.undated"),
        ('default = "icd-203"', "likelihood.default"),
    ],
)
def test_a_missing_key_is_told_once(old, key):
    (issue,) = issues_of(changed(old, "#"))
    assert issue.column == key
    assert issue.message == f"{key} is missing"


def test_a_missing_table_is_told_with_each_of_its_keys_once():
    begin, end = TEXT.index("[verdict]"), len(TEXT)
    found = issues_of(TEXT[:begin] + TEXT[end:])
    columns = [issue.column for issue in found]
    assert columns[0] == "verdict"
    assert len(columns) == len(set(columns))


def test_a_table_that_is_none_is_told():
    begin = TEXT.index("[verdict]")
    found = issues_of("verdict = 3\n" + TEXT[:begin])
    assert any(i.column == "verdict" and "allowed: a table" in i.message for i in found)


@pytest.mark.parametrize(
    ("old", "new", "allowed"),
    [
        (
            "months = 12\nweight = 1.0",
            "weight = 1.0",
            "every class but the last has `months`, the last has none",
        ),
        (
            '"beyond 12 months"\nweight = 1.0',
            '"beyond 12 months"\nmonths = 13\nweight = 1.0',
            "every class but the last has `months`, the last has none",
        ),
        ("months = 3\n", "months = 12\n", "bounds that rise from class to class"),
        ("months = 3\n", "months = 1\n", "bounds that rise from class to class"),
    ],
)
def test_bounds_of_the_horizon_classes(old, new, allowed):
    (issue,) = issues_of(changed(old, new))
    assert issue.column == "horizon_classes.bound"
    assert issue.message.endswith(f"allowed: {allowed}")


def test_a_wrong_scale_says_nothing_of_negative_prices():
    (issue,) = issues_of(changed('yield = { scale = "difference"', 'yield = { scale = "d"'))
    assert issue.column == "instrument_kinds.yield.scale"


def test_horizon_classes_may_not_be_empty():
    begin, end = TEXT.index("[[horizon_classes.bound]]"), TEXT.index("# The last class whose")
    (issue,) = issues_of(TEXT[:begin] + "bound = []\n" + TEXT[end:])
    assert issue.message.endswith("a list of tables, at least one")


def test_a_likelihood_scale_without_words_is_refused():
    text = changed(
        '[likelihood.scales."ipcc-ar5"]\n',
        '[likelihood.scales.empty]\nsource = "none"\nwords = []\n\n'
        '[likelihood.scales."ipcc-ar5"]\n',
    )
    (issue,) = issues_of(text)
    assert issue.column == "likelihood.scales.empty.words"
    assert issue.message.endswith("a list of tables, at least one")


def test_text_that_is_no_toml_is_refused():
    with pytest.raises(InputRejected, match=r"mine\.toml is not valid TOML"):
        parse_codebook("version = ", file="mine.toml")


def test_a_file_of_ones_own(tmp_path):
    path = tmp_path / "mine.toml"
    path.write_text(changed("coin = 0.5 ", "coin = 0.55 "), encoding="utf-8")
    book = load_codebook(path)
    assert isinstance(book, Codebook)
    assert book.chance.coin == 0.55


def test_a_file_that_cannot_be_read(tmp_path):
    with pytest.raises(InputRejected, match="cannot be read"):
        load_codebook(tmp_path / "absent.toml")
    path = tmp_path / "latin.toml"
    path.write_bytes(b'name = "\xe9"')
    with pytest.raises(InputRejected, match="cannot be read"):
        load_codebook(path)


def test_a_codebook_of_the_first_version_takes_later_rules_as_shipped():
    book = default_codebook()
    lines = [
        line
        for line in book.source.replace("version = 2", "version = 1").splitlines()
        if not line.startswith(("query_", "shift_", "edge =", "power ="))
    ]
    old = "\n".join(lines)
    read = parse_codebook(old, file="old.toml")
    assert read == book
    assert read.digest == book.digest
    own = old.replace("[verdict]", "[verdict]\nedge = 0.2")
    assert parse_codebook(own, file="old.toml").verdict.edge == 0.2
    with pytest.raises(InputRejected) as caught:
        parse_codebook(old.replace("version = 1", "version = 2"), file="new.toml")
    assert len(caught.value.issues) == 11
    with pytest.raises(InputRejected, match="refused"):
        parse_codebook("version = 1\nverdict = 3\n", file="old.toml")
