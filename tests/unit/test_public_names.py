"""What ``import foresaid`` offers."""

import subprocess
import sys

import pytest

import foresaid


def test_the_list_is_sorted_and_complete():
    assert foresaid.__all__ == sorted(foresaid.__all__)
    assert set(foresaid.__all__) == set(foresaid._HOMES)
    assert set(foresaid.__all__) < set(dir(foresaid))


@pytest.mark.parametrize("name", foresaid.__all__)
def test_each_name_loads_and_is_described(name):
    found = getattr(foresaid, name)
    assert found.__name__ == name
    assert found.__doc__


def test_other_names_are_refused():
    with pytest.raises(AttributeError, match="no attribute 'luck'"):
        foresaid.luck  # noqa: B018 - the access is what is tested


def test_the_import_alone_loads_nothing_heavy():
    code = "import sys, foresaid; print({'numpy', 'pandas', 'scipy'} & set(sys.modules))"
    done = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=True
    )
    assert done.stdout.strip() == "set()"
