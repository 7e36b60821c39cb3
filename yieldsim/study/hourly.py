"""One site's year, hour by hour: air, band spectra, light on each plane, current, temperature and power."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from yieldsim.constants import STANDARD_CELL_TEMPERATURE
from yieldsim.device import account
from yieldsim.device.bank import Bank
from yieldsim.device.stack import Absorber
from yieldsim.device.thermal import faiman
from yieldsim.sky import atmosphere, closing, column, plane, sun
from yieldsim.sky.horizon import Horizon
from yieldsim.sky.mounting import ROOF_HEAT_LOSS
from yieldsim.study import air as air_of_site
from yieldsim.study.ledger import LightPaid
from yieldsim.study.light import rear_parts
from yieldsim.study.plan import MountingPlan, SitePlan
from yieldsim.units import kelvin
from yieldsim.weather import Weather

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class SiteSky:
    """The light of a site's lit intervals, ready to be put on any plane.

    Parameters
    ----------
    weather : Weather of all intervals, position overrides applied
    lit : (n,) int array, indices of the lit intervals in ``weather``
    month : (n,) int array, 0 to 11, month of each lit interval in local standard time
    sun : SunCourse of the lit intervals
    air : Air of the lit intervals, haze as given or expected
    sky : ClosedSky of the lit intervals, averages over the whole interval
    optics : Optics of the air, the site's own haze in it
    sources : (input, where it came from) for each atmospheric input
    horizon : Horizon or None, the skyline around the site
    calendar : (day, month) of the lit intervals where their expected haze is a climatology that the beam may correct
    """

    weather: Weather
    lit: NDArray[np.intp]
    month: NDArray[np.intp]
    sun: sun.SunCourse
    air: column.Air
    sky: closing.ClosedSky
    optics: column.Optics
    sources: tuple[tuple[str, str], ...]
    horizon: Horizon | None = None
    calendar: tuple[NDArray[np.intp], NDArray[np.intp]] | None = None


@dataclass(frozen=True, slots=True)
class PlaneYear:
    """What a plane received and what each absorber made of it in every lit interval.

    Parameters
    ----------
    mounting : MountingPlan
    parts : PlaneParts of the front
    plane_of_array : (n,) array [W m-2], H
    entered : (n_absorber, n) array [W m-2], S
    current : (n_junction, n) array [A m-2]
    cell_temperature : (n_absorber, n) array [K]
    power_cool : (n_junction, n) array [W m-2], each junction at its own power point, 25 degC
    power_warm : (n_junction, n) array [W m-2], the same at the cell temperature
    power : (n_absorber, n) array [W m-2], at the terminals
    incident : (n_absorber,) array [W m-2], sum of front and bifaciality times rear light, before the glass
    front_bands, rear_bands : (n_absorber, n_band) arrays [W m-2], sums behind the glass; rear times bifaciality
    """

    mounting: MountingPlan
    parts: plane.PlaneParts
    plane_of_array: Array
    entered: Array
    current: Array
    cell_temperature: Array
    power_cool: Array
    power_warm: Array
    power: Array
    incident: Array
    front_bands: Array
    rear_bands: Array


def placed(site: SitePlan, weather: Weather) -> Weather:
    """Return the weather with the study's position in place of the file's where the study gives one."""
    given = {
        name: value
        for name in ("latitude_deg", "longitude_deg", "elevation_m")
        if (value := getattr(site, name)) is not None
    }
    fields = {name: given.get(name, getattr(weather, name)) for name in Weather.__slots__}
    return Weather(**fields)


def local_month_and_day(weather: Weather) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
    """Return month (0-11) and day of the year (1-366) of each interval's middle in local standard time, each (n,)."""
    local = weather.time + weather.interval_s // 2 + round(weather.utc_offset_h * 3600)
    days = local.astype("datetime64[s]").astype("datetime64[D]")
    month = days.astype("datetime64[M]").astype(np.intp) % 12
    day = (days - days.astype("datetime64[Y]")).astype(np.intp) + 1
    return month, day


