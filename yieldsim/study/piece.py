"""One site's share of a study, computed whole: rows of every table, and the site's datasets on disk."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr

import yieldsim
from yieldsim.device.stack import Absorber
from yieldsim.study import annual, chance_store, compare, datasets, light, pairs, store, sweep, worth
from yieldsim.study.annual import Ratings
from yieldsim.study.book import Book
from yieldsim.study.chance import Gathered
from yieldsim.study.hourly import (
    FacesOfYear,
    PlaneYear,
    SiteSky,
    light_paid,
    local_month_and_day,
    plane_year,
    site_sky,
)
from yieldsim.study.ledger import ledger_rows
from yieldsim.study.parts import parts
from yieldsim.study.plan import GapPairsPlan, MountingPlan, Row, SitePlan, StudyPlan
from yieldsim.study.result import by_hour_table, records
from yieldsim.weather import Weather


def key(plan: StudyPlan, site: SitePlan) -> str:
    """Return the hash of all that a site's share is made from: inputs, absorbers, sweeps, losses, this version."""
    version: str = yieldsim.__version__
    kept = frozenset(plan.keep & {"hourly", "spectra"})
    terms = plan.worth
    sold = None if terms is None else (terms.energy_price, terms.limited_by, terms.dc_to_grid, worth.SHARES)
    made_from = (site, plan.absorbers, plan.gap_sweep, plan.gap_pairs, plan.losses, sold, plan.chance)
    return store.fingerprint(version, *made_from, kept)


def compute(plan: StudyPlan, site: SitePlan, years: Iterable[Weather], folder: Path) -> dict[str, Any]:
    """Return a site's rows and write its datasets.

    Parameters
    ----------
    plan : StudyPlan
    site : SitePlan, one of its sites
    years : screened weather, one a year; one year is held at a time
    folder : Path of the study's results

    Returns
    -------
    dict of table name -> rows, JSON-able; kept on disk with its key

    Notes
    -----
    The first year gives the datasets of hours and spectra, and how yields answer to what is drawn.
    """
    books = {mounting.name: Book() for mounting in site.mountings}
    quality: list[Row] = []
    calendar: list[int] = []
    datasets_of = _Datasets(plan, site)
    files: list[Path] = []
    by_hour: list[Row] = []
    for weather in years:
        calendar.append(_calendar_year(weather))
        quality += _year(books, plan, site, weather, datasets_of if len(calendar) == 1 else None)
        if len(calendar) == 1:
            files, by_hour = datasets_of.write(folder)
        del weather  # or it would be held while the next year is read
    piece = {"weather_quality": quality, "by_hour": by_hour} | _tables(plan, site, books, calendar)
    if datasets_of.chance is not None:
        found, draws = datasets_of.chance.told(piece["annual"], piece["yearly"])
        piece |= found
        files.append(chance_store.write_draws(folder, site.name, draws))
    store.write_piece(folder, store.file_stem(site.name), key(plan, site), piece, files)
    return piece


def _year(
    books: Mapping[str, Book], plan: StudyPlan, site: SitePlan, weather: Weather, kept: _Datasets | None
) -> list[Row]:
    """Enter a year, part by part, into all books of a site; return what was found in its weather."""
    skies: list[_Told] = []
    for part in parts(weather):
        skies.append(_entered(books, plan, site, part, kept, new_year=not skies, share=len(part) / len(weather)))
    return quality_rows(site.name, weather, skies)


def _entered(
    books: Mapping[str, Book],
    plan: StudyPlan,
    site: SitePlan,
    weather: Weather,
    kept: _Datasets | None,
    *,
    new_year: bool,
    share: float,
) -> _Told:
    """Enter a stretch of time, a share of its year, into all books of a site; its light is let go of on the way out."""
    sky = site_sky(site, weather)
    found = [_enter(books[mounting.name], plan, site, mounting, sky, new_year) for mounting in site.mountings]
    if kept is not None:
        kept.add(sky, found, share)
    return _Told.of(sky)


def _enter(
    book: Book, plan: StudyPlan, site: SitePlan, mounting: MountingPlan, sky: SiteSky, new_year: bool
) -> PlaneYear:
    """Enter a stretch of time into the book of a mounting; return what its plane received and gave."""
    parts_of_light = light.plane_parts(sky, mounting)
    losses = light.with_snow(plan.losses, sky, mounting, parts_of_light)
    dust = light.dust_colour(sky, plan.losses)
    year = plane_year(sky, mounting, parts_of_light, plan.absorbers, dust)
    book.add(
        annual.sums(year, sky.month, monthly_hours(sky.weather), sky.weather.interval_s, losses), new_year=new_year
    )
    if plan.gap_sweep is not None:
        swept = sweep.sweep_rows(site.name, sky, mounting, parts_of_light, plan.gap_sweep, losses, dust)
        book.add_rows("gap_sweep", swept)
    if plan.gap_pairs is not None:
        rear = light.rear_parts(sky, mounting, _first_pairs(plan.gap_pairs))
        faces = FacesOfYear(sky, parts_of_light, rear, dust)
        book.add_rows("gap_pairs", pairs.pair_rows(site.name, sky, mounting, faces, plan.gap_pairs, losses))
    if plan.worth is not None:
        ratings = Ratings.of(plan.absorbers)
        book.add_rows("sold", worth.sold_rows(site.name, sky, year, plan.absorbers, ratings, losses, plan.worth))
    paid = light_paid(year, plan.absorbers, sky.month)
    entries = ledger_rows(site.name, mounting.name, plan.absorbers, paid, losses, sky.weather.interval_s)
    book.add_rows("ledger", entries)
    return year


