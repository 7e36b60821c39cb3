"""The validated inputs of a study: what config makes from YAML and study computes from."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any, Literal

from yieldsim.device.material import Material, Trapping
from yieldsim.device.stack import Absorber
from yieldsim.sky.horizon import Horizon

Row = dict[str, str | int | float]  # one line of a result's table
Monthly = tuple[float, ...]  # 12 values, January first


@dataclass(frozen=True, slots=True)
class ColumnsPlan:
    """Which columns of a table of weather are what.

    Parameters
    ----------
    time : names of the columns that together are the time
    columns : (our column, its name in the file, its unit there or None for ours) each
    time_format : str or None, as strptime has it; None = ISO 8601
    missing : numbers that stand for a missing value
    """

    time: tuple[str, ...]
    columns: tuple[tuple[str, str, str | None], ...]
    time_format: str | None = None
    missing: tuple[float, ...] = ()


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
    cell : (row, column) or None, the place in a grid of weather, along latitude and longitude
    columns : ColumnsPlan or None, which columns of any table are what
    """

    path: str
    shown: str
    sha256: str
    format: str | None = None
    timestamps: str | None = None
    cell: tuple[int, int] | None = None
    columns: ColumnsPlan | None = None


@dataclass(frozen=True, slots=True)
class AtmospherePlan:
    """What the study says about the air; None = left to the file, then derived.

    Parameters
    ----------
    aod500, angstrom_exponent, water_cm, ozone_atm_cm : 12 monthly values or None
    haze : ``hourly`` = solve the haze of clear hours from their beam; ``fixed`` = keep the given one
    single_scattering_albedo : float or None [1], of haze at 400 nm; None = that of Bird & Riordan (1984)
    asymmetry : float or None [1], mean cosine of haze's scattering angle; None = likewise
    """

    aod500: Monthly | None = None
    angstrom_exponent: Monthly | None = None
    water_cm: Monthly | None = None
    ozone_atm_cm: Monthly | None = None
    haze: Literal["hourly", "fixed"] = "hourly"
    single_scattering_albedo: float | None = None
    asymmetry: float | None = None


@dataclass(frozen=True, slots=True)
class GroundPlan:
    """What lies under the modules.

    Parameters
    ----------
    albedo : float [1] or None, broadband; None = the file's own, else that of the surface, else 0.2
    surface : str or None, a surface of the library, or the file its spectrum came from; None = grey
    spectrum : (wavelengths [nm], albedos [1]) or None, a measured surface

    Notes
    -----
    A grey ground with an albedo stays as it is all year; any other lies under snow where the weather file says so.
    """

    albedo: float | None = None
    surface: str | None = None
    spectrum: tuple[tuple[float, ...], tuple[float, ...]] | None = None


@dataclass(frozen=True, slots=True)
class MountingPlan:
    """How modules stand.

    Parameters
    ----------
    name : str
    kind : ``fixed``, ``tracker`` (about one axis), ``vertical`` (fixed, tilt 90) or ``roof`` (fixed, warmer, no rear)
    tilt_deg, azimuth_deg : float [deg], tilt from horizontal, azimuth clockwise from north; not for trackers
    axis_tilt_deg, axis_azimuth_deg : float [deg], of a tracker: where its axis points and how far it falls that way
    max_angle_deg : float [deg], a tracker's largest turn to either side
    backtrack : bool, a tracker turns back before its rows shade each other
    row_pitch_m : float or None [m], from row to row; None = one row alone
    row_width_m : float [m], of a row along the plane, square to its length
    height_m : float [m], of a row's middle line, a tracker's axis, above the ground
    sky_model : ``hay-davies``, ``perez`` or ``radiance``, how much of the sky's light comes from around the sun
    """

    name: str
    kind: Literal["fixed", "tracker", "vertical", "roof"] = "fixed"
    tilt_deg: float = 0.0
    azimuth_deg: float = 180.0
    axis_tilt_deg: float = 0.0
    axis_azimuth_deg: float = 180.0
    max_angle_deg: float = 60.0
    backtrack: bool = True
    row_pitch_m: float | None = None
    row_width_m: float = 2.0
    height_m: float = 1.5
    sky_model: Literal["hay-davies", "perez", "radiance"] = "hay-davies"

    def words(self) -> str:
        """Return what a person would say of it."""
        if self.kind == "tracker":
            axis = f"axis towards {self.axis_azimuth_deg:g} deg"
            axis += f", falling {self.axis_tilt_deg:g} deg" if self.axis_tilt_deg else ""
            back = ", turning back before rows shade each other" if self.backtrack and self.row_pitch_m else ""
            stands = f"tracker, {axis}, up to {self.max_angle_deg:g} deg to either side{back}"
        elif self.kind == "vertical":
            stands = f"vertical, azimuth {self.azimuth_deg:g} deg"
        else:
            stands = f"{self.kind}, {self.tilt_deg:g} deg tilt, azimuth {self.azimuth_deg:g} deg"
        if self.row_pitch_m is not None:
            stands += f"; rows {self.row_width_m:g} m wide, {self.row_pitch_m:g} m apart, {self.height_m:g} m up"
        return stands


