"""Energy over gap: a year's light met by a row of gaps of one quality, beside the standard spectrum."""

from __future__ import annotations

import numpy as np

from yieldsim.sky.plane import PlaneParts
from yieldsim.study import annual
from yieldsim.study.annual import Ratings
from yieldsim.study.hourly import SiteSky, terminal_powers
from yieldsim.study.plan import GapSweepPlan, LossesPlan, MountingPlan, Row

STANDARD_SITE = "standard spectrum"
STANDARD_LIGHT_KWH_M2 = 1000.0  # insolation of the rows for the standard spectrum: their energy is per 1000 kWh/m2


def sweep_rows(
    site: str,
    sky: SiteSky,
    mounting: MountingPlan,
    parts: PlaneParts,
    plan: GapSweepPlan,
    losses: LossesPlan,
    dust: annual.Array | None = None,
) -> list[Row]:
    """Return one row per quality and gap: the year's energy [kWh m-2] and the efficiency at standard conditions [1]."""
    rows: list[Row] = []
    kept = annual.kept_share(losses)[sky.month]
    step_h = sky.weather.interval_s / 3600.0
    light = float(parts.total().sum() * step_h)
    for quality, absorbers in plan.absorbers.items():
        power = terminal_powers(sky, mounting, parts, absorbers, dust)
        efficiency = Ratings.of(absorbers).module_efficiency(absorbers)
        area = np.array([absorber.area_fraction for absorber in absorbers])
        energy = (power @ (kept * step_h)) * area / 1000.0
        rows.extend(
            {
                "site": site,
                "mounting": mounting.name,
                "quality": quality,
                "gap_ev": gap,
                "poa_kwh_m2": light / 1000.0,
                "energy_kwh_m2": float(energy[i]),
                "standard_efficiency": float(efficiency[i]),
            }
            for i, gap in enumerate(plan.gaps_ev)
        )
    return rows


def standard_rows(plan: GapSweepPlan) -> list[Row]:
    """Return the same rows for 1000 kWh/m2 of the standard spectrum on cells at 25 degC, nothing lost."""
    rows: list[Row] = []
    for quality, absorbers in plan.absorbers.items():
        efficiency = Ratings.of(absorbers).module_efficiency(absorbers)
        rows.extend(
            {
                "site": STANDARD_SITE,
                "mounting": "",
                "quality": quality,
                "gap_ev": gap,
                "poa_kwh_m2": STANDARD_LIGHT_KWH_M2,
                "energy_kwh_m2": float(efficiency[i]) * STANDARD_LIGHT_KWH_M2,
                "standard_efficiency": float(efficiency[i]),
            }
            for i, gap in enumerate(plan.gaps_ev)
        )
    return rows
