"""How sure a ranking is: draws of all that is not known, the same for every absorber, and what follows from them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from yieldsim.device.stack import Absorber
from yieldsim.study import chance_causes, chance_flips, chance_light, head_to_head, light
from yieldsim.study.chance_inputs import OF_LIGHT
from yieldsim.study.chance_light import ClassLight
from yieldsim.study.chance_shortcut import dimensions
from yieldsim.study.chance_year import MEASURES, YearOfChance, base_of, numbers, spreads_of, years_of
from yieldsim.study.hourly import SiteSky
from yieldsim.study.plan import ChancePlan, LossesPlan, Row, SitePlan

Array = NDArray[np.float64]

TABLES = ("chance", "head_to_head", "rank_chance", "causes", "flips")


@dataclass(frozen=True, slots=True, eq=False)
class Draws:
    """What every absorber gives in every draw at a site; draw k of every site belongs together.

    Parameters
    ----------
    mountings, absorbers : names
    specific_yield_kwh_kwp : (n_draw, n_mounting, n_absorber) array, per rated power of the label
    energy_kwh_m2 : (n_draw, n_mounting, n_absorber) array, per module area
    """

    mountings: tuple[str, ...]
    absorbers: tuple[str, ...]
    specific_yield_kwh_kwp: Array
    energy_kwh_m2: Array


@dataclass(frozen=True, slots=True, eq=False)
class Gathered:
    """How the light of a site's first year answers to its air, a stretch of time after the other.

    Parameters
    ----------
    plan : ChancePlan
    site : SitePlan
    absorbers : of the study
    losses : LossesPlan of the study; what snow on modules takes is worked out
    lights : of each mounting, a stretch of time each
    """

    plan: ChancePlan
    site: SitePlan
    absorbers: tuple[Absorber, ...]
    losses: LossesPlan
    lights: list[list[ClassLight]] = field(default_factory=list)

    def add(self, sky: SiteSky, share: float) -> None:
        """Take a stretch of time that is this share of the year [1]; one without light tells nothing."""
        if not sky.sky.diffuse.any():
            return
        spreads = spreads_of(self.plan, self.site.name, self.absorbers).site
        losses = [
            light.with_snow(self.losses, sky, mounting, light.plane_parts(sky, mounting))
            for mounting in self.site.mountings
        ]
        moves = {name: spreads[name] for name in OF_LIGHT}
        self.lights.append(chance_light.gather(self.site, sky, self.absorbers, losses, moves, share))

    def told(self, annual: Sequence[Row], yearly: Sequence[Row]) -> tuple[dict[str, list[Row]], Draws]:
        """Return the rows of every table of the site, and all its draws, from its rows of ``annual`` and ``yearly``."""
        lights = list(zip(*self.lights, strict=True))
        return told(self.plan, self.site, self.absorbers, lights, annual, yearly)


def told(
    plan: ChancePlan,
    site: SitePlan,
    absorbers: Sequence[Absorber],
    lights: Sequence[Sequence[ClassLight]],
    annual: Sequence[Row],
    yearly: Sequence[Row],
) -> tuple[dict[str, list[Row]], Draws]:
    """Return the rows of every table of a site, and all its draws.

    Parameters
    ----------
    plan : ChancePlan
    site : SitePlan
    absorbers : of the study
    lights : of each mounting: its light, a stretch of time each
    annual, yearly : the site's rows of these tables
    """
    drawn = dimensions(site.name, absorbers)
    spreads = spreads_of(plan, site.name, absorbers)
    first, second = (numbers(plan, drawn, plan.draws, again) for again in ("", "again "))
    names = [absorber.name for absorber in absorbers]
    tables: dict[str, list[Row]] = {name: [] for name in TABLES}
    values = np.empty((2, plan.draws, len(site.mountings), len(absorbers)))
    for m, (mounting, parts) in enumerate(zip(site.mountings, lights, strict=True)):
        base = base_of(annual, mounting.name, absorbers)
        years = years_of(plan, site.name, yearly, mounting.name, absorbers)
        year = YearOfChance.of(chance_light.joined(parts), absorbers, spreads, drawn, base, years)
        core = year.core(first)
        values[:, :, m] = year.values(first, core)
        where: Row = {"site": site.name, "mounting": mounting.name}
        for k, measure in enumerate(MEASURES):
            found = values[k, :, m]
            about = where | {"measure": measure}
            tables["chance"] += [_row(where, measure, name, base[k, i], found[:, i]) for i, name in enumerate(names)]
            tables["head_to_head"] += [about | row for row in head_to_head.rows(names, found, plan.margin)]
            tables["rank_chance"] += [about | row for row in head_to_head.rank_rows(names, found)]
        slopes = year.slopes()
        tables["causes"] += [where | row for row in chance_causes.rows(year, names, first, second, core, slopes)]
        tables["flips"] += [where | row for row in chance_flips.rows(year, site.name, absorbers, slopes)]
    mountings = tuple(mounting.name for mounting in site.mountings)
    return tables, Draws(mountings, tuple(names), values[0], values[1])


# ---------------------------------------------------------------------------------------------- how far it scatters


def _row(where: Row, measure: str, name: str, base: float, values: Array) -> Row:
    """Return what is told of one absorber's measure, and how far the draws have settled it."""
    p90, p50, p10 = quantiles(values)
    half90, half50, _ = quantiles(values[: max(len(values) // 2, 1)])
    return where | {
        "absorber": name,
        "measure": measure,
        "base": float(base),
        "p90": p90,
        "p50": p50,
        "p10": p10,
        "mean": float(values.mean()),
        "sd": float(values.std()),
        "p90_half": half90,
        "p50_half": half50,
        "p90_error": quantile_error(values, 0.1),
        "p50_error": quantile_error(values, 0.5),
    }


def quantiles(values: Array) -> tuple[float, float, float]:
    """Return P90, P50 and P10: what is exceeded with 90, 50 and 10 % probability."""
    p90, p50, p10 = np.quantile(values, (0.1, 0.5, 0.9))
    return float(p90), float(p50), float(p10)


def quantile_error(values: Array, share: float) -> float:
    """Return the standard error of a quantile: half of what lies between the quantiles one standard error to each side.

    The draws are spread more evenly than independent ones, so this errs on the large side.
    """
    off = np.sqrt(share * (1 - share) / len(values))
    low, high = np.quantile(values, np.clip((share - off, share + off), 0.0, 1.0))
    return float(high - low) / 2
