"""Which work is done where: sites here, in processes or on a cluster, picking up what an earlier run finished."""

from __future__ import annotations

import time
from array import array
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

from yieldsim.errors import InputError, PlaceError, Problem
from yieldsim.study import piece, store
from yieldsim.study.hands import Hands
from yieldsim.study.plan import SitePlan, StudyPlan
from yieldsim.weather import Weather

LoadWeather = Callable[[SitePlan], Iterable[Weather]]
Progress = Callable[[str, int, int], None]  # what is being done, steps finished, steps in all
Outcome = tuple[str, InputError | None, float]  # site, what is wrong with its weather, seconds it took


def site_pieces(
    plan: StudyPlan,
    load_weather: LoadWeather,
    folder: Path,
    *,
    hands: Hands | None = None,
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
    hands : Hands or None, processes that share the sites; None = this one alone
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
        When a process is ended from outside, the cluster cannot be reached, or it loses a site again and again; what
        is finished is kept.
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
    for name, error, took in _each(plan, waiting, load_weather, folder, hands, cluster):
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
    hands: Hands | None,
    cluster: str | None,
) -> Iterator[Outcome]:
    bare = replace(plan, sites=(), resolved={})  # what a site's work needs: not the thousand other sites
    if cluster is not None and sites:
        from yieldsim.study import cluster as elsewhere

        yield from elsewhere.each(cluster, one, bare, sites, load_weather, folder.absolute())
    elif hands is not None and sites:
        hands.settle()
        yield from hands.share(one, ((bare, site, load_weather, folder) for site in sites))
    else:
        for site in sites:
            yield one(bare, site, load_weather, folder)


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

    Raises
    ------
    PlaceError
        When a site's piece is not there any more.
    """
    found: dict[str, _Columns] = {}
    for site in plan.sites:
        content = store.read_piece(folder, store.file_stem(site.name), piece.key(plan, site))
        if content is None:
            raise PlaceError(f"what was finished of {site.name} is gone from {folder}: run again")
        for table, rows in content.items():
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
