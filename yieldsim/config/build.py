"""From a valid study file to the plan the study computes from, and back to plain data with every default filled in."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any, Literal, TypeVar, cast

from yieldsim.config import absorber_schema, absorbers, chance_schema, grid, schema, site_schema
from yieldsim.config.fields import MONTHS
from yieldsim.config.inputs import PVLIB, locate, sha256
from yieldsim.config.mounting_schema import AnyMounting
from yieldsim.config.surroundings import Surroundings, mounting_plan
from yieldsim.config.tree import Document, KeyPath
from yieldsim.config.worth import worth_plan
from yieldsim.config.worth_schema import Worth
from yieldsim.device.stack import Absorber
from yieldsim.errors import InputError, Problem
from yieldsim.study.plan import (
    AtmospherePlan,
    ColumnsPlan,
    GapPairsPlan,
    GapSweepPlan,
    GroundPlan,
    LossesPlan,
    Monthly,
    SitePlan,
    StudyPlan,
    WeatherFile,
)

Made = TypeVar("Made")
Mountings = dict[str, AnyMounting]
_AIR = ("aod500", "angstrom_exponent", "water_cm", "ozone_atm_cm")


class Builder:
    """Builds a plan; what a record refuses becomes a problem at its place in the file, and the rest goes on.

    Parameters
    ----------
    document : Document the study came from, for places
    folder : Path its relative paths start from
    """

    def __init__(self, document: Document, folder: Path) -> None:
        """Start without problems."""
        self.document = document
        self.folder = folder
        self.problems: list[Problem] = []
        self.hashes: dict[Path, str] = {}
        self.around = Surroundings(folder)

    def plan(self, study: schema.Study) -> StudyPlan:
        """Return the plan of a valid study; raises InputError with everything that could not be built."""
        shared = _mountings(study.mounting)
        prices: dict[str, str] = {}
        sites = [self._site(site, shared, ("sites", i)) for i, site in enumerate(study.sites)]
        maker = absorbers.Maker(self.folder)
        built = [
            self._attempt(("absorbers", i), lambda each=each: maker.absorber(each))  # type: ignore[misc]
            for i, each in enumerate(study.absorbers)
        ]
        sweep = None
        if study.gap_sweep is not None:
            sweep = self._attempt(("gap_sweep",), lambda: _sweep(cast(schema.GapSweep, study.gap_sweep)))
        pairs = None
        if study.gap_pairs is not None:
            pairs = self._attempt(("gap_pairs",), lambda: _pairs(cast(schema.GapPairs, study.gap_pairs)))
        worth = None
        if study.worth is not None:
            names = [each.name for each in study.absorbers]
            worth = self._attempt(("worth",), lambda: worth_plan(cast(Worth, study.worth), names, self.folder, prices))
        if self.problems:
            raise InputError(self.problems)
        made = tuple(absorber for absorber in built if absorber is not None)
        plan = StudyPlan(
            name=study.study,
            sites=tuple(sites),
            absorbers=made,
            reference=study.reference or made[0].name,
            gap_sweep=sweep,
            gap_pairs=pairs,
            losses=_losses(study.losses),
            keep=frozenset(study.keep),
            resolved={},
            folder=str(self.folder),
            inputs={**self.around.inputs, **maker.inputs, **prices},
            findings=tuple(maker.findings),
            films=tuple(maker.films),
            worth=worth,
            portfolio=study.portfolio,
            chance=None if study.chance is None else chance_schema.chance_plan(study.chance),
        )
        return replace(plan, resolved=resolved(study, plan))

    def _attempt(self, path: KeyPath, make: Callable[[], Made]) -> Made | None:
        try:
            return make()
        except InputError as error:  # a file it names
            self.problems.extend(error.problems)
        except ValueError as error:
            self.problems.append(self.document.problem(path, str(error), ""))
        return None

    def _site(self, site: site_schema.Site, shared: Mountings, path: KeyPath) -> SitePlan:
        files = site.weather if isinstance(site.weather, list) else [site.weather]
        weather = [
            self._weather(site, file, (*path, "weather", i) if isinstance(site.weather, list) else (*path, "weather"))
            for i, file in enumerate(files)
        ]
        air: dict[str, Any] = {
            name: _twelve(value) for name in _AIR if (value := getattr(site.atmosphere, name)) is not None
        }
        return SitePlan(
            name=site.name,
            weather=tuple(weather),
            mountings=tuple(mounting_plan(name, each) for name, each in _site_mountings(site, shared).items()),
            atmosphere=AtmospherePlan(
                **air,
                haze=cast(Literal["hourly", "fixed"], site.atmosphere.haze),
                single_scattering_albedo=site.atmosphere.single_scattering_albedo,
                asymmetry=site.atmosphere.asymmetry,
            ),
            ground=self._attempt((*path, "ground"), lambda: self.around.ground(site.ground)) or GroundPlan(),
            horizon=self._attempt((*path, "horizon"), lambda: self.around.horizon(site.horizon)),
            latitude_deg=site.latitude_deg,
            longitude_deg=site.longitude_deg,
            elevation_m=site.elevation_m,
            allow_gaps=site.allow_gaps,
        )

    def _weather(self, site: site_schema.Site, shown: str, path: KeyPath) -> WeatherFile:
        where = locate(shown, self.folder)
        try:
            digest = self.hashes.get(where) or self.hashes.setdefault(where, sha256(where))
        except OSError as error:
            digest = ""
            self.problems.append(self.document.problem(path, f"{shown}: {error.strerror}", "a file that can be read"))
        kept = shown if shown.startswith(PVLIB) else str(where.absolute())
        cell = None if site.cell is None else (site.cell[0], site.cell[1])
        return WeatherFile(kept, shown, digest, site.format, site.timestamps, cell, _columns_plan(site.columns))


def _columns_plan(columns: site_schema.Columns | None) -> ColumnsPlan | None:
    if columns is None:
        return None
    given = columns.model_dump(exclude_none=True)
    time, time_format, codes = given.pop("time"), given.pop("time_format", None), given.pop("missing", ())
    named = tuple(
        (name, column, None) if isinstance(column, str) else (name, column["column"], column["unit"])
        for name, column in given.items()
    )
    missing = tuple(codes) if isinstance(codes, list | tuple) else (codes,)
    return ColumnsPlan(tuple(time) if isinstance(time, list) else (time,), named, time_format, missing)


def _twelve(value: Any) -> Monthly:
    return tuple(value) if isinstance(value, list) else (value,) * MONTHS


def _losses(losses: schema.Losses) -> LossesPlan:
    given = losses.model_dump(exclude_none=True, exclude={"soiling_exponent"})
    return LossesPlan({name: _twelve(value) for name, value in given.items()}, losses.soiling_exponent)


def _mountings(value: Any) -> Mountings:
    """Return mountings by name; a single one bears the name of its kind."""
    if value is None:
        return {}
    return dict(value) if isinstance(value, dict) else {value.kind: value}


def _site_mountings(site: site_schema.Site, shared: Mountings) -> Mountings:
    if site.mounting is None:
        return shared
    if isinstance(site.mounting, str):
        return {site.mounting: shared[site.mounting]}
    if isinstance(site.mounting, list):
        return {name: shared[name] for name in site.mounting}
    return _mountings(site.mounting)


def _sweep(sweep: schema.GapSweep) -> GapSweepPlan:
    gaps = grid.decimal_grid(sweep.from_ev, sweep.to_ev, sweep.step_ev)
    qualities = named_qualities(sweep)
    return GapSweepPlan(
        gaps, {name: tuple(absorbers.swept(each, gap) for gap in gaps) for name, each in qualities.items()}
    )


def _pairs(pairs: schema.GapPairs) -> GapPairsPlan:
    tops, bottoms = grid.decimal_grid(*pairs.top_ev), grid.decimal_grid(*pairs.bottom_ev)
    every = tuple((top, bottom) for top in tops for bottom in bottoms)
    terminals = pairs.terminals if isinstance(pairs.terminals, list) else [pairs.terminals]
    made: dict[tuple[str, int], tuple[Absorber, ...]] = {}
    for name, each in named_qualities(pairs).items():
        upper = {gap: absorbers.swept(each, gap) for gap in tops}
        lower = {gap: absorbers.swept(each, gap) for gap in bottoms}
        for count in dict.fromkeys(terminals):
            made[name, count] = tuple(
                replace(
                    upper[top],
                    name=f"{top:g}/{bottom:g}",
                    junctions=upper[top].junctions + lower[bottom].junctions,
                    terminals=count,
                )
                for top, bottom in every
            )
    return GapPairsPlan(every, made)


def named_qualities(sweep: schema.GapSweep | schema.GapPairs) -> dict[str, absorber_schema.SweepQuality | None]:
    """Return the qualities of a sweep by name; None stands for the ideal."""
    given = sweep.quality if isinstance(sweep.quality, list) else [sweep.quality]
    named: dict[str, absorber_schema.SweepQuality | None] = {}
    for each in given:
        if isinstance(each, str):
            named[each] = None
            continue
        name = each.name or (f"like {each.like}" if each.like else "realistic")
        number = 2
        while name in named:
            name, number = f"{each.name or each.like or 'realistic'} {number}", number + 1
        named[name] = each
    return named


# ------------------------------------------------------------------------------------------------- resolved


def resolved(study: schema.Study, plan: StudyPlan) -> dict[str, Any]:
    """Return a study with every default filled in, JSON-able; read again as a study file it gives the same plan."""
    shared = _mountings(study.mounting)
    sites = []
    for site in study.sites:
        content = site.model_dump(exclude_none=True, exclude={"mounting"})
        content["weather"] = site.weather if isinstance(site.weather, list) else [site.weather]
        content["mounting"] = {
            name: each.model_dump(exclude_none=True) for name, each in _site_mountings(site, shared).items()
        }
        sites.append(content)
    content = {
        "study": study.study,
        "sites": sites,
        "absorbers": [absorbers.resolved(*pair) for pair in zip(study.absorbers, plan.absorbers, strict=True)],
        "reference": plan.reference,
        "losses": study.losses.model_dump(exclude_none=True),
        "keep": [part for part in schema.PARTS if part in plan.keep],
    }
    if plan.chance is not None:
        content["chance"] = chance_schema.resolved(plan.chance)
    if study.portfolio is not None:
        content["portfolio"] = dict(study.portfolio)
    if study.worth is not None:
        content["worth"] = study.worth.model_dump(exclude_none=True)
    if study.gap_pairs is not None:
        content["gap_pairs"] = study.gap_pairs.model_dump(exclude={"quality"}) | {
            "quality": [
                "ideal" if each is None else each.model_dump(exclude_none=True) | {"name": name}
                for name, each in named_qualities(study.gap_pairs).items()
            ]
        }
    if study.gap_sweep is not None:
        qualities = named_qualities(study.gap_sweep)
        content["gap_sweep"] = study.gap_sweep.model_dump(exclude={"quality"}) | {
            "quality": [
                name if each is None else each.model_dump(exclude_none=True) | {"name": name}
                for name, each in qualities.items()
            ]
        }
    return content
