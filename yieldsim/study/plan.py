"""The validated inputs of a study: what config makes from YAML and study computes from."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any, Literal

from yieldsim.device.stack import Absorber

Monthly = tuple[float, ...]  # 12 values, January first


@dataclass(frozen=True, slots=True)
class WeatherFile:
    """One weather file of a site.

    Parameters
    ----------
    path : str, absolute path, or ``pvlib:NAME`` for a file that pvlib ships
    shown : str, as the study names it
    sha256 : str, of its content
    format : str or None, the reader to use; None = recognise it by content
    timestamps : str or None, where its time labels sit, over what the file says
    """

    path: str
    shown: str
    sha256: str
    format: str | None = None
    timestamps: str | None = None


@dataclass(frozen=True, slots=True)
class AtmospherePlan:
    """What the study says about the air; None = left to the file, then derived.

    Parameters
    ----------
    aod500, angstrom_exponent, water_cm, ozone_atm_cm : 12 monthly values or None
    haze : ``hourly`` = solve the haze of clear hours from their beam; ``fixed`` = keep the given one
    """

    aod500: Monthly | None = None
    angstrom_exponent: Monthly | None = None
    water_cm: Monthly | None = None
    ozone_atm_cm: Monthly | None = None
    haze: Literal["hourly", "fixed"] = "hourly"


@dataclass(frozen=True, slots=True)
class GroundPlan:
    """What lies under the modules: ``albedo`` [1] for all wavelengths; None = the file's own, else 0.2."""

    albedo: float | None = None


@dataclass(frozen=True, slots=True)
class MountingPlan:
    """How modules stand: tilt [deg] from horizontal, azimuth [deg] clockwise from north."""

    name: str
    kind: Literal["fixed"]
    tilt_deg: float
    azimuth_deg: float


@dataclass(frozen=True, slots=True)
class SitePlan:
    """One site: weather, air, ground, mountings; position overrides are None where the file's own stands."""

    name: str
    weather: tuple[WeatherFile, ...]
    mountings: tuple[MountingPlan, ...]
    atmosphere: AtmospherePlan = field(default_factory=AtmospherePlan)
    ground: GroundPlan = field(default_factory=GroundPlan)
    latitude_deg: float | None = None
    longitude_deg: float | None = None
    elevation_m: float | None = None
    allow_gaps: bool = False


@dataclass(frozen=True, slots=True)
class GapSweepPlan:
    """Gaps [eV] to compute, once per quality.

    Parameters
    ----------
    gaps_ev : tuple of float [eV]
    absorbers : quality name -> one Absorber per gap
    """

    gaps_ev: tuple[float, ...]
    absorbers: Mapping[str, tuple[Absorber, ...]]


@dataclass(frozen=True, slots=True)
class LossesPlan:
    """Shares of energy lost behind the absorber, by name, 12 monthly values each."""

    monthly: Mapping[str, Monthly] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class StudyPlan:
    """A whole study.

    Parameters
    ----------
    name : str, also the output folder
    sites, absorbers : in the study's order; names unique after case folding
    reference : str, name of the absorber the others are set against
    keep : parts of the result to write: ``annual monthly hourly spectra plots``
    resolved : the study as resolved (every default filled in), JSON-able, for ``run.json``
    folder : str, absolute path its relative paths start from; for ``run.json``
    """

    name: str
    sites: tuple[SitePlan, ...]
    absorbers: tuple[Absorber, ...]
    reference: str
    gap_sweep: GapSweepPlan | None
    losses: LossesPlan
    keep: frozenset[str]
    resolved: Mapping[str, Any]
    folder: str = ""
