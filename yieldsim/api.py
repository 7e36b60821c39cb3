"""Load a study, run it, get the result: what a notebook uses and the commands call; where all parts meet.

>>> import tempfile
>>> from pathlib import Path
>>> import yieldsim
>>> folder = Path(tempfile.mkdtemp())
>>> _ = (folder / "mine.yaml").write_text('''
... study: mine
... mounting: {tilt_deg: 30, azimuth_deg: 180}
... sites: [{name: Greensboro, weather: "pvlib:723170TYA.CSV"}]
... absorbers: [{name: silicon, like: c-si}, {name: film, like: cdte}]
... keep: [annual, monthly]
... ''', encoding="utf-8")
>>> plan = yieldsim.load_study(folder / "mine.yaml")
>>> result = yieldsim.run_study(plan, folder / "results")
>>> table = result.annual.set_index("absorber")
>>> bool(table.loc["film", "spectral_factor"] > table.loc["silicon", "spectral_factor"])
True
>>> spectra = yieldsim.site_spectra(plan, "Greensboro")
>>> spectra["beam"].dims
('time', 'band')
"""

from __future__ import annotations

import platform
import sys
import time
from collections.abc import Iterator, Mapping, Sequence
from contextlib import nullcontext
from dataclasses import replace
from datetime import UTC, datetime
from difflib import get_close_matches
from functools import lru_cache, partial
from importlib import metadata
from itertools import combinations
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd
import xarray as xr

import yieldsim
from yieldsim import config, readers, report, screen
from yieldsim.config import library
from yieldsim.config.inputs import locate, sha256
from yieldsim.config.many import Cell
from yieldsim.device.stack import gap_label
from yieldsim.errors import InputError, Problem
from yieldsim.study import (
    chance,
    chance_store,
    compare,
    datasets,
    generation,
    hourly,
    pairs,
    portfolio,
    ready,
    region,
    run,
    store,
    sweep,
    worth,
)
from yieldsim.study.annual import Ratings
from yieldsim.study.hands import Hands
from yieldsim.study.plan import ColumnsPlan, Row, SitePlan, StudyPlan
from yieldsim.study.result import StudyResult, ideal_names, records, responses_table
from yieldsim.weather import Weather

if TYPE_CHECKING:
    from yieldsim import checks

_VERSIONS_OF = ("numpy", "scipy", "pandas", "xarray", "pvlib", "numba", "h5py", "h5netcdf", "matplotlib", "pydantic")


def load_study(path: str | Path) -> StudyPlan:
    """Read and validate a study file.

    Parameters
    ----------
    path : str or Path of the YAML file

    Returns
    -------
    StudyPlan

    Raises
    ------
    InputError
        With everything that is wrong, each with file, line, key path, what was found and what is allowed.

    Examples
    --------
    >>> import tempfile
    >>> path = Path(tempfile.mkdtemp(), "wrong.yaml")
    >>> _ = path.write_text("study: wrong\\nsites: []\\nabsorbers: [{name: silicon, like: c-si}]\\n", encoding="utf-8")
    >>> try:
    ...     load_study(path)
    ... except InputError as error:
    ...     print([(problem.line, problem.where) for problem in error.problems])
    [(2, 'sites')]
    """
    return config.load(Path(path), grid_cells)


def grid_cells(path: Path, shown: str) -> list[Cell]:
    """Return the cells of a grid of weather, as `config.many` wants them."""
    from yieldsim.readers import grid

    found = grid.cells(path, shown)
    return [Cell(each.row, each.column, each.latitude_deg, each.longitude_deg, each.elevation_m) for each in found]


def load_weather(site: SitePlan) -> Iterator[Weather]:
    """Read and screen the weather of a site, one Weather a year, one year in memory."""
    overrides = {name: getattr(site, name) for name in ("latitude_deg", "longitude_deg", "elevation_m")}
    files = [
        readers.File(file.path, file.shown, file.format, file.timestamps, file.cell, _column_map(file.columns))
        for file in site.weather
    ]
    # Not a loop, whose variable would hold the year as read beside the year as screened.
    yield from map(partial(screen.screen, allow_gaps=site.allow_gaps), readers.years(files, **overrides))
    for file in site.weather:
        where = locate(file.path, Path())
        if _digest(where, _state(where)) != file.sha256:
            found = "content other than when the study was loaded"
            raise InputError(
                Problem(file.shown, 0, "", found, "a file that stays as it is while it is used: run again")
            )