def site_sky(site: SitePlan, weather: Weather) -> SiteSky:
    """Return the band spectra of a site's lit intervals.

    Parameters
    ----------
    site : SitePlan
    weather : Weather, screened: no NaN in its required columns
    """
    weather = placed(site, weather)
    course = sun.course(
        weather.time,
        weather.interval_s,
        weather.latitude_deg,
        weather.longitude_deg,
        weather.elevation_m,
        atmosphere.pressure_at(weather.elevation_m) / 100,
    )
    lit = np.flatnonzero(course.lit > 0)
    month, day = local_month_and_day(weather)
    course = course.only(course.lit > 0)
    gathered, sources = air_of_site.gather(site, weather, lit, month[lit], day[lit], course.cos_zenith)
    optics = column.with_haze(column.optics(), site.atmosphere.single_scattering_albedo, site.atmosphere.asymmetry)
    calendar = air_of_site.calendar(weather, lit, month, sources)
    closed = closed_on(weather, lit, course, gathered, optics, calendar, haze_hourly=site.atmosphere.haze == "hourly")
    if closed.clear_days.any():
        days = ", ".join(str(count) for count in closed.clear_days)
        note = f"monthly medians of clear days from their beam (days a month: {days}), prior "
        sources = (("aod500", note + sources[0][1]), *sources[1:])
    return SiteSky(weather, lit, month[lit], course, gathered, closed, optics, sources, site.horizon, calendar)


def closed_on(
    weather: Weather,
    lit: NDArray[np.intp],
    course: sun.SunCourse,
    air: column.Air,
    optics: column.Optics,
    calendar: tuple[NDArray[np.intp], NDArray[np.intp]] | None,
    *,
    haze_hourly: bool,
    level: float = 1.0,
) -> closing.ClosedSky:
    """Return the light of lit intervals closed on a file's beam and diffuse light, averages over the whole interval.

    Light is closed over the lit part of an interval, then spread over the whole of it. ``level`` [1] is what the
    file's light is multiplied by; all else as in `SiteSky`.
    """
    dni, dhi = weather["dni"][lit] * level, weather["dhi"][lit] * level
    consecutive = np.diff(weather.time[lit], prepend=weather.time[0] - 1) == weather.interval_s
    closed = closing.close(
        air,
        course.earth_sun,
        dni / course.lit,
        dhi / course.lit,
        consecutive,
        haze_hourly=haze_hourly,
        constants=optics,
        calendar=calendar,
    )
    for light in (closed.beam, closed.diffuse):
        light *= course.lit[:, None]
    return closed


@lru_cache(maxsize=64)
def bank_of(absorbers: tuple[Absorber, ...]) -> Bank:
    """Return the bank of absorbers, made once for all sites and mountings of a run."""
    return Bank.of(absorbers)


def cell_temperatures(
    site: SiteSky, mounting: MountingPlan, front: Array, rear: Array | None, absorbers: Sequence[Absorber]
) -> Array:
    """Return cell temperatures (n_absorber, n) [K] under front and rear light (n,) [W m-2].

    Rear light warms as far as it is used. A roof keeps the rear from the wind.
    """
    temp_air = kelvin(site.weather["temp_air"][site.lit])
    wind = site.weather["wind_speed"][site.lit]
    share = ROOF_HEAT_LOSS if mounting.kind == "roof" else 1.0
    ways = sorted({(absorber.heat_loss, absorber.bifaciality) for absorber in absorbers})
    warmth = {}
    for (u0, u1), bifaciality in ways:
        light = front if rear is None else front + bifaciality * rear
        warmth[(u0, u1), bifaciality] = faiman(light, temp_air, wind, share * u0, share * u1)
    return np.array([warmth[absorber.heat_loss, absorber.bifaciality] for absorber in absorbers])


def by_front(absorbers: Sequence[Absorber]) -> list[tuple[float | None, list[int]]]:
    """Return (incidence modifier, members) of absorbers whose fronts are alike: they share spectrum and product."""
    groups: dict[float | None, list[int]] = {}
    for i, absorber in enumerate(absorbers):
        groups.setdefault(absorber.incidence_modifier, []).append(i)
    return list(groups.items())


@dataclass(frozen=True, slots=True)
class FacesOfYear:
    """Light on both faces of a mounting, and what passes each kind of glass."""

    site: SiteSky
    front: plane.PlaneParts
    rear: plane.PlaneParts | None
    dust: Array | None

    def entered(self, modifier: float | None) -> tuple[Array, Array | None]:
        """Return band spectra (n, n_band) [W m-2] behind the glass of front and rear."""
        front = plane.entered(self.front, self.site.sun, modifier)
        rear = None if self.rear is None else plane.entered(self.rear, self.site.sun, modifier)
        return front if self.dust is None else front * self.dust, rear

    def rear_sum(self) -> float:
        """Return the light on the rear before its glass, summed over the intervals [W m-2]."""
        return 0.0 if self.rear is None else float(self.rear.total().sum())

    def temperatures(self, mounting: MountingPlan, absorbers: Sequence[Absorber], front: Array | None = None) -> Array:
        """Return cell temperatures (n_absorber, n) [K]; ``front`` is the front's light (n,) [W m-2] where known."""
        front = self.front.total() if front is None else front
        rear = None if self.rear is None else self.rear.total()
        return cell_temperatures(self.site, mounting, front, rear, absorbers)


