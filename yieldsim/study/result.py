"""What a finished study hands to those who read it: tables as pandas, spectra and hours as xarray."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from yieldsim import spectrum
from yieldsim.constants import PHOTON_EV_NM, STANDARD_CELL_TEMPERATURE
from yieldsim.device.fold import folded
from yieldsim.device.stack import Absorber, responses_at

#: Tables of a result -> file each is kept in. A result may lack those it names None.
TABLES: Mapping[str, str] = {
    "annual": "annual.csv",
    "monthly": "monthly.csv",
    "weather_quality": "weather_quality.csv",
    "standard": "standard.csv",
    "gap_sweep": "gap_sweep.csv",
    "yearly": "yearly.csv",
    "responses": "responses.csv",
    "by_hour": "by_hour.csv",
    "ledger": "ledger.csv",
    "gap_pairs": "gap_pairs.csv",
    "gap_pair_materials": "gap_pair_materials.csv",
    "generation": "generation.csv",
    "chance": "chance.csv",
    "head_to_head": "head_to_head.csv",
    "rank_chance": "rank_chance.csv",
    "causes": "causes.csv",
    "flips": "flips.csv",
    "worth": "worth.csv",
    "regret": "regret.csv",
    "portfolio": "portfolio.csv",
    "portfolio_gap": "portfolio_gap.csv",
}

#: Columns that hold text, whatever their cells look like ("1.12" as a gap, "NA" as a name).
TEXT_COLUMNS = frozenset(
    {
        "site", "mounting", "absorber", "other", "kind", "first", "last", "found", "done", "quality", "measure",
        "currency", "material", "worst_site", "verdict", "input", "of", "unit", "note",
    }
)  # fmt: skip

#: Site name of the gap sweep's rows that stand for the standard spectrum on cells at 25 degC.
STANDARD_SITE = "standard spectrum"


@dataclass(frozen=True, slots=True)
class StudyResult:
    """A finished study.

    Parameters
    ----------
    study : str, its name
    resolved : the study as resolved, every default filled in, JSON-able
    annual : one row per site, mounting and absorber; columns as in ``annual.csv``
    weather_quality : ``site, kind, rows, first, last, found, done``; kinds ``source:NAME`` tell where an atmospheric
        input came from
    standard : ``absorber, terminals, gap_ev, stc_efficiency, jsc_a_m2, voc_v, ff,
        power_temperature_coefficient_per_k, rank_at_stc``
    run : what goes into ``run.json``: versions, hashes of inputs, timings
    monthly : the measures of `annual` per month, with ``month`` 1-12
    gap_sweep : ``site, mounting, quality, gap_ev, poa_kwh_m2, energy_kwh_m2, standard_efficiency``; rows of site
        `STANDARD_SITE` are the standard spectrum at 25 degC
    spectra : site -> dataset of 24 days, dims (time, band) and (mounting, time, band)
    yearly : rows of `annual` per calendar ``year`` where a site has several
    responses : ``absorber, junction, wavelength_nm, collected_share``, see `responses_table`
    by_hour : ``site, mounting, absorber, month, hour, specific_yield_kwh_kwp``, see `by_hour_table`
    ledger : ``site, mounting, absorber`` and one column [kWh m-2] per fate of the light, in the order it meets them
    gap_pairs : ``site, mounting, top_gap_ev, bottom_gap_ev, energy_kwh_m2``; `STANDARD_SITE` as in `gap_sweep`
    gap_pair_materials : ``site, mounting, quality, terminals, material, top_gap_ev, bottom_gap_ev, energy_kwh_m2,
        best_top_gap_ev, best_bottom_gap_ev, behind_best``: what gaps of today's materials give away, see
        `pairs.material_rows`
    generation : ``absorber, junction, depth_um, generation_ma_cm2_um, share_above``, where junctions made from a
        material make their pairs under the standard spectrum, see `generation.rows`
    region : of a grid of sites, dims (mounting, absorber, latitude, longitude), see `region.dataset`
    chance : ``site, mounting, absorber, measure, base, p90, p50, p10, mean, sd, p90_half, p50_half, p90_error,
        p50_error``; P90 is exceeded with 90 % probability; ``base`` is the study's own, ``_half`` from the first half
        of the draws, ``_error`` a standard error
    head_to_head : ``site, mounting, measure, absorber, other, probability, probability_error, above,
        probability_above, margin_p90, margin_p50, margin_p10, verdict``; probability that ``absorber``, the one with
        the higher median, yields more than ``other``, and that it does so by more than ``above``; margins as shares of
        the other's yield
    rank_chance : ``site, mounting, measure, absorber, rank, probability``
    causes : ``site, mounting, measure, absorber, other, input`` and the input's share of the variance of the measure,
        or of the lead over ``other``, alone (``first_order``) and with others (``total``), with 90 % intervals; see
        `chance_causes.rows`
    flips : ``site, mounting, measure, absorber, other, input, of, unit, value, spreads, found``, where the best and the
        second tie; see `chance_flips.rows`
    worth : ``site, mounting, absorber, currency`` and amounts of a plant with it, see `worth.rows`
    regret : how far each absorber stays behind the best at each site, see `portfolio.regret_rows`
    portfolio : what each absorber does over all sites, see `portfolio.portfolio_rows`
    portfolio_gap : the best single gap for all sites and what it costs each, see `portfolio.gap_rows`
    """

    study: str
    resolved: Mapping[str, Any]
    annual: pd.DataFrame
    weather_quality: pd.DataFrame
    standard: pd.DataFrame
    run: Mapping[str, Any]
    monthly: pd.DataFrame | None = None
    gap_sweep: pd.DataFrame | None = None
    spectra: Mapping[str, xr.Dataset] = field(default_factory=dict)
    yearly: pd.DataFrame | None = None
    responses: pd.DataFrame | None = None
    by_hour: pd.DataFrame | None = None
    ledger: pd.DataFrame | None = None
    gap_pairs: pd.DataFrame | None = None
    gap_pair_materials: pd.DataFrame | None = None
    generation: pd.DataFrame | None = None
    region: xr.Dataset | None = None
    chance: pd.DataFrame | None = None
    head_to_head: pd.DataFrame | None = None
    rank_chance: pd.DataFrame | None = None
    causes: pd.DataFrame | None = None
    flips: pd.DataFrame | None = None
    worth: pd.DataFrame | None = None
    regret: pd.DataFrame | None = None
    portfolio: pd.DataFrame | None = None
    portfolio_gap: pd.DataFrame | None = None

    def tables(self) -> Iterator[tuple[str, pd.DataFrame]]:
        """Return (file name, table) of every table this result holds."""
        for name, file in TABLES.items():
            table = getattr(self, name)
            if table is not None:
                yield file, table

    @property
    def reference(self) -> str:
        """Name of the absorber the others are set against; the first one if the study names none."""
        named = self.resolved.get("reference")
        names = [str(name) for name in self.standard["absorber"]]
        return str(named) if named in names else names[0]


def ideal_names(resolved: Mapping[str, Any]) -> tuple[str, ...]:
    """Return the absorbers of a resolved study that stand for a limit no device reaches: ``quality: ideal``."""
    entries = [entry for entry in resolved.get("absorbers") or () if isinstance(entry, Mapping)]
    return tuple(str(entry.get("name")) for entry in entries if _is_ideal(entry))


def _is_ideal(entry: Mapping[str, Any]) -> bool:
    stack = [part for part in entry.get("stack") or () if isinstance(part, Mapping)]
    return all(_is_ideal(part) for part in stack) if stack else entry.get("quality") == "ideal"


def records(table: pd.DataFrame) -> list[dict[str, Any]]:
    """Return the rows of a table, each as column -> cell."""
    return [dict(zip(map(str, table.columns), row, strict=True)) for row in table.itertuples(index=False, name=None)]


def responses_table(absorbers: Sequence[Absorber]) -> pd.DataFrame:
    """Return the share of each band's photons that each junction collects where it sits in its stack, at 25 degC.

    Parameters
    ----------
    absorbers : sequence of Absorber

    Returns
    -------
    DataFrame of ``absorber, junction`` (1 = top), ``wavelength_nm`` (of the band) and ``collected_share`` [1]

    Notes
    -----
    The share is the charge a band yields over the charge of one electron per photon, both under the standard
    spectrum's fine structure, so that a gap inside a band gives the part of the band above it.
    """
    ends = np.array([spectrum.FIRST_EDGE_NM, spectrum.LAST_EDGE_NM])
    every_photon = spectrum.band_yield(ends, np.ones(2))
    wavelength = spectrum.band_wavelengths()
    parts = [
        pd.DataFrame(
            {
                "absorber": absorber.name,
                "junction": number,
                "wavelength_nm": wavelength,
                "collected_share": np.clip(folded(response) / every_photon, 0.0, 1.0),
            }
        )
        for absorber in absorbers
        for number, response in enumerate(responses_at(absorber, STANDARD_CELL_TEMPERATURE), start=1)
    ]
    return pd.concat(parts, ignore_index=True)


def by_hour_table(site: str, hourly: xr.Dataset, rated_w_m2: Mapping[str, float]) -> pd.DataFrame:
    """Return how a year's yield spreads over months and hours of the day.

    Parameters
    ----------
    site : its name
    hourly : dataset of ``hourly/<site>.nc``
    rated_w_m2 : absorber -> terminal power at standard test conditions per collecting area [W m-2]

    Returns
    -------
    DataFrame of ``site, mounting, absorber, month`` (1-12), ``hour`` (0-23, local standard time, start) and
    ``specific_yield_kwh_kwp``, before the losses behind the absorber; hours of the day without light are left out
    """
    seconds = hourly["time"].values.astype("datetime64[s]").astype(np.int64)
    step_s = int(np.median(np.diff(seconds))) if len(seconds) > 1 else 3600
    # The middle of the interval says which hour and month it belongs to.
    local = (seconds + step_s // 2 + round(float(hourly.attrs["utc_offset_h"]) * 3600)).astype("datetime64[s]")
    month = local.astype("datetime64[M]").astype(np.int64) % 12
    hour = local.astype("datetime64[h]").astype(np.int64) % 24
    cell = np.asarray(month * 24 + hour)
    parts = []
    for m, mounting in enumerate(hourly["mounting"].values):
        for a, name in enumerate(hourly["absorber"].values):
            power = np.nan_to_num(np.asarray(hourly["power"].values[m, a], dtype=np.float64))
            energy = np.bincount(cell, power, minlength=288) * (step_s / 3600.0) / rated_w_m2[str(name)]
            parts.append(_hours_of(site, str(mounting), str(name), energy))
    return pd.concat(parts, ignore_index=True)


def _hours_of(site: str, mounting: str, absorber: str, energy: NDArray[Any]) -> pd.DataFrame:
    lit = np.flatnonzero(energy > 0)
    return pd.DataFrame(
        {
            "site": site,
            "mounting": mounting,
            "absorber": absorber,
            "month": lit // 24 + 1,
            "hour": lit % 24,
            "specific_yield_kwh_kwp": energy[lit],
        }
    )


def edges_nm(gap_ev: str | float) -> tuple[float, ...]:
    """Return the wavelengths [nm] a gap or a stack's gaps (``1.68/1.12``) [eV] stand for, top first."""
    return tuple(PHOTON_EV_NM / float(part) for part in str(gap_ev).split("/"))