@lru_cache(maxsize=64)  # a grid of thousands of cells is one file
def _digest(path: Path, _state: tuple[int, ...]) -> str:
    return sha256(path)


def _state(path: Path) -> tuple[int, ...]:
    """Return what changes when a file is written: a folder is looked at once in a process."""
    if path.is_dir():
        return ()
    found = path.stat()
    return found.st_mtime_ns, found.st_size, found.st_ino


def _column_map(columns: ColumnsPlan | None) -> readers.ColumnMap | None:
    if columns is None:
        return None
    named = {name: readers.Column(column, unit) for name, column, unit in columns.columns}
    return readers.ColumnMap(columns.time, named, columns.time_format, columns.missing)


def run_study(
    plan: StudyPlan,
    out: str | Path | None = None,
    *,
    workers: int | Hands = 1,
    cluster: str | None = None,
    fresh: bool = False,
    progress: run.Progress | None = None,
) -> StudyResult:
    """Compute a study and write its files.

    Parameters
    ----------
    plan : StudyPlan, from `load_study`
    out : folder of the results; ``outputs/<study>`` under the current folder unless given
    workers : int, processes that share the sites and the pictures; 1 = this one alone; or such processes, begun before
    cluster : str or None, ``tcp://HOST:PORT`` of a Dask scheduler whose workers share the sites instead
    fresh : compute again what an earlier run into the same folder finished
    progress : called with (what, steps finished, steps in all)

    Returns
    -------
    StudyResult

    Raises
    ------
    InputError
        When weather cannot be used, or changed while it was; sites that can are finished and kept.
    PlaceError
        When the folder cannot be written or is in use by another run.
    """
    start, clock = datetime.now(UTC), time.perf_counter()
    folder = Path("outputs", store.file_stem(plan.name)) if out is None else Path(out)
    own = Hands(workers) if isinstance(workers, int) and workers > 1 else nullcontext()
    with store.held(folder), own as made:
        hands = workers if isinstance(workers, Hands) else made
        if hands is not None:
            hands.begin(ready.power, plan.absorbers, load_weather)
            report.prepare()  # while the others compile
        seconds = run.site_pieces(
            plan, load_weather, folder, hands=hands, cluster=cluster, fresh=fresh, progress=progress
        )
        details: dict[str, Any] = {
            "study": plan.name,
            "yieldsim": yieldsim.__version__,
            "started": start.strftime("%Y-%m-%dT%H:%M:%SZ"),
            "python": platform.python_version(),
            "platform": platform.platform(),
            "versions": {name: metadata.version(name) for name in _VERSIONS_OF},
            "inputs": {file.shown: file.sha256 for site in plan.sites for file in site.weather} | dict(plan.inputs),
            "absorbers": [f"{name}: {finding}" for name, finding in plan.findings],
            "seconds": {name: round(value, 3) for name, value in seconds.items()},
            "folder": plan.folder,
            "config": dict(plan.resolved),
        }
        details["fingerprint"] = store.fingerprint(details["yieldsim"], details["inputs"], details["config"])[:16]
        result = _gathered(plan, folder, details)
        if progress is not None:
            progress("report", len(plan.sites), len(plan.sites))
        files = report.write(result, folder, plan.keep, hands)
        details |= {
            "tables": {file.name: sha256(file) for file in files if file.suffix == ".csv"},
            "seconds_in_all": round(time.perf_counter() - clock, 3),
            "peak_memory_mb": peak_memory_mb(),
        }
        store.write_json(folder / "run.json", details)
    return replace(result, run=details)


