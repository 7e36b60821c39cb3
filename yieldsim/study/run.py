"""Which work is done where: sites here, in processes or on a cluster, picking up what an earlier run finished."""

from __future__ import annotations

import time
from array import array
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from concurrent.futures import FIRST_COMPLETED, Future, ProcessPoolExecutor, wait
from dataclasses import replace
from multiprocessing import get_context
from pathlib import Path
from typing import Any

from yieldsim.errors import InputError, Problem
from yieldsim.study import piece, store
from yieldsim.study.plan import SitePlan, StudyPlan
from yieldsim.weather import Weather

LoadWeather = Callable[[SitePlan], Iterable[Weather]]
Progress = Callable[[str, int, int], None]  # what is being done, steps finished, steps in all
Outcome = tuple[str, InputError | None, float]  # site, what is wrong with its weather, seconds it took

_AHEAD = 4  # tasks waiting for each process: it never idles, and no more is held than that


def site_pieces(
    plan: StudyPlan,
    load_weather: LoadWeather,
    folder: Path,
    *,
    workers: int = 1,
    cluster: str | None = None,
    fresh: bool = False,
    progress: Progress | None = None,
) -> dict[str, float]:
    """Compute every site that is not already finished; what is finished lies on disk, a piece a site.

    Parameters
    ----------
    plan : StudyPlan
    load_weather : gives a site's screened weather; called in the process that computes the site
    folder : Path of the results
    workers : int, processes; 1 = this one
    cluster : str or None, address of a Dask scheduler whose workers see the same paths
    fresh : compute again what an earlier run finished
    progress : called with (site, finished, all) as sites finish

    Returns
    -------
    site name -> seconds it took; 0 for what an earlier run finished

    Raises
    ------
    InputError
        When weather of any site cannot be used; every other site is finished first.
    PlaceError
        When the cluster cannot be reached or loses a site again and again; what is finished is kept.
    """
    seconds: dict[str, float] = {}
    waiting: list[SitePlan] = []
    for site in plan.sites:
        if fresh or store.read_piece(folder, store.file_stem(site.name), piece.key(plan, site)) is None:
            waiting.append(site)
        else:
            seconds[site.name] = 0.0
    problems: list[Problem] = []
    refused = 0
    for name, error, took in _each(plan, waiting, load_weather, folder, workers, cluster):
        if error is None:
            seconds[name] = took
        else:
            problems.extend(error.problems)
            refused += 1
        if progress is not None:
            progress(name, len(seconds) + refused, len(plan.sites))
    if problems:
        raise InputError(problems)
    return seconds


def _each(
    plan: StudyPlan,
    sites: Sequence[SitePlan],
    load_weather: LoadWeather,
    folder: Path,
    workers: int,
    cluster: str | None,
) -> Iterator[Outcome]:
    bare = replace(plan, sites=(), resolved={})  # what a site's work needs: not the thousand other sites
    if cluster is not None and sites:
        from yieldsim.study import cluster as elsewhere

        yield from elsewhere.each(cluster, one, bare, sites, load_weather, folder.absolute())
    elif workers <= 1 or len(sites) <= 1:
        for site in sites:
            yield one(bare, site, load_weather, folder)
    else:
        yield from _in_processes(bare, sites, load_weather, folder, min(workers, len(sites)))


def _in_processes(
    plan: StudyPlan, sites: Sequence[SitePlan], load_weather: LoadWeather, folder: Path, workers: int
) -> Iterator[Outcome]:
    # Fresh interpreters: a fork would copy the locks of threads that numpy and HDF5 may hold.
    with ProcessPoolExecutor(workers, mp_context=get_context("spawn")) as pool:
        left = iter(sites)
        running: set[Future[Outcome]] = set()
        while True:
            for site in left:
                running.add(pool.submit(one, plan, site, load_weather, folder))
                if len(running) >= _AHEAD * workers:
                    break
            if not running:
                return
            done, running = wait(running, return_when=FIRST_COMPLETED)
            for future in done:
                yield future.result()


def one(plan: StudyPlan, site: SitePlan, load_weather: LoadWeather, folder: Path) -> Outcome:
    """Compute one site; bad weather is handed back so that the other sites go on."""
    start = time.perf_counter()
    try:
        piece.compute(plan, site, load_weather(site), folder)
    except InputError as error:
        return site.name, InputError(error.problems), 0.0
    return site.name, None, time.perf_counter() - start


# --------------------------------------------------------------------------------------------- the pieces together


def tables(plan: StudyPlan, folder: Path) -> dict[str, Mapping[str, Sequence[Any]]]:
    """Return every table of a finished study as columns, read from its pieces one at a time, in the study's order.

    Returns
    -------
    table -> column -> values; numbers as compact arrays, so that thousands of sites fit
    """
    found: dict[str, _Columns] = {}
    for site in plan.sites:
        content = store.read_piece(folder, store.file_stem(site.name), piece.key(plan, site))
        for table, rows in (content or {}).items():
            columns = found.setdefault(table, _Columns())
            for row in rows:
                columns.add(row)
    return {table: columns.values for table, columns in found.items()}


class _Columns:
    """Rows taken apart into columns; a cell that a row lacks is not a number."""

    def __init__(self) -> None:
        self.values: dict[str, Any] = {}
        self.rows = 0
        self.words: dict[str, str] = {}

    def add(self, row: Mapping[str, Any]) -> None:
        """Add a row."""
        for name, value in row.items():
            column = self.values.get(name)
            if column is None:
                column = self.values[name] = [] if isinstance(value, str) else _numbers(value)
                column.extend([float("nan")] * self.rows)
            column.append(self.words.setdefault(value, value) if isinstance(value, str) else value)
        self.rows += 1
        for name, column in self.values.items():
            if len(column) < self.rows:
                if isinstance(column, array) and column.typecode == "q":
                    column = self.values[name] = array("d", column)
                column.append(float("nan"))


def _numbers(value: Any) -> Any:
    """Return an empty column for numbers of a kind."""
    return array("q") if isinstance(value, int) else array("d")
