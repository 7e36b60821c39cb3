"""Records of physics and account cannot be changed once made: what a function was given is what it gave back."""

import dataclasses
import importlib
import pkgutil

import pytest

#: What is gathered part by part.
GATHERED = {"yieldsim.study.book.Book", "yieldsim.study.piece._Datasets"}


@pytest.mark.parametrize("package", ["sky", "device", "study"])
def test_records_are_frozen_and_slotted(package):
    home = importlib.import_module(f"yieldsim.{package}")
    found = 0
    for module in pkgutil.iter_modules(home.__path__, f"{home.__name__}."):
        for name, kind in vars(importlib.import_module(module.name)).items():
            if not (isinstance(kind, type) and dataclasses.is_dataclass(kind) and kind.__module__ == module.name):
                continue
            found += 1
            full = f"{module.name}.{name}"
            assert "__slots__" in vars(kind), full
            assert kind.__dataclass_params__.frozen is (full not in GATHERED), full
    assert found > 5
