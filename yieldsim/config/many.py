"""Sites by the hundred: a table with a row each, or a grid of weather with a cell each, written out as sites."""

from __future__ import annotations

import csv
import io
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from yieldsim.config.fields import nearest, quoted, show
from yieldsim.config.inputs import locate, read_text
from yieldsim.config.tree import Document
from yieldsim.errors import InputError, Problem

MAX_BYTES = 50_000_000
MAX_SITES = 200_000

#: Columns of a table of sites -> where each goes in a site of a study; blank cells are left out.
NUMBERS = ("latitude_deg", "longitude_deg", "elevation_m")
TEXTS = ("name", "weather", "format", "timestamps", "mounting", "horizon", "ground")
AIR = ("aod500", "angstrom_exponent", "water_cm", "ozone_atm_cm")
COLUMNS = (*TEXTS, *NUMBERS, *AIR, "allow_gaps")
SHARED = ("mounting", "atmosphere", "ground", "allow_gaps", "format", "timestamps")
KEYS = ("table", "grid", *SHARED)


@dataclass(frozen=True, slots=True)
class Cell:
    """One cell of a grid of weather.

    Parameters
    ----------
    row, column : int, its place along latitude and longitude, 0 first
    latitude_deg, longitude_deg : float [deg]
    elevation_m : float [m] or None where the grid does not tell
    """

    row: int
    column: int
    latitude_deg: float
    longitude_deg: float
    elevation_m: float | None = None


#: Gives the cells of a grid file that hold weather; raises InputError for a file that is no grid.
Cells = Callable[[Path, str], Sequence[Cell]]


def written_out(document: Document, folder: Path, cells: Cells | None) -> Document:
    """Return a study with ``sites: {table: ...}`` or ``{grid: ...}`` written out as a list of sites.

    Parameters
    ----------
    document : Document of the study
    folder : Path that relative paths start from
    cells : what reads the cells of a grid

    Raises
    ------
    InputError
        For a table or a grid that cannot be read, with its row.
    """
    study = document.data
    many = study.get("sites") if isinstance(study, dict) else None
    if not isinstance(many, dict):
        return document
    problems = _faults(document, many)
    if problems:
        raise InputError(problems)
    grid = _cells_of(many, folder, cells)
    if "table" in many:
        sites, lines = _of_table(many["table"], folder, grid, many.get("grid"))
        places = {i: (many["table"], line) for i, line in enumerate(lines)}
    else:
        sites, places = [_site_of(cell, many["grid"]) for cell in grid], {}
    if len(sites) > MAX_SITES:
        raise InputError(document.problem(("sites",), f"{len(sites)} sites", f"at most {MAX_SITES}"))
    shared = {name: many[name] for name in SHARED if name in many}
    data = {**study, "sites": [_with_shared(site, shared) for site in sites]}
    if "table" not in many:
        data.setdefault("keep", ["annual"])
    return replace(document, data=data, elsewhere=places)


def _faults(document: Document, many: Mapping[str, Any]) -> list[Problem]:
    faults = [
        document.problem(
            ("sites", str(key)), f"unknown key {quoted(key)}", f"{', '.join(KEYS)}{nearest(key, KEYS)}", of_key=True
        )
        for key in many
        if key not in KEYS
    ]
    if not {"table", "grid"} & set(many):
        faults.append(document.problem(("sites",), "neither `table` nor `grid`", "a list of sites, or one of the two"))
    faults.extend(
        document.problem(("sites", key), show(many[key]), "the path of a file")
        for key in ("table", "grid")
        if key in many and (not isinstance(many[key], str) or not many[key].strip())
    )
    return faults


def _cells_of(many: Mapping[str, Any], folder: Path, cells: Cells | None) -> Sequence[Cell]:
    if "grid" not in many:
        return ()
    if cells is None:
        raise InputError(Problem("", 0, "sites.grid", "a grid", "sites one by one: this use cannot read grids"))
    found = cells(locate(many["grid"], folder), many["grid"])
    if not found:
        raise InputError(Problem(many["grid"], 0, "", "no cell with weather", "at least one"))
    return found


def _site_of(cell: Cell, grid: str) -> dict[str, Any]:
    """Return a cell as a site: named by where it is."""
    north = f"{abs(cell.latitude_deg):.6g}{'N' if cell.latitude_deg >= 0 else 'S'}"
    east = f"{abs(cell.longitude_deg):.6g}{'E' if cell.longitude_deg >= 0 else 'W'}"
    site: dict[str, Any] = {
        "name": f"{north} {east}",
        "weather": grid,
        "cell": [cell.row, cell.column],
        "latitude_deg": cell.latitude_deg,
        "longitude_deg": cell.longitude_deg,
    }
    return site if cell.elevation_m is None else site | {"elevation_m": cell.elevation_m}


def _with_shared(site: dict[str, Any], shared: Mapping[str, Any]) -> dict[str, Any]:
    """Return a site with what all have in common where it says nothing of its own."""
    merged = {**shared, **site}
    air = shared.get("atmosphere"), site.get("atmosphere")
    if isinstance(air[0], dict) and isinstance(air[1], dict):
        merged["atmosphere"] = {**air[0], **air[1]}
    return merged


