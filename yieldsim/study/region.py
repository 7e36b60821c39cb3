"""A grid's results as one dataset: latitude x longitude x absorber."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from yieldsim.study.compare import MEASURES
from yieldsim.study.plan import SitePlan, StudyPlan
from yieldsim.study.portfolio import choices

Array = NDArray[np.float64]
Columns = Mapping[str, Sequence[Any]]

_UNITS = {
    "hours": "h",
    "poa_kwh_m2": "kWh m-2",
    "specific_yield_kwh_kwp": "kWh kW-1",
    "energy_kwh_m2": "kWh m-2",
}
_RANKS = ("rank_by_yield", "rank_by_energy")


def is_region(plan: StudyPlan) -> bool:
    """Return whether every site of a study is a cell of one grid."""
    files = {site.weather[0].path for site in plan.sites}
    return len(files) == 1 and all(_cell(site) is not None for site in plan.sites)


def dataset(plan: StudyPlan, annual: Columns, gap_sweep: Columns | None, ideal: Sequence[str] = ()) -> xr.Dataset:
    """Return the annual results of a grid of sites.

    Parameters
    ----------
    plan : StudyPlan whose sites are cells of a grid
    annual : columns of ``annual.csv``
    gap_sweep : columns of ``gap_sweep.csv`` or None
    ideal : absorbers that stand for a limit no device reaches: none of them wins where two others remain

    Returns
    -------
    Dataset, CF: measures and ranks over (mounting, absorber, latitude, longitude); the best absorber by energy and its
    margin over the next best, and the best gap of each quality, over (mounting, [quality,] latitude, longitude).
    Cells without weather are NaN.
    """
    latitude, longitude, at = _places(plan.sites)
    mountings = list(dict.fromkeys(annual["mounting"]))
    absorbers = [absorber.name for absorber in plan.absorbers]
    shape = (len(mountings), len(absorbers), len(latitude), len(longitude))
    measures = {name: np.full(shape, np.nan) for name in (*MEASURES, *_RANKS)}
    mounting_of = {name: i for i, name in enumerate(mountings)}
    absorber_of = {name: i for i, name in enumerate(absorbers)}
    where = (
        np.array([mounting_of[name] for name in annual["mounting"]]),
        np.array([absorber_of[name] for name in annual["absorber"]]),
        *np.array([at[name] for name in annual["site"]]).T,
    )
    for name, values in measures.items():
        values[where] = np.asarray(annual[name], dtype=np.float64)
    dims = ("mounting", "absorber", "latitude", "longitude")
    variables: dict[str, Any] = {
        name: (dims, values, {"units": _UNITS.get(name, "1"), "long_name": name.replace("_", " ")})
        for name, values in measures.items()
        if name not in ("hours", "poa_kwh_m2")
    }
    light = measures["poa_kwh_m2"].max(axis=1)
    flat = ("mounting", "latitude", "longitude")
    variables["poa_kwh_m2"] = (flat, light, {"units": "kWh m-2", "long_name": "light on the plane a year"})
    real = choices(absorbers, ideal)
    chosen = np.array([i for i, name in enumerate(absorbers) if name in real])
    winner, margin = _winners(measures["energy_kwh_m2"][:, chosen])
    best = np.where(winner >= 0, chosen[winner], -1).astype(np.int32)
    variables["best_absorber"] = (
        flat,
        best,
        {"units": "1", "long_name": "number of the absorber with the most energy per area, -1 without weather"},
    )
    variables["margin"] = (flat, margin, {"units": "1", "long_name": "its energy over that of the next best, less 1"})
    coordinates: dict[str, Any] = {
        "mounting": ("mounting", np.array(mountings, dtype=str)),
        "absorber": ("absorber", np.array(absorbers, dtype=str)),
        "latitude": ("latitude", latitude, {"units": "degrees_north", "standard_name": "latitude"}),
        "longitude": ("longitude", longitude, {"units": "degrees_east", "standard_name": "longitude"}),
    }
    if gap_sweep:
        qualities = list(dict.fromkeys(gap_sweep["quality"]))
        found = _best_gaps(gap_sweep, qualities, mounting_of, at, light.shape)
        dims_of_gaps = ("mounting", "quality", "latitude", "longitude")
        variables["best_gap_ev"] = (dims_of_gaps, found, {"units": "eV", "long_name": "gap with the most energy"})
        coordinates["quality"] = ("quality", np.array(qualities, dtype=str))
    attributes = {
        "Conventions": "CF-1.11",
        "title": plan.name,
        "source": f"yieldsim from {plan.sites[0].weather[0].shown}",
    }
    return xr.Dataset(variables, coordinates, attributes)


def _cell(site: SitePlan) -> tuple[int, int] | None:
    return site.weather[0].cell if len(site.weather) == 1 else None


def _places(sites: Sequence[SitePlan]) -> tuple[Array, Array, dict[str, tuple[int, int]]]:
    """Return latitudes and longitudes of the part of the grid that is used, and each site's place in it."""
    cells = {site.name: cell for site in sites if (cell := _cell(site)) is not None}
    rows, columns = (sorted({cell[k] for cell in cells.values()}) for k in (0, 1))
    row_of, column_of = ({number: i for i, number in enumerate(numbers)} for numbers in (rows, columns))
    latitude, longitude = np.full(len(rows), np.nan), np.full(len(columns), np.nan)
    for site in sites:
        row, column = cells[site.name]
        latitude[row_of[row]] = np.nan if site.latitude_deg is None else site.latitude_deg
        longitude[column_of[column]] = np.nan if site.longitude_deg is None else site.longitude_deg
    return latitude, longitude, {name: (row_of[row], column_of[column]) for name, (row, column) in cells.items()}


def _winners(energy: Array) -> tuple[NDArray[np.int64], Array]:
    """Return the best absorber's number and its margin of energy (mounting, absorber, lat, lon) over the next one's."""
    known = np.isfinite(energy).all(axis=1)
    ordered = np.sort(np.where(np.isfinite(energy), energy, -np.inf), axis=1)
    best = np.where(known, np.argmax(np.nan_to_num(energy, nan=-np.inf), axis=1), -1)
    if energy.shape[1] < 2:
        return best, np.where(known, 0.0, np.nan)
    with np.errstate(invalid="ignore", divide="ignore"):
        margin = ordered[:, -1] / ordered[:, -2] - 1
    return best, np.where(known, margin, np.nan)


def _best_gaps(
    sweep: Columns,
    qualities: Sequence[str],
    mounting_of: Mapping[str, int],
    at: Mapping[str, tuple[int, int]],
    shape: tuple[int, ...],
) -> Array:
    """Return the gap [eV] with the most energy, (mounting, quality, lat, lon)."""
    best = np.full((shape[0], len(qualities), *shape[1:]), np.nan)
    most = np.full(best.shape, -np.inf)
    quality_of = {name: i for i, name in enumerate(qualities)}
    rows = zip(sweep["site"], sweep["mounting"], sweep["quality"], sweep["gap_ev"], sweep["energy_kwh_m2"], strict=True)
    for site, mounting, quality, gap, energy in rows:
        if site not in at:  # the standard spectrum
            continue
        place = (mounting_of[mounting], quality_of[quality], *at[site])
        if energy > most[place]:
            most[place], best[place] = energy, gap
    return best