def light_paid(year: PlaneYear, absorbers: Sequence[Absorber], month: NDArray[np.intp]) -> LightPaid:
    """Return what a year's collected photons gave up on the way to the terminals; see `ledger.ledger_rows`."""
    offsets = np.concatenate([[0], np.cumsum([len(absorber.junctions) for absorber in absorbers])])
    gap = np.array([junction.gap_ev for absorber in absorbers for junction in absorber.junctions])
    spent = np.empty((3, offsets[-1]))
    for _, members in by_front(absorbers):
        junctions = np.concatenate([np.arange(offsets[i], offsets[i + 1]) for i in members])
        current = year.current[junctions]
        bank = bank_of(tuple(absorbers[i] for i in members))
        found = account.voltages(bank, current, year.cell_temperature[members])
        spent[:, junctions] = (
            (current * found.radiative).sum(axis=1),
            (current * found.actual).sum(axis=1),
            found.bare_power.sum(axis=1),
        )
    return LightPaid(
        incident=year.incident,
        front=year.front_bands,
        rear=year.rear_bands,
        gap_power=year.current.sum(axis=1) * gap,
        radiative_power=spent[0],
        actual_power=spent[1],
        bare_power=spent[2],
        own_power=year.power_warm.sum(axis=1),
        terminals=year.power @ (month[:, None] == np.arange(12)),
    )


def terminal_powers(
    site: SiteSky,
    mounting: MountingPlan,
    parts: plane.PlaneParts,
    absorbers: Sequence[Absorber],
    dust: Array | None = None,
) -> Array:
    """Return the power of each absorber at its terminals in every lit interval, (n_absorber, n) [W m-2].

    Parameters as for `plane_year`.
    """
    faces = FacesOfYear(site, parts, rear_parts(site, mounting, absorbers), dust)
    temperature = faces.temperatures(mounting, absorbers)
    power = np.empty((len(absorbers), len(site.lit)))
    for glass, members in by_front(absorbers):
        bank = bank_of(tuple(absorbers[i] for i in members))
        front, rear = faces.entered(glass)
        power[members] = bank.terminal_power(bank.currents(front, temperature[members], rear), temperature[members])
    return power


def plane_year(
    site: SiteSky,
    mounting: MountingPlan,
    parts: plane.PlaneParts,
    absorbers: Sequence[Absorber],
    dust: Array | None = None,
) -> PlaneYear:
    """Return what absorbers make of a mounting's light, interval by interval.

    Parameters
    ----------
    site : SiteSky
    mounting : MountingPlan
    parts : PlaneParts of its front, from `light.plane_parts`
    absorbers : sequence of Absorber
    dust : (n, n_band) array [1] or None, how dust on the front colours the light, from `light.dust_colour`
    """
    faces = FacesOfYear(site, parts, rear_parts(site, mounting, absorbers), dust)
    plane_of_array = parts.total()
    n, n_absorber = len(plane_of_array), len(absorbers)
    temperature = faces.temperatures(mounting, absorbers, plane_of_array)
    offsets = np.concatenate([[0], np.cumsum([len(absorber.junctions) for absorber in absorbers])])
    entered, power = np.empty((n_absorber, n)), np.empty((n_absorber, n))
    current, cool, warm = (np.empty((offsets[-1], n)) for _ in range(3))
    standard = np.full(n, STANDARD_CELL_TEMPERATURE)
    front_bands, rear_bands = np.zeros((2, n_absorber, parts.beam.shape[1]))
    for glass, members in by_front(absorbers):
        junctions = np.concatenate([np.arange(offsets[i], offsets[i + 1]) for i in members])
        bank = bank_of(tuple(absorbers[i] for i in members))
        front, rear = faces.entered(glass)
        gain = np.array([absorbers[i].bifaciality for i in members])[:, None]
        entered[members] = front.sum(axis=1) if rear is None else front.sum(axis=1) + gain * rear.sum(axis=1)
        front_bands[members] = front.sum(axis=0)
        rear_bands[members] = 0.0 if rear is None else gain * rear.sum(axis=0)
        current[junctions] = bank.currents(front, temperature[members], rear)
        cool[junctions] = bank.power(current[junctions], standard)
        warm[junctions] = bank.power(current[junctions], temperature[members])
        power[members] = bank.terminal_power(current[junctions], temperature[members], warm[junctions])
    incident = plane_of_array.sum() + np.array([a.bifaciality for a in absorbers]) * faces.rear_sum()
    light = (incident, front_bands, rear_bands)
    return PlaneYear(mounting, parts, plane_of_array, entered, current, temperature, cool, warm, power, *light)