def _of_table(
    shown: str, folder: Path, cells: Sequence[Cell], grid: str | None
) -> tuple[list[dict[str, Any]], list[int]]:
    """Return the sites of a table and the line each stands in."""
    text = read_text(locate(shown, folder), shown, MAX_BYTES, lenient=True)
    lines = [(i, line) for i, line in enumerate(text.splitlines(), 1) if line.strip() and not line.startswith("#")]
    if not lines:
        raise InputError(Problem(shown, 0, "", "nothing", "a header line and a row for each site"))
    separator = max(",;\t", key=lines[0][1].count)
    rows = [next(csv.reader(io.StringIO(line), delimiter=separator), []) for _, line in lines]
    head = [cell.strip() for cell in rows[0]]
    problems = [
        Problem(shown, lines[0][0], name, "unknown or repeated column", f"{', '.join(COLUMNS)}{nearest(name, COLUMNS)}")
        for i, name in enumerate(head)
        if name not in COLUMNS or name in head[:i]
    ]
    needed = ("name", *(("latitude_deg", "longitude_deg") if grid else ("weather",)))
    problems += [
        Problem(shown, lines[0][0], name, "no such column", "a header with it") for name in needed if name not in head
    ]
    if problems:
        raise InputError(problems)
    sites: list[dict[str, Any]] = []
    known = _Grid.of(cells, grid) if grid is not None else None
    for (number, _), row in zip(lines[1:], rows[1:], strict=True):
        if len(row) > len(head):
            problems.append(Problem(shown, number, "", f"{len(row)} cells", f"{len(head)}, as in the header"))
            continue
        site = _row_site(shown, number, dict(zip(head, (cell.strip() for cell in row), strict=False)), problems)
        sites.append(site if known is None or "weather" in site else _placed(site, shown, number, known, problems))
    if not sites and not problems:
        problems = [Problem(shown, 0, "", "a header without rows", "a row for each site")]
    if problems:
        raise InputError(problems)
    return sites, [number for number, _ in lines[1:]]


def _row_site(shown: str, number: int, row: Mapping[str, str], problems: list[Problem]) -> dict[str, Any]:
    """Return a row as a site of a study; what is no number is noted."""
    site: dict[str, Any] = {name: row[name] for name in TEXTS if row.get(name)}
    air: dict[str, float] = {}
    for name in (*NUMBERS, *AIR):
        if row.get(name):
            try:
                (air if name in AIR else site)[name] = float(row[name])
            except ValueError:
                problems.append(Problem(shown, number, name, repr(row[name][:60]), "a number"))
    if air:
        site["atmosphere"] = air
    if said := row.get("allow_gaps", "").lower():
        if said in ("true", "false"):
            site["allow_gaps"] = said == "true"
        else:
            problems.append(Problem(shown, number, "allow_gaps", repr(said[:60]), "true | false"))
    return site


@dataclass(frozen=True, slots=True)
class _Grid:
    """The cells of a grid and where they lie, (n,) [deg]; ``reach`` is how far a place may be from a cell's middle."""

    name: str
    cells: Sequence[Cell]
    latitude_deg: NDArray[np.float64]
    longitude_deg: NDArray[np.float64]
    reach: float

    @classmethod
    def of(cls, cells: Sequence[Cell], name: str) -> _Grid:
        """Return it of cells; the reach is one step of the grid."""
        places = np.array([(cell.latitude_deg, cell.longitude_deg) for cell in cells]).reshape(-1, 2)
        steps = np.concatenate([np.diff(np.unique(places[:, k])) for k in (0, 1)])
        return cls(name, cells, places[:, 0], places[:, 1], float(steps.max(initial=0.0)) or 0.5)

    def nearest(self, latitude_deg: float, longitude_deg: float) -> tuple[Cell, float]:
        """Return the cell nearest to a place and how far it is [deg]."""
        east = np.abs(self.longitude_deg - longitude_deg) % 360
        apart = np.maximum(np.abs(self.latitude_deg - latitude_deg), np.minimum(east, 360 - east))
        nearest = int(np.argmin(apart))
        return self.cells[nearest], float(apart[nearest])


def _placed(site: dict[str, Any], shown: str, number: int, grid: _Grid, problems: list[Problem]) -> dict[str, Any]:
    """Return a site with the weather of the grid's nearest cell, which must lie within a cell's reach."""
    if not {"latitude_deg", "longitude_deg"} <= set(site):
        problems.append(Problem(shown, number, "latitude_deg", "no place", "latitude and longitude, or weather"))
        return site
    cell, apart = grid.nearest(site["latitude_deg"], site["longitude_deg"])
    if not apart <= grid.reach:
        found = f"{site['latitude_deg']:g}, {site['longitude_deg']:g}, {apart:.3g} deg from the nearest cell"
        allowed = f"a place within {grid.reach:.3g} deg of a cell of {grid.name}"
        problems.append(Problem(shown, number, "latitude_deg", found, allowed))
    site |= {"weather": grid.name, "cell": [cell.row, cell.column]}
    return site if cell.elevation_m is None else {"elevation_m": cell.elevation_m, **site}
