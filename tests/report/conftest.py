import importlib.util
from pathlib import Path

import pytest


def _factory():
    # Test folders are no packages, so a file beside the tests is loaded by its path.
    spec = importlib.util.spec_from_file_location("report_factory", Path(__file__).with_name("factory.py"))
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


@pytest.fixture(scope="session")
def factory():
    return _factory()


@pytest.fixture(scope="session")
def study(factory):
    """A study as most are: no chance, worth, ledger or gap pairs."""
    return factory.make()


@pytest.fixture(scope="session")
def full(factory):
    """A study with every part."""
    return factory.make(full=True)
