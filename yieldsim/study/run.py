"""Which work is done where: sites one after the other or in processes, picking up what an earlier run finished."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from concurrent.futures import ProcessPoolExecutor, as_completed
from multiprocessing import get_context
from pathlib import Path
from typing import Any

from yieldsim.errors import InputError, Problem
from yieldsim.study import piece, store
from yieldsim.study.plan import SitePlan, StudyPlan
from yieldsim.weather import Weather

LoadWeather = Callable[[SitePlan], Iterable[Weather]]
Progress = Callable[[str, int, int], None]  # what is being done, steps finished, steps in all


def site_pieces(
    plan: StudyPlan,
    load_weather: LoadWeather,
    folder: Path,
    *,
    workers: int = 1,
    fresh: bool = False,
    progress: Progress | None = None,
) -> tuple[dict[str, dict[str, Any]], dict[str, float]]:
    """Compute every site that is not already finished.

    Parameters
    ----------
    plan : StudyPlan
    load_weather : gives a site's screened weather; called in the process that computes the site
    folder : Path of the results
    workers : int, processes; 1 = this one
    fresh : compute again what an earlier run finished
    progress : called with (site, finished, all) as sites finish

    Returns
    -------
    pieces : site name -> its rows, in the study's order
    seconds : site name -> time it took; 0 for what an earlier run finished

    Raises
    ------
    InputError
        When weather of any site cannot be used; every other site is finished first.
    """
    done: dict[str, dict[str, Any]] = {}
    seconds: dict[str, float] = {}
    waiting: list[SitePlan] = []
    for site in plan.sites:
        found = None if fresh else store.read_piece(folder, store.file_stem(site.name), piece.key(plan, site))
        if found is None:
            waiting.append(site)
        else:
            done[site.name], seconds[site.name] = found, 0.0
    problems: list[Problem] = []
    for name, result, took in _each(plan, waiting, load_weather, folder, workers):
        if isinstance(result, InputError):
            problems.extend(result.problems)
        else:
            done[name], seconds[name] = result, took
        if progress is not None:
            progress(name, len(done) + len(problems), len(plan.sites))
    if problems:
        raise InputError(problems)
    return {site.name: done[site.name] for site in plan.sites}, seconds


Outcome = tuple[str, dict[str, Any] | InputError, float]


def _each(
    plan: StudyPlan, sites: Sequence[SitePlan], load_weather: LoadWeather, folder: Path, workers: int
) -> Iterator[Outcome]:
    if workers <= 1 or len(sites) <= 1:
        for site in sites:
            yield _one(plan, site, load_weather, folder)
        return
    # Fresh interpreters: a fork would copy the locks of threads that numpy and HDF5 may hold.
    with ProcessPoolExecutor(min(workers, len(sites)), mp_context=get_context("spawn")) as pool:
        futures = [pool.submit(_one, plan, site, load_weather, folder) for site in sites]
        for future in as_completed(futures):
            yield future.result()


def _one(plan: StudyPlan, site: SitePlan, load_weather: LoadWeather, folder: Path) -> Outcome:
    """Compute one site; bad weather is handed back so that the other sites go on."""
    start = time.perf_counter()
    try:
        return site.name, piece.compute(plan, site, load_weather(site), folder), time.perf_counter() - start
    except InputError as error:
        return site.name, InputError(error.problems), 0.0


def rows(pieces: Mapping[str, Mapping[str, Any]], table: str) -> list[dict[str, Any]]:
    """Return the rows of one table from all sites, in the study's order."""
    return [row for content in pieces.values() for row in content[table]]
