"""Rows of the account: measures per absorber and period, ranked within a site and mounting."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from yieldsim.constants import STANDARD_IRRADIANCE
from yieldsim.device.stack import Absorber, gap_label
from yieldsim.study.annual import Factors, Ratings, Sums, factors
from yieldsim.study.plan import Row

Array = NDArray[np.float64]


MEASURES = (
    "hours",
    "poa_kwh_m2",
    "optical_factor",
    "spectral_factor",
    "low_light_factor",
    "temperature_factor",
    "mismatch_factor",
    "system_factor",
    "performance_ratio",
    "specific_yield_kwh_kwp",
    "energy_kwh_m2",
)


def measures(total: Sums, ratings: Ratings, area_fraction: Array) -> dict[str, Array]:
    """Return every measure of every period, each (n_absorber, period).

    Parameters
    ----------
    total : Sums of months or of the year
    ratings : Ratings of the absorbers
    area_fraction : (n_absorber,) array [1], active over module area
    """
    parts: Factors = factors(total, ratings)
    ratio = parts.performance_ratio()
    light = np.broadcast_to(total.light, ratio.shape)
    lit = np.nan_to_num(ratio)  # a period without light yields nothing
    specific = lit * light / STANDARD_IRRADIANCE
    return {
        "hours": np.broadcast_to(total.hours, ratio.shape),
        "poa_kwh_m2": light / 1000.0,
        "optical_factor": parts.optical,
        "spectral_factor": parts.spectral,
        "low_light_factor": parts.low_light,
        "temperature_factor": parts.temperature,
        "mismatch_factor": parts.mismatch,
        "system_factor": parts.system,
        "performance_ratio": ratio,
        "specific_yield_kwh_kwp": specific,
        "energy_kwh_m2": specific * (ratings.terminals * area_fraction)[:, None] / 1000.0,
    }


def annual_rows(
    site: str, mounting: str, absorbers: Sequence[Absorber], ratings: Ratings, total: Sums, **more: int
) -> list[Row]:
    """Return one row per absorber with the measures of a year and its ranks."""
    area = np.array([absorber.area_fraction for absorber in absorbers])
    found = measures(total.year(), ratings, area)
    efficiency = ratings.module_efficiency(absorbers)
    ranks = {
        "rank_by_yield": rank(found["specific_yield_kwh_kwp"][:, 0]),
        "rank_by_energy": rank(found["energy_kwh_m2"][:, 0]),
        "rank_at_stc": rank(efficiency),
    }
    rows: list[Row] = []
    for i, absorber in enumerate(absorbers):
        row: Row = {"site": site, "mounting": mounting, "absorber": absorber.name, **more}
        row |= {"terminals": absorber.terminals, "gap_ev": gap_label(absorber)}
        row |= {name: float(found[name][i, 0]) for name in MEASURES}
        row["stc_efficiency"] = float(efficiency[i])
        row |= {name: int(order[i]) for name, order in ranks.items()}
        rows.append(row)
    return rows


def monthly_rows(site: str, mounting: str, absorbers: Sequence[Absorber], ratings: Ratings, total: Sums) -> list[Row]:
    """Return one row per absorber and month; ratios of a month without light are NaN."""
    area = np.array([absorber.area_fraction for absorber in absorbers])
    found = measures(total, ratings, area)
    rows: list[Row] = []
    for i, absorber in enumerate(absorbers):
        for month in np.flatnonzero(total.hours > 0):
            row: Row = {"site": site, "mounting": mounting, "absorber": absorber.name, "month": int(month) + 1}
            row |= {name: float(found[name][i, month]) for name in MEASURES}
            rows.append(row)
    return rows


def rank(values: Array) -> NDArray[np.intp]:
    """Return the rank of each value, 1 for the largest; equal values share the better rank."""
    return np.asarray((values[:, None] < values[None, :]).sum(axis=1) + 1)
