"""Results to files a person reads: tables, plots and one page."""

from __future__ import annotations

from collections.abc import Collection
from pathlib import Path

from yieldsim.study import store
from yieldsim.study.result import StudyResult

ALL = frozenset({"annual", "monthly", "hourly", "spectra", "plots"})


def write(result: StudyResult, folder: str | Path, keep: Collection[str] = ALL) -> list[Path]:
    """Write a study's tables, plots and page into a folder.

    Parameters
    ----------
    result : StudyResult
    folder : where to; made if need be
    keep : parts to write; without ``plots`` no pictures, without ``monthly`` no monthly table

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
    return files + _pictures_and_page(result, folder, "plots" in keep)


def rebuild(folder: str | Path) -> list[Path]:
    """Make the plots and the page of a finished study anew from its files and return them.

    Raises
    ------
    InputError
        With every file that is missing or is not what a study writes.
    PlaceError
        Where the folder cannot be written.
    """
    from yieldsim.report import reading

    folder = Path(folder)
    return _pictures_and_page(reading.read_result(folder), folder, plots=True)


def _pictures_and_page(result: StudyResult, folder: Path, plots: bool) -> list[Path]:
    # Late imports: who only writes tables need not wait for the plotting library.
    from yieldsim.report.page import write_page

    files = []
    if plots:
        from yieldsim.report.plots import write_plots

        files += write_plots(result, folder / "plots")
    elif result.region is not None:  # a grid has its maps, whatever else is kept
        from yieldsim.report.plots import write_plots

        files += write_plots(result, folder / "plots", ("region",))
    return [*files, write_page(result, folder)]
