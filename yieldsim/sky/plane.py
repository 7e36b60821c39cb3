"""From light on the horizontal to light on a module: beam, circumsolar, sky and ground, band by band."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from yieldsim.sky.sun import SunCourse

Array = NDArray[np.float64]

_LEAST_COS_ZENITH = 0.01745  # cos(89 deg): below it the geometric factor means nothing (Hay & Davies, common practice)


@dataclass(frozen=True, slots=True)
class PlaneParts:
    """Light on a plane by where it comes from.

    Parameters
    ----------
    beam : (n, n_band) array [W m-2], sun and the bright sky around it
    sky : (n, n_band) array [W m-2]
    ground : (n, n_band) array [W m-2]
    cos_aoi : (n,) array [1], mean over the lit part of the interval of the cosine of incidence, 0 behind the plane
    """

    beam: Array
    sky: Array
    ground: Array
    cos_aoi: Array

    def total(self) -> Array:
        """Return the plane-of-array irradiance, (n,) [W m-2]."""
        return np.asarray(self.beam.sum(axis=1) + self.sky.sum(axis=1) + self.ground.sum(axis=1))


def isotropic_parts(tilt_deg: float) -> tuple[float, float]:
    """Return the shares of a uniform sky and a uniform ground that a tilted plane sees [1]."""
    cosine = float(np.cos(np.radians(tilt_deg)))
    return (1 + cosine) / 2, (1 - cosine) / 2


def sky_on_plane(diffuse: Array, anisotropy: Array, geometric_factor: Array) -> tuple[Array, Array]:
    """Split diffuse light into what comes from around the sun and what comes from the whole sky.

    Parameters
    ----------
    diffuse : (n, n_band) array [W m-2], on the horizontal
    anisotropy : (n, n_band) array [1], share of the band's diffuse light that comes from around the sun: the normal
        beam over the extraterrestrial, times haze's share of the scattering
    geometric_factor : (n,) array [1], cosine of incidence over cosine of zenith

    Returns
    -------
    circumsolar : (n, n_band) array [W m-2], on the plane
    isotropic : (n, n_band) array [W m-2], on the horizontal; times the plane's view of the sky gives the plane's

    References
    ----------
    J. E. Hay, J. A. Davies, Calculations of the solar radiation incident on an inclined surface, Proc. First Canadian
    Solar Radiation Data Workshop (1980) 59; here for each band.
    """
    around_sun = diffuse * np.clip(anisotropy, 0.0, 1.0)
    return around_sun * geometric_factor[:, None], diffuse - around_sun


def cos_incidence(sun: SunCourse, tilt_deg: float, azimuth_deg: float) -> Array:
    """Return the cosine of incidence at every sub-step, (n, step) [1]; 0 behind the plane and with the sun down.

    Parameters
    ----------
    sun : SunCourse
    tilt_deg, azimuth_deg : float [deg], tilt from horizontal, azimuth clockwise from north
    """
    tilt, azimuth = np.radians(tilt_deg), np.radians(azimuth_deg)
    normal = np.array([np.sin(tilt) * np.sin(azimuth), np.sin(tilt) * np.cos(azimuth), np.cos(tilt)])
    return np.where(sun.up, np.maximum(sun.direction @ normal, 0.0), 0.0)


def lit_mean(values: Array, up: NDArray[np.bool_]) -> Array:
    """Return the mean over lit sub-steps of values (n, step) that are 0 elsewhere; 0 where none is lit."""
    count = up.sum(axis=1)
    return np.divide(values.sum(axis=1), count, out=np.zeros(len(values)), where=count > 0)


def on_plane(
    beam: Array, diffuse: Array, anisotropy: Array, sun: SunCourse, albedo: Array, tilt_deg: float, azimuth_deg: float
) -> PlaneParts:
    """Put horizontal band spectra on a fixed plane.

    Parameters
    ----------
    beam : (n, n_band) array [W m-2], on a plane facing the sun
    diffuse : (n, n_band) array [W m-2], on the horizontal
    anisotropy : (n, n_band) array [1], see `sky_on_plane`
    sun : SunCourse of the n hours
    albedo : (n,) or (n, n_band) array [1]
    tilt_deg, azimuth_deg : float [deg]

    Returns
    -------
    PlaneParts
    """
    cos_aoi = lit_mean(cos_incidence(sun, tilt_deg, azimuth_deg), sun.up)
    factor = cos_aoi / np.maximum(sun.cos_zenith, _LEAST_COS_ZENITH)
    circumsolar, isotropic = sky_on_plane(diffuse, anisotropy, factor)
    sky_view, ground_view = isotropic_parts(tilt_deg)
    reflected = albedo[:, None] if albedo.ndim == 1 else albedo
    horizontal = beam * sun.cos_zenith[:, None] + diffuse
    return PlaneParts(
        beam=beam * cos_aoi[:, None] + circumsolar,
        sky=isotropic * sky_view,
        ground=horizontal * reflected * ground_view,
        cos_aoi=cos_aoi,
    )


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


def incidence_modifier_diffuse(tilt_deg: float, a_r: float) -> tuple[float, float]:
    """Return the shares of uniform sky and ground light that enter a tilted glass front [1].

    References
    ----------
    N. Martin, J. M. Ruiz, Prog. Photovolt. 13 (2005) 75 (corrigendum 21 (2013) 1030), eq. 3; through pvlib.
    """
    from pvlib.iam import martin_ruiz_diffuse

    entered = martin_ruiz_diffuse(tilt_deg, a_r=a_r)
    return float(entered["sky"]), float(entered["ground"])


def entered_beam(sun: SunCourse, tilt_deg: float, azimuth_deg: float, a_r: float) -> Array:
    """Return the share of an interval's beam on the plane that enters, averaged with the cosine of incidence.

    Returns
    -------
    (n,) array [1]; 0 where the sun is behind the plane
    """
    cosine = cos_incidence(sun, tilt_deg, azimuth_deg)
    entered = (cosine * incidence_modifier_beam(cosine, a_r)).sum(axis=1)
    whole = cosine.sum(axis=1)
    return np.divide(entered, whole, out=np.zeros_like(whole), where=whole > 0)
