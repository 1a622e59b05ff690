import inspect

from foresaid.model import errors
from foresaid.model.issues import Issue


def tree():
    return [
        one
        for _, one in inspect.getmembers(errors, inspect.isclass)
        if issubclass(one, errors.ForesaidError)
    ]


def test_exit_statuses_are_one_to_five_and_unique():
    statuses = {one.exit_status: one.__name__ for one in tree()}
    assert statuses == {
        1: "ForesaidError",
        2: "UsageError",
        3: "InputRejected",
        4: "LedgerError",
        5: "CheckFailed",
    }
    assert len(statuses) == len(tree())


def test_a_fault_carries_its_issues():
    issue = Issue("bad-date", "no such day")
    fault = errors.InputRejected("calls.csv was refused.", [issue])
    assert str(fault) == "calls.csv was refused."
    assert fault.issues == (issue,)
    assert errors.UsageError("no").issues == ()


def test_every_fault_is_one_of_the_program():
    assert all(issubclass(one, errors.ForesaidError) for one in tree())
    assert not issubclass(errors.ForesaidError, ValueError)
