"""yieldsim: which light absorber wins at which site, by how much, how surely.

    plan = yieldsim.load_study("mine.yaml")
    result = yieldsim.run_study(plan, "results")
    result.annual                                      # pandas
    yieldsim.site_spectra(plan, "Saltmarsh Point")     # xarray

See `yieldsim.api` for an example that runs as it stands.
"""

from __future__ import annotations

import importlib
from typing import Any

__version__ = "0.1.0"

_HOME = {
    "InputError": "yieldsim.errors",
    "PlaceError": "yieldsim.errors",
    "load_study": "yieldsim.api",
    "load_weather": "yieldsim.api",
    "run_study": "yieldsim.api",
    "site_spectra": "yieldsim.api",
    "verify": "yieldsim.api",
}

__all__ = ["__version__", *sorted(_HOME)]


def __getattr__(name: str) -> Any:
    if name in _HOME:
        return getattr(importlib.import_module(_HOME[name]), name)
    raise AttributeError(f"module 'yieldsim' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
