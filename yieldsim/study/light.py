"""The light of a site on each of its mountings: front and rear, through the glass, under snow and dust."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from yieldsim.device.stack import Absorber
from yieldsim.sky import clear_radiance, column, dust, mounting, perez_1990, plane, sight, snow
from yieldsim.sky.mounting import Stance
from yieldsim.sky.rows import Rows
from yieldsim.study.plan import LossesPlan, MountingPlan

if TYPE_CHECKING:  # hourly imports this module
    from yieldsim.study.hourly import SiteSky

Array = NDArray[np.float64]
Shares = tuple[Array, Array | None, float]

_BLOCK = 2048  # intervals at once, all bands of each: 2 MB an array
COS_85 = float(np.cos(np.radians(85.0)))  # where Perez et al. (1990) stop to follow the sun down


def stance_of(site: SiteSky, plan: MountingPlan) -> Stance:
    """Return how a mounting stands at every sub-step of a site's lit intervals."""
    if plan.kind != "tracker":
        return mounting.fixed(plan.tilt_deg, plan.azimuth_deg)
    rows = rows_of(plan)
    coverage = rows.coverage if plan.backtrack and rows is not None else 0.0
    return mounting.tracking(site.sun, plan.axis_azimuth_deg, plan.axis_tilt_deg, plan.max_angle_deg, coverage)


def rows_of(plan: MountingPlan) -> Rows | None:
    """Return the rows a mounting stands in; None where it stands alone."""
    return None if plan.row_pitch_m is None else Rows(plan.row_width_m, plan.height_m, plan.row_pitch_m)


def sky_light(site: SiteSky, plan: MountingPlan) -> plane.SkyLight:
    """Return a site's light by where it comes from, hour means."""
    around, rim, least = SKY_MODELS[plan.sky_model](site)
    return plane.sky_light(site.sky.beam, site.sky.diffuse, around, site.sun.cos_zenith, rim, least)


def _hay_davies(site: SiteSky) -> Shares:
    """Return Hay & Davies' shares, band by band, of haze's part of the scattering: Rayleigh's knows no direction."""
    air = site.air.with_aod500(site.sky.aod500)
    around = column.forward_share(air, site.optics)
    top = _top(site)
    around *= np.divide(site.sky.beam, top, out=top)
    return around, None, plane.LEAST_COS_ZENITH


def _perez(site: SiteSky) -> Shares:
    """Return Perez's broadband shares, the band's colour after Hay & Davies."""
    light = site.sky
    top = _top(site).sum(axis=1)
    near, rim = perez_1990.shares(light.beam.sum(axis=1), light.diffuse.sum(axis=1), top, site.sun.cos_zenith)
    around, _, _ = _hay_davies(site)
    return plane.at_level(np.clip(around, 0.0, 1.0), light.diffuse, near), rim[:, None], COS_85


def _radiance(site: SiteSky) -> Shares:
    """Return the shares fitted to radiances of clear skies, band by band."""
    air = site.air.with_aod500(site.sky.aod500)
    around, rim = clear_radiance.shares(air, site.sky.open_share, site.optics)
    return around, rim, plane.LEAST_COS_ZENITH


def _top(site: SiteSky) -> Array:
    return np.asarray((site.sun.earth_sun * site.sun.lit)[:, None] * site.optics.extraterrestrial)


#: Share of sky light from around the sun, from the rim, and the least cosine of the zenith, by the name in a study.
SKY_MODELS: Mapping[str, Callable[[SiteSky], Shares]] = {
    "hay-davies": _hay_davies,
    "perez": _perez,
    "radiance": _radiance,
}


def plane_parts(site: SiteSky, plan: MountingPlan) -> plane.PlaneParts:
    """Return the band spectra on the front of a mounting, hour means."""
    return _on_face(
        site, plan, sight.of_face(sight.FRONT, stance_of(site, plan), site.sun, rows_of(plan), site.horizon)
    )


def rear_parts(site: SiteSky, plan: MountingPlan, absorbers: Sequence[Absorber]) -> plane.PlaneParts | None:
    """Return the band spectra on the rear of a mounting, hour means; None where nothing takes them.

    A row that stands alone sees its own shadow on the ground behind it.
    """
    if plan.kind == "roof" or not any(absorber.bifaciality > 0 for absorber in absorbers):
        return None
    rows = rows_of(plan) or Rows(plan.row_width_m, plan.height_m)
    return _on_face(site, plan, sight.of_face(sight.REAR, stance_of(site, plan), site.sun, rows, site.horizon))


def _on_face(site: SiteSky, plan: MountingPlan, seen: sight.Sight) -> plane.PlaneParts:
    """Return the band spectra on a face, a block of intervals at a time: what leads to them is thrice their size."""
    beam, sky, ground = (np.empty_like(site.sky.beam) for _ in range(3))
    for start in range(0, len(beam), _BLOCK):
        block = slice(start, start + _BLOCK)
        lit, month = site.lit[block], site.month[block]
        light = {name: getattr(site, name).only(block) for name in ("sun", "air", "sky")}
        hours = replace(site, lit=lit, month=month, calendar=None, **light)
        found = plane.on_plane(sky_light(hours, plan), seen.only(block), hours.air.albedo)
        beam[block], sky[block], ground[block] = found.beam, found.sky, found.ground
    return plane.PlaneParts(beam, sky, ground, seen)


def dust_colour(site: SiteSky, losses: LossesPlan) -> Array | None:
    """Return how dust colours the light of each lit interval, (n, n_band) [1]; None for grey dust or none."""
    if losses.soiling_exponent == 0 or "soiling" not in losses.monthly:
        return None
    return dust.colour(np.asarray(losses.monthly["soiling"]), losses.soiling_exponent)[site.month]


def with_snow(losses: LossesPlan, site: SiteSky, plan: MountingPlan, parts: plane.PlaneParts) -> LossesPlan:
    """Return losses with snow on the modules worked out, where the study gives none and the file has its depth."""
    if "snow" in losses.monthly or "snow_depth" not in site.weather:
        return losses
    return replace(losses, monthly={**losses.monthly, "snow": snow_losses(site, plan, parts)})


def snow_losses(site: SiteSky, plan: MountingPlan, parts: plane.PlaneParts) -> tuple[float, ...]:
    """Return the share of each month's light that falls on snow instead of the modules, 12 values [1]."""
    weather = site.weather
    light = np.zeros(len(weather))
    light[site.lit] = parts.total()
    tilt_deg = np.zeros(len(weather)) if plan.kind == "tracker" else np.full(len(weather), plan.tilt_deg)
    tilt_deg[site.lit] = np.degrees(np.arccos(np.clip(_mean_cos_tilt(site, parts), -1.0, 1.0)))
    covered = snow.coverage(weather["snow_depth"], light, weather["temp_air"], tilt_deg, weather.interval_s / 3600.0)[
        site.lit
    ]
    light = light[site.lit]
    whole = np.bincount(site.month, light, minlength=12)
    lost = np.bincount(site.month, light * covered, minlength=12)
    return tuple(float(x) for x in np.divide(lost, whole, out=np.zeros(12), where=whole > 0))


def _mean_cos_tilt(site: SiteSky, parts: plane.PlaneParts) -> Array:
    return sight.lit_mean(parts.sight.cos_tilt, site.sun.up)