@dataclass(frozen=True, slots=True)
class SitePlan:
    """One site: weather, air, ground, mountings, skyline; position overrides are None where the file's own stands."""

    name: str
    weather: tuple[WeatherFile, ...]
    mountings: tuple[MountingPlan, ...]
    atmosphere: AtmospherePlan = field(default_factory=AtmospherePlan)
    ground: GroundPlan = field(default_factory=GroundPlan)
    latitude_deg: float | None = None
    longitude_deg: float | None = None
    elevation_m: float | None = None
    allow_gaps: bool = False
    horizon: Horizon | None = None


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
class GapPairsPlan:
    """Pairs of gaps [eV] to compute, once per quality and number of terminals.

    Parameters
    ----------
    pairs_ev : tuple of (top, bottom) [eV], the bottom gap below the top one
    absorbers : (quality name, terminals) -> one Absorber of two junctions per pair, alike but for their gaps
    """

    pairs_ev: tuple[tuple[float, float], ...]
    absorbers: Mapping[tuple[str, int], tuple[Absorber, ...]]


@dataclass(frozen=True, slots=True)
class FilmPlan:
    """A junction that is made from a material, so that it can be told where in it light makes its pairs.

    Parameters
    ----------
    absorber : str, its name
    junction : int, 1 for the top one
    material : Material
    thickness : float [m]
    trapping : see `material.absorptance`
    """

    absorber: str
    junction: int
    material: Material
    thickness: float
    trapping: Trapping


@dataclass(frozen=True, slots=True)
class LossesPlan:
    """Shares of energy lost besides what absorbers do.

    Parameters
    ----------
    monthly : name -> 12 monthly values
    soiling_exponent : float [1], dust takes (wavelength)^-exponent; 0 = grey
    """

    monthly: Mapping[str, Monthly] = field(default_factory=dict)
    soiling_exponent: float = 0.0


@dataclass(frozen=True, slots=True)
class WorthPlan:
    """Prices and terms of a plant, all given by the user; amounts in one currency.

    Parameters
    ----------
    currency : str
    limited_by : ``area``, ``dc_power`` or ``grid_power``, what every absorber's plant has the same of
    size : float, [m2], [kW] rated or [kW] to the grid, as that says
    energy_price : 1, 12 or 8760 prices [currency/kWh]
    discount_rate : float [1/year]
    life_years : int
    per_w, per_m2 : absorber -> module price [currency/W], [currency/m2]; every absorber is in one of the two
    fading : absorber -> loss of output from year to year [1/year]
    area_cost_per_m2, power_cost_per_w, fixed_cost : capital besides modules
    yearly_cost_per_w, yearly_cost_per_m2, yearly_cost : every year
    dc_to_grid : float [1], rated power over grid power
    """

    currency: str
    limited_by: Literal["area", "dc_power", "grid_power"]
    size: float
    energy_price: tuple[float, ...]
    discount_rate: float
    life_years: int
    per_w: Mapping[str, float] = field(default_factory=dict)
    per_m2: Mapping[str, float] = field(default_factory=dict)
    fading: Mapping[str, float] = field(default_factory=dict)
    area_cost_per_m2: float = 0.0
    power_cost_per_w: float = 0.0
    fixed_cost: float = 0.0
    yearly_cost_per_w: float = 0.0
    yearly_cost_per_m2: float = 0.0
    yearly_cost: float = 0.0
    dc_to_grid: float = 1.0

    def module_price_per_m2(self, absorber: str, efficiency: float) -> float:
        """Return the price of an absorber's modules per area, from its price per watt where that is given."""
        if absorber in self.per_w:
            return self.per_w[absorber] * efficiency * 1000.0
        return self.per_m2[absorber]

    def degradation(self, absorber: str) -> float:
        """Return the loss of output from year to year [1/year]."""
        return self.fading.get(absorber, 0.0)


@dataclass(frozen=True, slots=True)
class ChancePlan:
    """What is drawn to tell how sure a ranking is; inputs and their defaults stand in `chance_inputs`.

    Parameters
    ----------
    draws : int
    seed : int
    margin : float [1], lead that the study asks about, as a share of the other's yield
    spreads : input -> standard deviation, over the default
    correlation : input of a site -> correlation between sites [1]; 0 where it is left out
    sites, absorbers : name -> input -> standard deviation, for that site or absorber alone
    """

    draws: int = 400
    seed: int = 0
    margin: float = 0.01
    spreads: Mapping[str, float] = field(default_factory=dict)
    correlation: Mapping[str, float] = field(default_factory=dict)
    sites: Mapping[str, Mapping[str, float]] = field(default_factory=dict)
    absorbers: Mapping[str, Mapping[str, float]] = field(default_factory=dict)


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
    inputs : file as the study names it -> SHA-256, of the files that absorbers are made from
    findings : (absorber, plain words), what was found and done while they were made
    films : junctions made from a material
    worth : WorthPlan or None
    portfolio : site -> weight; None = all sites alike
    chance : ChancePlan or None
    """

    name: str
    sites: tuple[SitePlan, ...]
    absorbers: tuple[Absorber, ...]
    reference: str
    gap_sweep: GapSweepPlan | None
    losses: LossesPlan
    keep: frozenset[str]
    resolved: Mapping[str, Any]
    gap_pairs: GapPairsPlan | None = None
    folder: str = ""
    inputs: Mapping[str, str] = field(default_factory=dict)
    findings: tuple[tuple[str, str], ...] = ()
    films: tuple[FilmPlan, ...] = ()
    worth: WorthPlan | None = None
    portfolio: Mapping[str, float] | None = None
    chance: ChancePlan | None = None
