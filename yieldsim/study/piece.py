"""One site's share of a study, computed whole: rows of every table, and the site's datasets on disk."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import numpy as np

import yieldsim
from yieldsim.device.stack import Absorber
from yieldsim.study import annual, compare, datasets, light, pairs, store, sweep
from yieldsim.study.annual import Ratings
from yieldsim.study.hourly import FacesOfYear, SiteSky, light_paid, local_month_and_day, plane_year, site_sky
from yieldsim.study.ledger import ledger_rows
from yieldsim.study.plan import GapPairsPlan, Row, SitePlan, StudyPlan
from yieldsim.weather import Weather

_NAMES = ("site", "mounting", "absorber")


def key(plan: StudyPlan, site: SitePlan) -> str:
    """Return the hash of all that a site's share is made from: inputs, absorbers, sweeps, losses, this version."""
    version: str = yieldsim.__version__
    kept = frozenset(plan.keep & {"hourly", "spectra"})
    parts = (site, plan.absorbers, plan.gap_sweep, plan.gap_pairs, plan.losses)
    return store.fingerprint(version, *parts, kept)


def compute(plan: StudyPlan, site: SitePlan, years: Sequence[Weather], folder: Path) -> dict[str, Any]:
    """Return a site's rows and write its datasets.

    Parameters
    ----------
    plan : StudyPlan
    site : SitePlan, one of its sites
    years : screened weather, one a year
    folder : Path of the study's results

    Returns
    -------
    dict of ``annual, yearly, monthly, gap_sweep, weather_quality`` rows, JSON-able; kept on disk with its key
    """
    skies = [site_sky(site, weather) for weather in years]
    ratings = Ratings.of(plan.absorbers)
    piece: dict[str, Any] = {name: [] for name in ("annual", "yearly", "monthly", "gap_sweep", "gap_pairs", "ledger")}
    piece["weather_quality"] = [row for sky in skies for row in quality_rows(site.name, sky)]
    first_year: list[Any] = []
    for mounting in site.mountings:
        totals, swept, paired, ledgers = [], [], [], []
        for sky in skies:
            parts = light.plane_parts(sky, mounting)
            losses, dust = light.with_snow(plan.losses, sky, mounting, parts), light.dust_colour(sky, plan.losses)
            year = plane_year(sky, mounting, parts, plan.absorbers, dust)
            if plan.gap_sweep is not None:
                swept.append(sweep.sweep_rows(site.name, sky, mounting, parts, plan.gap_sweep, losses, dust))
            if plan.gap_pairs is not None:
                faces = FacesOfYear(sky, parts, light.rear_parts(sky, mounting, _first_pairs(plan.gap_pairs)), dust)
                paired.append(pairs.pair_rows(site.name, sky, mounting, faces, plan.gap_pairs, losses))
            total = annual.sums(year, sky.month, monthly_hours(sky), sky.weather.interval_s, losses)
            totals.append(total)
            paid = light_paid(year, plan.absorbers, sky.month)
            ledgers.append(ledger_rows(site.name, mounting.name, plan.absorbers, paid, losses, sky.weather.interval_s))
            if sky is skies[0]:
                first_year.append(year)
            if len(skies) > 1:
                piece["yearly"] += compare.annual_rows(
                    site.name, mounting.name, plan.absorbers, ratings, total, year=_calendar_year(sky)
                )
        total = annual.mean(totals)
        piece["annual"] += compare.annual_rows(site.name, mounting.name, plan.absorbers, ratings, total)
        piece["monthly"] += compare.monthly_rows(site.name, mounting.name, plan.absorbers, ratings, total)
        piece["gap_sweep"] += _mean_rows(swept, ("poa_kwh_m2", "energy_kwh_m2"))
        piece["gap_pairs"] += _mean_rows(paired, ("poa_kwh_m2", "energy_kwh_m2"))
        piece["ledger"] += _mean_rows(ledgers, [name for name in ledgers[0][0] if name not in _NAMES])
    files = _write_datasets(plan, site, skies[0], first_year, folder)
    store.write_piece(folder, store.file_stem(site.name), key(plan, site), piece, files)
    return piece


def _first_pairs(plan: GapPairsPlan) -> list[Absorber]:
    """Return one pair of each kind: they tell whether rear light counts."""
    return [absorbers[0] for absorbers in plan.absorbers.values()]


def _mean_rows(by_year: Sequence[list[Row]], measures: Sequence[str]) -> list[Row]:
    """Return the rows of the first year, the measures averaged over the years."""
    return [
        {**rows[0], **{measure: float(np.mean([row[measure] for row in rows])) for measure in measures}}
        for rows in zip(*by_year, strict=True)
    ]


def _write_datasets(plan: StudyPlan, site: SitePlan, sky: SiteSky, years: list[Any], folder: Path) -> list[Path]:
    stem = store.file_stem(site.name)
    files = []
    if "hourly" in plan.keep:
        path = folder / "hourly" / f"{stem}.nc"
        store.write_netcdf(path, datasets.hourly_dataset(site.name, sky, years, plan.absorbers))
        files.append(path)
    if "spectra" in plan.keep:
        path = folder / "spectra" / f"{stem}.nc"
        store.write_netcdf(path, datasets.spectra_dataset(site.name, sky, years))
        files.append(path)
    return files


def monthly_hours(sky: SiteSky) -> annual.Array:
    """Return the hours the weather covers in each month, (12,) [h]."""
    month, _ = local_month_and_day(sky.weather)
    return np.asarray(np.bincount(month, minlength=12) * (sky.weather.interval_s / 3600.0), dtype=np.float64)


def quality_rows(site: str, sky: SiteSky) -> list[Row]:
    """Return what was found in a site's weather and where each atmospheric input came from."""
    rows: list[Row] = [
        {
            "site": site,
            "kind": finding.kind,
            "rows": finding.rows,
            "first": _stamp(finding.first),
            "last": _stamp(finding.last),
            "found": finding.found,
            "done": finding.done,
        }
        for finding in sky.weather.findings
    ]
    n = len(sky.lit)
    for name, source in sky.sources:
        rows.append(
            {
                "site": site,
                "kind": f"source:{name}",
                "rows": n,
                "first": "",
                "last": "",
                "found": source,
                "done": "used",
            }
        )
    clear = int(sky.sky.clear.sum())
    text = f"{clear} of {n} lit intervals are clear: their own haze explains beam and diffuse light"
    rows.append(
        {"site": site, "kind": "clear_hours", "rows": clear, "first": "", "last": "", "found": text, "done": "used"}
    )
    return rows


def _stamp(seconds: int) -> str:
    return datetime.fromtimestamp(seconds, UTC).strftime("%Y-%m-%dT%H:%M:%SZ") if seconds else ""


def _calendar_year(sky: SiteSky) -> int:
    middle = int(sky.weather.time[len(sky.weather) // 2])
    return datetime.fromtimestamp(middle, UTC).year
