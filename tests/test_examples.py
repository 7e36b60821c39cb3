"""Examples in docstrings run as they stand, on the installed package."""

import doctest
import importlib
import pkgutil

import pytest

import yieldsim

MODULES = sorted(
    module.name
    for module in pkgutil.walk_packages(yieldsim.__path__, "yieldsim.")
    if module.name not in ("yieldsim.__main__", "yieldsim.study.cluster")
)


@pytest.mark.parametrize("name", MODULES)
def test_examples_hold(name):
    found = doctest.testmod(importlib.import_module(name))
    assert found.failed == 0


def test_the_api_has_examples():
    finder = doctest.DocTestFinder()
    with_examples = {
        each.name.rpartition(".")[2] for each in finder.find(importlib.import_module("yieldsim.api")) if each.examples
    }
    assert {"api", "load_study", "verify"} <= with_examples


def test_all_of_the_api_is_there():
    for name in yieldsim.__all__:
        assert getattr(yieldsim, name) is not None
    with pytest.raises(AttributeError, match="no attribute"):
        _ = yieldsim.nothing
