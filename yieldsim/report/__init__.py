"""Results to files a person reads: tables, plots and one page."""

from __future__ import annotations

from collections.abc import Collection, Iterable
from pathlib import Path

from yieldsim.study import store
from yieldsim.study.hands import Hands
from yieldsim.study.result import StudyResult

#: Every picture a study may have.
PICTURES = (
    "ledger", "annual_yield", "spectral_factor", "energy_over_gap", "spectra", "gap_pairs", "generation", "region",
    "margins", "regret", "break_even", "causes",
)  # fmt: skip
ALL = frozenset({"annual", "monthly", "hourly", "spectra", "plots"})


def write(
    result: StudyResult, folder: str | Path, keep: Collection[str] = ALL, hands: Hands | None = None
) -> list[Path]:
    """Write a study's tables, plots and page into a folder.

    Parameters
    ----------
    result : StudyResult
    folder : where to; made if need be
    keep : parts to write; without ``plots`` no pictures, without ``monthly`` no monthly table
    hands : Hands or None, processes that share the pictures; None = this one alone

    Returns
    -------
    list of Path, the files written

    Raises
    ------
    PlaceError
        Where the folder cannot be written.
    """
    from yieldsim.report import tables

    folder = Path(folder)
    skipped = set() if "monthly" in keep else {"monthly.csv"}
    files = tables.write_tables(result, folder, skipped)
    if result.region is not None:
        store.write_netcdf(folder / store.REGION, result.region)
        files.append(folder / store.REGION)
    return files + _pictures_and_page(result, folder, "plots" in keep, hands)


def prepare() -> None:
    """Import what writing needs besides the pictures."""
    from yieldsim.report import page, tables  # noqa: F401


def rebuild(folder: str | Path) -> list[Path]:
    """Make the plots and the page of a finished study anew from its files and return them.

    Raises
    ------
    InputError
        With every file that is missing or is not what a study writes.
    PlaceError
        Where the folder cannot be written or is in use by a run.
    """
    from yieldsim.report import reading

    folder = Path(folder)
    result = reading.read_result(folder)
    with store.held(folder):
        return _pictures_and_page(result, folder, True, None)


def _pictures_and_page(result: StudyResult, folder: Path, plots: bool, hands: Hands | None) -> list[Path]:
    # Late imports: who only writes tables need not wait for the plotting library.
    from yieldsim.report.page import write_page

    names: tuple[str, ...] = ()
    if plots or result.region is not None:  # a grid has its maps, whatever else is kept
        names = PICTURES if plots else ("region",)
    calls = [(result, folder / "plots", name) for name in names]
    drawn: Iterable[list[Path]] = (_draw(*call) for call in calls) if hands is None else hands.share(_draw, calls)
    page = write_page(result, folder)
    return [*sorted(file for files in drawn for file in files), page]


def _draw(result: StudyResult, folder: Path, name: str) -> list[Path]:
    from yieldsim.report.plots import write_plots

    return write_plots(result, folder, (name,))
