import math

import pytest

from foresaid.model.checks import Node


def node(**raw):
    return Node(raw, file="x.toml")


def only(issues):
    (issue,) = issues
    return issue


def test_readers_return_good_values_without_an_issue():
    root = node(
        a="text",
        b=["x", "y"],
        c=2,
        d=True,
        e=1,
        f=7,
        g="10 sessions",
        h="24:00",
        i={"j": 0.5},
        k=[{"m": 1}, {"m": 2}],
        n={"one": {"o": "p"}},
    )
    assert root.text("a") == "text"
    assert root.texts("b") == ("x", "y")
    assert root.texts("b", allowed=("x", "y", "z")) == ("x", "y")
    assert root.choice("c", (1, 2)) == 2
    assert root.flag("d") is True
    number = root.number("e", low=0.0)
    assert number == 1.0
    assert isinstance(number, float)
    assert root.integer("f", low=1, high=7) == 7
    assert root.length("g") == "10 sessions"
    assert root.clock("h") == 1440
    assert root.table("i").number("j", low=0.0, high=1.0) == 0.5
    assert [row.integer("m", low=1, high=2) for row in root.rows("k")] == [1, 2]
    assert [(name, one.text("o")) for name, one in root.tables("n")] == [("one", "p")]
    root.finish()
    assert root.issues == []


@pytest.mark.parametrize(
    ("read", "value", "fallback"),
    [
        (lambda n: n.text("k"), "  ", "k"),
        (lambda n: n.texts("k"), "x", ()),
        (lambda n: n.texts("k"), ["x", 1], ()),
        (lambda n: n.choice("k", ("p", "q")), "r", "p"),
        (lambda n: n.choice("k", ()), "r", ""),
        (lambda n: n.flag("k"), 1, False),
        (lambda n: n.number("k", low=2.0), 1.9, 2.0),
        (lambda n: n.number("k", low=0.0), math.inf, 0.0),
        (lambda n: n.number("k", low=0.0), math.nan, 0.0),
        (lambda n: n.number("k", low=0.0), True, 0.0),
        (lambda n: n.number("k", low=0.0), "1", 0.0),
        (lambda n: n.integer("k", low=1, high=9), 10, 1),
        (lambda n: n.integer("k", low=1, high=9), 3.0, 1),
        (lambda n: n.integer("k", low=0, high=9), True, 0),
        (lambda n: n.length("k"), "6 Months", "1 month"),
        (lambda n: n.length("k"), 6, "1 month"),
        (lambda n: n.clock("k"), "9:00", 0),
        (lambda n: n.clock("k"), "23:60", 0),
        (lambda n: n.clock("k"), "24:01", 0),
    ],
)
def test_a_wrong_value_is_one_issue_and_a_usable_value(read, value, fallback):
    root = node(k=value)
    assert read(root) == fallback
    issue = only(root.issues)
    assert issue.column == "k"
    assert issue.message.startswith("k is ")
    assert "allowed: " in issue.message


def test_each_bad_item_of_a_list_is_told():
    root = node(k=["x", "u", "v"])
    root.texts("k", allowed=("x",))
    assert [issue.value for issue in root.issues] == ["u", "v"]


def test_a_missing_key_is_told_once_however_often_it_is_asked_for():
    root = node()
    assert root.number("k", low=3.0) == 3.0
    assert only(root.issues).message == "k is missing"


@pytest.mark.parametrize("value", [[], "text", {"a": 1}])
def test_rows_have_to_be_a_list_of_tables(value):
    root = node(k=value)
    assert list(root.rows("k")) == []
    assert only(root.issues).message.endswith("a list of tables, at least one")


def test_a_row_that_is_no_table_is_told_by_its_number():
    root = node(k=[{"m": 1}, 5])
    for row in root.rows("k"):
        row.has("m")
    issue = root.issues[0]
    assert (issue.column, issue.value) == ("k[2]", "5")


def test_unknown_keys_are_found_at_every_depth():
    root = node(a="x", spare=1, deep={"b": "y", "other": 2}, rows=[{"m": 1, "odd": 3}])
    root.text("a")
    root.table("deep").text("b")
    for row in root.rows("rows"):
        row.integer("m", low=0, high=9)
    root.finish()
    assert sorted(issue.column for issue in root.issues) == [
        "deep.other",
        "rows[1].odd",
        "spare",
    ]
    assert all("no such key here" in issue.message for issue in root.issues)


def test_long_values_are_cut():
    root = node(k="x" * 500)
    root.flag("k")
    assert len(only(root.issues).value) == 60