def _tables(plan: StudyPlan, site: SitePlan, books: Mapping[str, Book], calendar: Sequence[int]) -> dict[str, Any]:
    """Return the rows of every table but that of the weather."""
    ratings = Ratings.of(plan.absorbers)
    found: dict[str, list[Row]] = {name: [] for name in ("annual", "yearly", "monthly", *_SUMMED)}
    for mounting, book in books.items():
        total = book.mean()
        found["annual"] += compare.annual_rows(site.name, mounting, plan.absorbers, ratings, total)
        found["monthly"] += compare.monthly_rows(site.name, mounting, plan.absorbers, ratings, total)
        if len(calendar) > 1:
            for number, each in zip(calendar, book.years, strict=True):
                found["yearly"] += compare.annual_rows(site.name, mounting, plan.absorbers, ratings, each, year=number)
        for name in _SUMMED:
            found[name] += book.mean_rows(name)
    return found


_SUMMED = ("gap_sweep", "gap_pairs", "ledger", "sold")


def _first_pairs(plan: GapPairsPlan) -> list[Absorber]:
    """Return one pair of each kind: they tell whether rear light counts."""
    return [absorbers[0] for absorbers in plan.absorbers.values()]


@dataclass(slots=True)
class _Datasets:
    """What is kept of a site's first year, gathered part by part."""

    plan: StudyPlan
    site: SitePlan
    hourly: list[xr.Dataset] = field(default_factory=list)
    spectra: list[xr.Dataset] = field(default_factory=list)
    chance: Gathered | None = None

    def __post_init__(self) -> None:
        """Keep how yields answer to what is drawn where the study asks for it."""
        if self.plan.chance is not None:
            self.chance = Gathered(self.plan.chance, self.site, self.plan.absorbers, self.plan.losses)

    def add(self, sky: SiteSky, years: Sequence[PlaneYear], share: float) -> None:
        """Take what is kept of a part that is this share of the year."""
        if self.chance is not None:
            self.chance.add(sky, share)
        if "hourly" in self.plan.keep:
            self.hourly.append(datasets.hourly_dataset(self.site.name, sky, years, self.plan.absorbers))
        if "spectra" in self.plan.keep:
            self.spectra.append(datasets.spectra_dataset(self.site.name, sky, years))

    def write(self, folder: Path) -> tuple[list[Path], list[Row]]:
        """Write the datasets and let go of them; return their files, and how the year's yield spreads over the day."""
        files, by_hour = [], []
        for kind in ("hourly", "spectra"):
            if found := getattr(self, kind):
                path, dataset = folder / kind / f"{store.file_stem(self.site.name)}.nc", datasets.joined(found)
                found.clear()
                store.write_netcdf(path, dataset)
                files.append(path)
                if kind == "hourly":
                    names = [absorber.name for absorber in self.plan.absorbers]
                    rated = dict(zip(names, Ratings.of(self.plan.absorbers).terminals, strict=True))
                    by_hour = records(by_hour_table(self.site.name, xr.decode_cf(dataset), rated))
        self.hourly, self.spectra = [], []
        return files, by_hour


def monthly_hours(weather: Weather) -> annual.Array:
    """Return the hours the weather covers in each month, (12,) [h]."""
    month, _ = local_month_and_day(weather)
    return np.asarray(np.bincount(month, minlength=12) * (weather.interval_s / 3600.0), dtype=np.float64)


@dataclass(frozen=True, slots=True)
class _Told:
    """What a sky tells of its air: intervals lit and clear, where each input came from."""

    lit: int
    clear: int
    sources: tuple[tuple[str, str], ...]

    @classmethod
    def of(cls, sky: SiteSky) -> _Told:
        """Return it of a sky that need not be kept."""
        return cls(len(sky.lit), int(sky.sky.clear.sum()), sky.sources)


def sky_quality_rows(site: str, sky: SiteSky) -> list[Row]:
    """Return what was found in the weather of a sky and where each atmospheric input came from."""
    return quality_rows(site, sky.weather, [_Told.of(sky)])


def quality_rows(site: str, weather: Weather, skies: Sequence[_Told]) -> list[Row]:
    """Return what was found in a site's weather and where each atmospheric input came from.

    Parameters
    ----------
    site : str
    weather : Weather of a year
    skies : what its parts tell, in order
    """
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
        for finding in weather.findings
    ]
    blank: Row = {"site": site, "first": "", "last": "", "done": "used"}
    n, clear = sum(sky.lit for sky in skies), sum(sky.clear for sky in skies)
    for name in dict(skies[0].sources):
        told: dict[str, int] = {}
        for sky in skies:
            source = dict(sky.sources)[name]
            told[source] = told.get(source, 0) + sky.lit
        rows += [blank | {"kind": f"source:{name}", "rows": count, "found": found} for found, count in told.items()]
    text = f"{clear} of {n} lit intervals are clear: their own haze explains beam and diffuse light"
    rows.append(blank | {"kind": "clear_hours", "rows": clear, "found": text})
    return [{name: row[name] for name in _QUALITY} for row in rows]


_QUALITY = ("site", "kind", "rows", "first", "last", "found", "done")


def _stamp(seconds: int) -> str:
    return datetime.fromtimestamp(seconds, UTC).strftime("%Y-%m-%dT%H:%M:%SZ") if seconds else ""


def _calendar_year(weather: Weather) -> int:
    middle = int(weather.time[len(weather) // 2])
    return datetime.fromtimestamp(middle, UTC).year
