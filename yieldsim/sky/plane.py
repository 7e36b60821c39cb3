"""From light on the horizontal to light on a module: beam, circumsolar, sky and ground, band by band."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from yieldsim.sky.sight import Sight, lit_mean
from yieldsim.sky.sun import SunCourse

Array = NDArray[np.float64]

_BLOCK = 2048  # intervals at once, all bands of each: 2 MB an array
LEAST_COS_ZENITH = 0.01745  # cos(89 deg): below it light from around the sun merges with the sky (common practice)


@dataclass(frozen=True, slots=True)
class SkyLight:
    """Light of a sky by where it comes from.

    Parameters
    ----------
    direct : (n, n_band) array [W m-2], from the sun and close around it, on a plane facing the sun
    uniform : (n, n_band) array [W m-2], from all of the sky alike, on the horizontal
    rim : (n, n_band) array [W m-2] or None, from the rim of the sky, on a wall; may be below 0
    """

    direct: Array
    uniform: Array
    rim: Array | None = None


@dataclass(frozen=True, slots=True)
class PlaneParts:
    """Light on a face of a plane by where it comes from.

    Parameters
    ----------
    beam : (n, n_band) array [W m-2], sun and the bright sky around it
    sky : (n, n_band) array [W m-2]
    ground : (n, n_band) array [W m-2]
    sight : Sight, what the face sees
    """

    beam: Array
    sky: Array
    ground: Array
    sight: Sight

    def bands(self) -> Array:
        """Return the light in each band, (n, n_band) [W m-2]."""
        light = self.beam + self.sky
        light += self.ground
        return light

    def total(self) -> Array:
        """Return the irradiance of the face, (n,) [W m-2]."""
        return np.asarray(self.beam.sum(axis=1) + self.sky.sum(axis=1) + self.ground.sum(axis=1))


def isotropic_parts(tilt_deg: float) -> tuple[float, float]:
    """Return the shares of a uniform sky and a uniform ground that a tilted plane sees [1]."""
    cosine = float(np.cos(np.radians(tilt_deg)))
    return (1 + cosine) / 2, (1 - cosine) / 2


def sky_light(
    beam: Array,
    diffuse: Array,
    around: Array,
    cos_zenith: Array,
    rim: Array | None = None,
    least_cos_zenith: float = LEAST_COS_ZENITH,
) -> SkyLight:
    """Split the light of a sky into what comes from the sun's direction and what comes from all of it.

    Parameters
    ----------
    beam : (n, n_band) array [W m-2], on a plane facing the sun
    diffuse : (n, n_band) array [W m-2], on the horizontal
    around : (n, n_band) array [1], share of the diffuse light that comes from around the sun
    cos_zenith : (n,) array [1]
    rim : (n, n_band) array [1] or None, share from the rim of the sky, on a wall
    least_cos_zenith : float [1], below it light from around the sun merges with the sky

    Returns
    -------
    SkyLight; on the horizontal its direct part times cos z and its uniform part are beam cos z + diffuse

    References
    ----------
    J. E. Hay, J. A. Davies, Calculations of the solar radiation incident on an inclined surface, Proc. First Canadian
    Solar Radiation Data Workshop (1980) 59; here for each band.
    """
    slant = np.maximum(cos_zenith, least_cos_zenith)[:, None]
    # In place: new memory for each step takes longer than the arithmetic.
    direct = np.clip(around, 0.0, 1.0)
    # As the sun sinks below the least height the uniform part takes over, so that none is lost on the horizontal.
    uniform = direct * np.minimum(cos_zenith[:, None] / slant, 1.0)
    np.subtract(1.0, uniform, out=uniform)
    uniform *= diffuse
    direct *= diffuse
    direct /= slant
    direct += beam
    return SkyLight(direct, uniform, None if rim is None else diffuse * rim)


def at_level(around: Array, diffuse: Array, level: Array) -> Array:
    """Return shares of each band brought to a broadband level, their colour kept as far as that goes.

    Parameters
    ----------
    around : (n, n_band) array [1], 0 to 1
    diffuse : (n, n_band) array [W m-2], the light the shares are of
    level : (n,) array [1], share wanted of all bands together, 0 to 1

    Returns
    -------
    (n, n_band) array [1], 0 to 1; times the light it sums to the level wanted
    """
    total = diffuse.sum(axis=1)
    mean = np.divide((around * diffuse).sum(axis=1), total, out=np.zeros_like(total), where=total > 0)
    down = np.divide(level, mean, out=np.zeros_like(total), where=mean > level)
    up = np.divide(1 - level, 1 - mean, out=np.ones_like(total), where=mean < 1)
    lowered, raised = around * down[:, None], 1 - (1 - around) * up[:, None]
    return np.asarray(np.clip(np.where((mean > level)[:, None], lowered, raised), 0.0, 1.0))


def on_plane(light: SkyLight, sight: Sight, albedo: Array) -> PlaneParts:
    """Put the light of a sky on a face.

    Parameters
    ----------
    light : SkyLight of n intervals
    sight : Sight of the face
    albedo : (n,) or (n, n_band) array [1], of the ground

    Returns
    -------
    PlaneParts
    """
    reflected = albedo[:, None] if albedo.ndim == 1 else albedo
    ground = light.direct * sight.ground_beam[:, None]
    sky = light.uniform * sight.ground_sky[:, None]
    ground += sky
    ground *= reflected
    np.multiply(light.uniform, sight.sky[:, None], out=sky)
    if light.rim is not None:
        sky += light.rim * sight.rim[:, None]
        np.maximum(sky, 0.0, out=sky)
    return PlaneParts(light.direct * sight.beam[:, None], sky, ground, sight)


# ------------------------------------------------------------------------------------------- through the glass


def incidence_modifier_beam(cos_aoi: Array, a_r: float) -> Array:
    """Return the share of beam light that enters a glass front, relative to normal incidence.

    Parameters
    ----------
    cos_aoi : (...) array [1], cosine of incidence, 0 to 1
    a_r : float [1], angular loss coefficient, 0.08 to 0.25

    Returns
    -------
    (...) array [1]

    References
    ----------
    N. Martin, J. M. Ruiz, Calculation of the PV modules angular losses under field conditions by means of an analytical
    model, Sol. Energy Mater. Sol. Cells 70 (2001) 25, eq. 2.
    """
    return np.asarray(np.expm1(-np.asarray(cos_aoi) / a_r) / np.expm1(-1.0 / a_r))


def incidence_modifier_diffuse(tilt_deg: Array | float, a_r: float) -> tuple[Array, Array]:
    """Return the shares of uniform sky and ground light that enter a tilted glass front, each shaped as the tilt [1].

    Parameters
    ----------
    tilt_deg : (...) array [deg], 0 to 180
    a_r : float [1]

    References
    ----------
    N. Martin, J. M. Ruiz, Prog. Photovolt. 13 (2005) 75 (corrigendum 21 (2013) 1030), eq. 3; through pvlib.
    """
    from pvlib.iam import martin_ruiz_diffuse

    entered = martin_ruiz_diffuse(tilt_deg, a_r=a_r)
    return np.asarray(entered["sky"]), np.asarray(entered["ground"])


def entered(parts: PlaneParts, sun: SunCourse, a_r: float | None) -> Array:
    """Return the light that passes the glass of a face.

    Parameters
    ----------
    parts : PlaneParts
    sun : SunCourse of the same intervals
    a_r : float [1], angular loss coefficient of Martin & Ruiz (2001), or None = all passes

    Returns
    -------
    (n, n_band) array [W m-2]

    Notes
    -----
    Beam and circumsolar light lose at the sun's angle, sky and ground as uniform hemispheres do; each is averaged over
    the sub-steps with the light it brings.
    """
    if a_r is None:
        return parts.bands()
    sight = parts.sight
    passed = lit_mean(sight.reached * incidence_modifier_beam(sight.cos_aoi, a_r), sun.up)
    tilt_deg = np.degrees(np.arccos(np.clip(sight.cos_tilt, -1.0, 1.0)))
    from_sky, from_ground = incidence_modifier_diffuse(tilt_deg, a_r)
    beam = _share(passed, sight.beam)
    sky = _share(lit_mean(sight.sky_step * from_sky, sun.up), lit_mean(sight.sky_step, sun.up))
    ground = _share(lit_mean(sight.ground_step * from_ground, sun.up), lit_mean(sight.ground_step, sun.up))
    light = parts.beam * beam[:, None]
    for start in range(0, len(light), _BLOCK):
        block = slice(start, start + _BLOCK)
        light[block] += parts.sky[block] * sky[block, None]
        light[block] += parts.ground[block] * ground[block, None]
    return light


def _share(part: Array, whole: Array) -> Array:
    return np.divide(part, whole, out=np.zeros_like(whole), where=whole > 0)
