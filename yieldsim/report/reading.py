"""A finished study's folder, read back into the result it was written from."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pandas as pd

from yieldsim.errors import InputError, Problem
from yieldsim.report import tables
from yieldsim.study import store
from yieldsim.study.result import TABLES, StudyResult

_ALWAYS = ("annual", "weather_quality", "standard")
_GAPS_AS_TEXT = ("annual", "yearly", "standard")  # a stack's gaps read 1.68/1.12


def read_result(folder: Path) -> StudyResult:
    """Return the result of a finished study from its folder.

    Raises
    ------
    InputError
        With every file that is missing or is not what a study writes.
    """
    problems: list[Problem] = []
    run = _run(folder, problems)
    found: dict[str, pd.DataFrame | None] = {}
    for name, file in TABLES.items():
        path = folder / file
        if not path.is_file():
            if name in _ALWAYS:
                problems.append(Problem(str(path), 0, "", "no such file", "the folder of a finished study"))
            continue
        try:
            found[name] = tables.read_table(path)
        except InputError as error:
            problems.extend(error.problems)
    problems.extend(_missing_columns(folder, found))
    if problems:
        raise InputError(problems)
    for name in _GAPS_AS_TEXT:
        table = found.get(name)
        if table is not None:
            gaps = [gap if isinstance(gap, str) else tables.format_number(gap) for gap in table["gap_ev"]]
            found[name] = table.assign(gap_ev=pd.Series(gaps, dtype=object))
    annual = found["annual"]
    sites = [] if annual is None else list(dict.fromkeys(annual["site"]))
    return StudyResult(
        study=str(run.get("study", folder.resolve().name)),
        resolved=dict(run.get("config", {})),
        run=run,
        spectra=store.open_spectra(folder, sites),
        region=store.open_region(folder),
        **found,  # type: ignore[arg-type]  # the four that must be there are, or we would not be here
    )


def _run(folder: Path, problems: list[Problem]) -> dict[str, Any]:
    path = folder / "run.json"
    try:
        content = json.loads(path.read_text(encoding="utf-8"))
    except OSError as error:
        problems.append(Problem(str(path), 0, "", str(error.strerror), "the folder of a finished study"))
        return {}
    except ValueError as error:
        problems.append(Problem(str(path), 0, "", f"not JSON ({error})", "the run.json a study wrote"))
        return {}
    if isinstance(content, dict):
        return content
    problems.append(Problem(str(path), 0, "", "JSON of another kind", "the run.json a study wrote"))
    return {}


_KEYS = {
    "annual": ("site", "mounting", "absorber", "gap_ev", "specific_yield_kwh_kwp", "energy_kwh_m2", "spectral_factor"),
    "monthly": ("site", "mounting", "absorber", "month", "specific_yield_kwh_kwp", "spectral_factor"),
    "weather_quality": ("site", "kind", "found", "done"),
    "standard": ("absorber", "gap_ev", "stc_efficiency", "rank_at_stc"),
}


def _missing_columns(folder: Path, found: dict[str, pd.DataFrame | None]) -> list[Problem]:
    return [
        Problem(str(folder / TABLES[name]), 1, column, "no such column", "a table as a study writes it")
        for name, columns in _KEYS.items()
        if (table := found.get(name)) is not None
        for column in columns
        if column not in table.columns
    ]