def _gathered(plan: StudyPlan, folder: Path, details: dict[str, Any]) -> StudyResult:
    """Return the result of a study whose sites are all finished."""
    found = run.tables(plan, folder)

    def frame(name: str, more: Sequence[dict[str, Any]] = ()) -> pd.DataFrame | None:
        parts = [pd.DataFrame(each) for each in (found.get(name), more) if each]
        return pd.concat(parts, ignore_index=True) if parts else None

    standard = standard_table(plan)
    names = [site.name for site in plan.sites]
    paired = frame("gap_pairs", [] if plan.gap_pairs is None else pairs.standard_rows(plan.gap_pairs))
    standing = [] if paired is None else pairs.material_rows(records(paired), paired_materials(plan))
    films = generation.rows(plan.absorbers, plan.films)
    annual, quality, ledger = frame("annual"), frame("weather_quality"), frame("ledger")
    more = _decision(plan, folder, found) | {name: frame(name) for name in chance.TABLES}
    assert annual is not None  # every site has rows of both
    assert quality is not None
    return StudyResult(
        study=plan.name,
        resolved=plan.resolved,
        annual=annual,
        yearly=frame("yearly"),
        monthly=frame("monthly"),
        gap_sweep=frame("gap_sweep", [] if plan.gap_sweep is None else sweep.standard_rows(plan.gap_sweep)),
        weather_quality=quality,
        standard=standard,
        gap_pairs=paired,
        gap_pair_materials=pd.DataFrame(standing) if standing else None,
        generation=pd.DataFrame(films) if films else None,
        ledger=None if ledger is None else ledger.fillna(0.0),
        region=region.dataset(plan, found["annual"], found.get("gap_sweep"), ideal_names(plan.resolved))
        if region.is_region(plan)
        else None,
        responses=responses_table(plan.absorbers),
        by_hour=frame("by_hour"),
        **more,
        spectra=store.open_spectra(folder, names),
        run=details,
    )


def _decision(
    plan: StudyPlan, folder: Path, found: Mapping[str, Mapping[str, Sequence[Any]]]
) -> dict[str, pd.DataFrame | None]:
    """Return the tables that several sites, and money, add to a study's."""
    weights = portfolio.weights_of([site.name for site in plan.sites], plan.portfolio)
    regrets = portfolio.regret_rows(found["annual"], weights, ideal_names(plan.resolved))
    made: dict[str, list[Row]] = {"regret": regrets}
    if len(plan.sites) > 1:
        made["portfolio"] = portfolio.portfolio_rows(regrets)
    if len(plan.sites) > 1 and found.get("gap_sweep"):
        made["portfolio_gap"] = portfolio.gap_rows(found["gap_sweep"], weights)
    if plan.worth is not None:
        sold = [dict(zip(found["sold"], row, strict=True)) for row in zip(*found["sold"].values(), strict=True)]
        ratings = Ratings.of(plan.absorbers)
        drawn = None if plan.chance is None else _drawn(plan, folder, found["annual"])
        made["worth"] = worth.rows(plan.worth, plan.absorbers, ratings, plan.reference, sold, drawn)
    return {name: pd.DataFrame(rows) for name, rows in made.items()}


def _drawn(plan: StudyPlan, folder: Path, annual: Mapping[str, Sequence[Any]]) -> worth.Draws:
    """Return each draw's yield over the study's: per area where area limits the plant, else per rated power."""
    measure = (
        "energy_kwh_m2" if plan.worth is not None and plan.worth.limited_by == "area" else "specific_yield_kwh_kwp"
    )
    keys = zip(annual["site"], annual["mounting"], annual["absorber"], strict=True)
    base = dict(zip(keys, annual[measure], strict=True))
    return {
        (site, mounting, absorber): getattr(draws, measure)[:, m, a] / base[site, mounting, absorber]
        for site, draws in chance_store.open_draws(folder, [site.name for site in plan.sites]).items()
        for m, mounting in enumerate(draws.mountings)
        for a, absorber in enumerate(draws.absorbers)
    }


def paired_materials(plan: StudyPlan) -> list[tuple[str, float, float]]:
    """Return (name, top gap, bottom gap [eV]) of pairs of today: the study's, the library's, and its films on others.

    A film of the library stands on any other of it whose gap is narrower by 0.3 eV; nearer ones make no pair.
    """
    entries = [library.entry(name).absorber for name in library.names()]
    pairs_of_two = [each for each in (*plan.absorbers, *entries) if len(each.junctions) == 2]
    found = {each.gaps_ev: each.name for each in reversed(pairs_of_two)}
    single = sorted((each for each in entries if len(each.junctions) == 1), key=lambda each: each.gaps_ev)
    for lower, upper in combinations(single, 2):
        if upper.gaps_ev[0] - lower.gaps_ev[0] >= 0.3:
            found.setdefault((upper.gaps_ev[0], lower.gaps_ev[0]), f"{upper.name} on {lower.name}")
    return [(name, top, bottom) for (top, bottom), name in sorted(found.items())]


def site_spectra(plan: StudyPlan, name: str, start: int | None = None, end: int | None = None) -> xr.Dataset:
    """Return the band spectra of one site's lit intervals, on the horizontal and on each of its mountings.

    Parameters
    ----------
    plan : StudyPlan
    name : str, a site of the plan
    start, end : int or None [s], UTC unix seconds; intervals that start from ``start`` to before ``end``

    Returns
    -------
    Dataset, CF conventions, dims (time, band); attributes tell the inputs that made it

    Raises
    ------
    InputError
        For a site the study does not have, or a stretch without a lit interval.
    """
    names = [site.name for site in plan.sites]
    if name not in names:
        near = get_close_matches(name, names, 1, 0.4)
        hint = f"; did you mean {near[0]!r}?" if near else ""
        raise InputError(Problem("", 0, "--site", f"{name!r}{hint}", ", ".join(names)))
    site = plan.sites[names.index(name)]
    parts = []
    for weather in load_weather(site):
        sky = hourly.site_sky(site, weather)
        when = sky.weather.time[sky.lit]
        chosen = np.flatnonzero((when >= (start if start is not None else when[0])) & (when < (end or when[-1] + 1)))
        if chosen.size:
            parts.append(datasets.all_spectra_dataset(site.name, sky, site.mountings, chosen))
    if not parts:
        raise InputError(Problem("", 0, "--from, --to", "no interval with light", "a stretch within the weather file"))
    dataset = (
        parts[0]
        if len(parts) == 1
        else xr.concat(parts, "time", data_vars="minimal", coords="minimal", compat="equals")
    )
    dataset.attrs["input_sha256"] = "; ".join(f"{file.shown}: {file.sha256}" for file in site.weather)
    dataset.attrs["yieldsim_version"] = yieldsim.__version__
    return dataset


def verify() -> Iterator[checks.Outcome]:
    """Yield every check of this installation against published references.

    Examples
    --------
    >>> first = next(verify())
    >>> first.passed
    True
    """
    entries = [library.entry(name) for name in library.names()]
    absorbers = {entry.name: entry.absorber for entry in entries}
    published = {
        entry.name: {name: (found.value, found.source) for name, found in entry.published.items()} for entry in entries
    }
    from yieldsim import checks  # late: solvers that only this needs

    return checks.outcomes(absorbers, published)


def standard_table(plan: StudyPlan) -> pd.DataFrame:
    """Return what each absorber does at standard test conditions, one row per absorber."""
    standard = Ratings.standard(plan.absorbers)
    efficiency = standard.efficiency * [absorber.area_fraction for absorber in plan.absorbers]
    return pd.DataFrame(
        {
            "absorber": [absorber.name for absorber in plan.absorbers],
            "terminals": [absorber.terminals for absorber in plan.absorbers],
            "gap_ev": [gap_label(absorber) for absorber in plan.absorbers],
            "stc_efficiency": efficiency,
            "jsc_a_m2": standard.short_circuit,
            "voc_v": standard.open_circuit,
            "ff": standard.fill_factor,
            "power_temperature_coefficient_per_k": standard.power_temperature_coefficient,
            "rank_at_stc": compare.rank(efficiency),
        }
    )


def peak_memory_mb() -> float | None:
    """Return the most memory this process has held [MB], where the system tells."""
    try:
        import resource
    except ImportError:
        return None
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    return round(float(peak) / (2**20 if sys.platform == "darwin" else 2**10), 1)
