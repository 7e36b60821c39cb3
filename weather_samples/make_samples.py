"""Write the weather of five invented places, the same bytes every time on the same library versions.

    python weather_samples/make_samples.py [FOLDER]

Nothing here was measured. Each year is made of: the sun at twelve moments an hour; the clear sky of
`pvlib.clearsky.bird` with the place's own daily haze, vapour, ozone and pressure (on purpose not yieldsim's own column
of air: a simulator that is fed its own sky would always agree with itself); cloud cover and depth that linger, from
random processes with memory; temperature, humidity, wind and snow that follow season, sun and cloud. Numbers of the
places are chosen to look like their climates (from memory).
"""

from __future__ import annotations

import sys
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pvlib
from scipy.signal import lfilter
from scipy.special import ndtr

YEAR = 2021
HOURS = 8760
STEPS = 12  # moments an hour
SOLAR_CONSTANT = 1361.0  # W m-2, Kopp & Lean (2011)
USUAL = ["ghi", "dni", "dhi", "temp_air", "relative_humidity", "wind_speed", "pressure"]
DECIMALS = {"relative_humidity": 0, "pressure": 0, "precipitable_water": 2, "albedo": 2}  # others: 1


@dataclass(frozen=True)
class Place:
    name: str
    climate: str
    latitude_deg: float
    longitude_deg: float
    elevation_m: float
    utc_offset_h: int
    seed: int
    cloud: tuple[float, float, float]  # shift of the cover's normal deviate: mean, summer less winter, afternoon
    depth: float  # typical optical depth of full cloud
    aod: tuple[float, float, float]  # aod500: mean, summer less mean, spread of its logarithm
    dust_days: int  # days of blown dust
    angstrom: float
    temp: tuple[float, float, float, float]  # degC: mean, half the yearly and the daily range, the weather's spread
    dew_gap: tuple[float, float]  # degC between temperature and dew point: mean, summer less mean
    wind: float  # m s-1, mean
    albedo: float
    extra: tuple[str, ...]  # columns this place's file has beyond the usual: real files differ, too


PLACES = (
    Place("Amber Mesa", "dry inland plateau with dust", 31.4, -4.3, 1060.0, 0, 11, (-0.95, -0.35, 0.10), 9.0,
          (0.17, 0.09, 0.45), 24, 0.75, (19.5, 10.5, 8.5, 2.6), (17.0, 4.0), 3.8, 0.30, ("precipitable_water",)),
    Place("Mangrove Reach", "humid tropical coast", 4.2, 103.4, 6.0, 7, 22, (0.02, 0.0, 0.42), 13.0,
          (0.24, 0.05, 0.40), 0, 1.25, (27.2, 0.8, 3.6, 0.7), (3.6, 0.0), 2.6, 0.18, ()),
    Place("Saltmarsh Point", "temperate sea coast", 52.6, 1.8, 4.0, 0, 33, (0.38, -0.32, 0.05), 14.0,
          (0.12, 0.03, 0.50), 0, 1.25, (10.6, 6.4, 3.0, 2.6), (3.0, 1.0), 5.6, 0.20, ()),
    Place("Birchholm", "cold continental, snow in winter", 51.9, 71.6, 345.0, 5, 44, (-0.05, -0.12, 0.16), 11.0,
          (0.11, 0.03, 0.50), 0, 1.35, (3.4, 19.0, 5.6, 5.0), (5.5, 4.5), 4.2, 0.19, ("albedo", "snow_depth")),
    Place("Highmoor", "high mountain", 36.8, 74.3, 3120.0, 5, 55, (-0.32, -0.20, 0.40), 10.0,
          (0.06, 0.03, 0.50), 0, 1.20, (3.2, 11.5, 6.5, 2.8), (9.0, 1.0), 3.0, 0.21, ("snow_depth",)),
)  # fmt: skip


def lingering(rng, size, memory):
    """Return a unit normal process that forgets over `memory` steps."""
    keep = np.exp(-1.0 / memory)
    start = rng.standard_normal()
    return lfilter([np.sqrt(1 - keep**2)], [1.0, -keep], rng.standard_normal(size), zi=[keep * start])[0]


def hourly(values):
    return values.reshape(HOURS, STEPS).mean(axis=1)


def each_step(values):
    return np.repeat(values, STEPS)


class Season:
    """Where each hour stands in the day and the year."""

    def __init__(self, place):
        hour = np.arange(HOURS)
        self.day = hour // 24
        solar_noon = 12.0 + place.utc_offset_h - place.longitude_deg / 15.0
        self.clock = (hour % 24) + 0.5 - solar_noon + 12.0
        self.start = (
            np.datetime64(f"{YEAR}-01-01T00:00", "s").astype(np.int64) + hour * 3600 - place.utc_offset_h * 3600
        )
        self.summer = -np.cos(2 * np.pi * (hour / 24 - 19.0) / 365.0)  # 1 in late July
        self.sunward = -np.cos(2 * np.pi * (hour / 24 + 10.0) / 365.0)  # 1 at the summer solstice
        self.afternoon = np.cos(2 * np.pi * (self.clock - 15.0) / 24.0)


def sun(place, season):
    """Return cosine of the apparent zenith (0 when down) and the sun's strength, for every step."""
    middle = (np.arange(STEPS) + 0.5) * 3600.0 / STEPS
    moments = (season.start[:, None] + middle).ravel().astype(float)
    pressure_hpa = pvlib.atmosphere.alt2pres(place.elevation_m) / 100
    position = pvlib.spa.solar_position(
        moments, place.latitude_deg, place.longitude_deg, place.elevation_m, pressure_hpa, 12.0, 69.0, 0.5667
    )
    extra = SOLAR_CONSTANT / pvlib.spa.earthsun_distance(moments, 69.0, 1) ** 2
    return np.maximum(np.cos(np.radians(position[0])), 0.0), extra


def haze(place, season, rng):
    """Return aod500 of every hour: a lingering daily value about a season's, and days of dust."""
    daily = np.exp(place.aod[2] * lingering(rng, 365, 2.5) - place.aod[2] ** 2 / 2)
    for first in np.sort(rng.choice(np.arange(40, 300), place.dust_days, replace=False)):
        daily[first : first + 2] += rng.uniform(1.0, 4.0) * np.array([1.0, 0.4])
    mean = place.aod[0] + place.aod[1] * season.summer
    return np.clip(mean * np.interp(np.arange(HOURS) / 24 - 0.5, np.arange(365), daily), 0.015, 1.6)


def cloud(place, season, rng):
    """Return for every step the cover of the sky, whether cloud hides the sun, its depth, and thin high cloud."""
    slow, quick, fast = (lingering(rng, HOURS * STEPS, memory * STEPS) for memory in (30.0, 5.0, 0.3))
    shift = place.cloud[0] + place.cloud[1] * season.sunward + place.cloud[2] * season.afternoon
    cover = 1.0 / (1.0 + np.exp(-3.2 * (0.85 * slow + 0.5 * quick + each_step(shift))))
    hidden = ndtr(fast) < cover
    depth = place.depth * np.exp(0.75 * lingering(rng, HOURS * STEPS, 5.0 * STEPS) + 1.3 * (cover - 1.0))
    thin = np.maximum(0.35 * lingering(rng, HOURS * STEPS, 9.0 * STEPS) + 0.25 * slow - 0.15, 0.0)
    return cover, hidden, depth, thin


def light(place, mu, extra, air, sky):
    """Return the horizontal beam and the diffuse light of every step, and the clear sky's global light.

    Cloud passes (2/3 + mu + (2/3 - mu) exp(-d/mu)) / (4/3 + (1 - g) d) of the light (Eddington's approximation for
    drops that absorb nothing, g 0.85), less 6 % for what they do absorb; gaps between clouds let through the beam and
    gain light from the clouds' sides, most at half cover.
    """
    aod500, water, ozone, pressure, albedo = air
    cover, hidden, depth, thin = sky
    zenith = np.degrees(np.arccos(mu))
    lit = mu > 0
    mass = np.where(lit, pvlib.atmosphere.get_relative_airmass(np.minimum(zenith, 89.9)), 1.0)
    aod380 = aod500 * (380.0 / 500.0) ** -place.angstrom
    clear = pvlib.clearsky.bird(
        zenith, mass, aod380, aod500, water, ozone, pressure, extra, asymmetry=0.85, albedo=albedo
    )
    beam = np.where(lit, clear["dni"], 0.0) * mu
    diffuse = np.where(lit, clear["dhi"], 0.0)
    safe = np.maximum(mu, 0.02)
    passed_thin = np.exp(-0.5 * thin / safe)  # half of the scattered light stays in the sun's glow
    diffuse = diffuse + 0.85 * beam * (1 - passed_thin)
    beam = beam * passed_thin
    whole = beam + diffuse
    passed = (2 / 3 + mu + (2 / 3 - mu) * np.exp(-depth / safe)) / (4 / 3 + 0.15 * depth)
    passed = np.minimum(passed, 1.0) * (1 - 0.06 * (1 - np.exp(-depth / 4)))
    given_back = 1.0 / (1.0 - albedo * cover * 0.75 * (1 - passed))  # light between ground and cloud
    through = beam * np.exp(-0.6 * depth / safe)
    under = np.maximum(whole * passed - through, 0.0)
    from_sides = 0.32 * cover * (1 - cover) * beam
    open_sky = (1 - cover) * diffuse + cover * np.minimum(under, 1.6 * diffuse + 0.1 * beam) + from_sides
    covered = cover * under + (1 - cover) * diffuse
    return (
        np.where(hidden, through, beam),
        np.where(hidden, covered, open_sky) * given_back,
        np.where(lit, clear["ghi"], 0.0),
    )


def snow(place, temp, wet, rng):
    """Return the depth of snow [cm] of every hour: it falls on cold wet days, settles, and melts by degree-days."""
    depth = np.zeros(365)
    lying = 25.0 if place.temp[0] - place.temp[1] < -5 and "snow_depth" in place.extra else 0.0
    daily_temp, daily_wet = temp.reshape(365, 24).mean(axis=1), wet.reshape(365, 24).mean(axis=1)
    falls = rng.gamma(0.8, 4.5, 365)
    for day in range(365):
        if daily_temp[day] < 0.5 and daily_wet[day] > 0.6:
            lying += falls[day]
        lying = max(0.985 * lying - 2.2 * max(daily_temp[day] + 0.5, 0.0), 0.0)
        depth[day] = lying
    return np.repeat(np.floor(depth), 24)


def saturation(temp):
    """Return the saturation vapour pressure [hPa] over water (Magnus; Alduchov & Eskridge 1996)."""
    return 6.1094 * np.exp(17.625 * temp / (temp + 243.04))


def make(place):
    """Return the columns of a place's year."""
    rng = np.random.Generator(np.random.PCG64(place.seed))
    season = Season(place)
    mu, extra = sun(place, season)
    aod = haze(place, season, rng)
    sky = cloud(place, season, rng)
    cover = hourly(sky[0])

    mean, yearly, daily, spread = place.temp
    weather = lingering(rng, HOURS, 60.0)
    calm = mean + yearly * season.summer + spread * weather
    swing = daily * (0.35 + 0.65 * (1 - np.repeat(cover.reshape(365, 24).mean(axis=1), 24)))
    temp = calm + swing * season.afternoon + 1.2 * lingering(rng, HOURS, 5.0)
    gap = place.dew_gap[0] + place.dew_gap[1] * season.summer
    dew = np.minimum(calm - gap * np.exp(0.35 * lingering(rng, HOURS, 40.0) - 0.7 * (cover - 0.4)), temp)
    humidity = np.clip(100 * saturation(dew) / saturation(temp), 4.0, 100.0)

    ground_pressure = pvlib.atmosphere.alt2pres(place.elevation_m)
    storm = 0.0 if abs(place.latitude_deg) < 15 else 0.0075 * abs(place.latitude_deg) / 50
    pressure = ground_pressure * (1 + storm * lingering(rng, HOURS, 55.0) - 0.4 * storm * (cover - 0.5))
    water = pvlib.atmosphere.gueymard94_pw(calm, np.clip(100 * saturation(dew) / saturation(calm), 4, 100))
    water = np.clip(water * np.exp(0.15 * lingering(rng, HOURS, 30.0)), 0.1, 6.5)
    ozone = (
        0.300
        + 0.0006 * abs(place.latitude_deg)
        - 0.0007
        * abs(place.latitude_deg)
        * np.sin(2 * np.pi * (season.day - 200) / 365.0)
        * np.sign(place.latitude_deg)
    )  # most in spring, least in autumn
    lying = snow(place, temp, cover, rng)
    albedo = place.albedo + (0.72 - place.albedo) * (1 - np.exp(-lying / 6.0))

    air = (each_step(v) for v in (aod, water, ozone, pressure, albedo))
    beam, diffuse, clear = light(place, mu, extra, tuple(air), sky)
    lit = hourly((mu > 0).astype(float))
    cosine = np.divide(hourly(mu), lit, out=np.zeros(HOURS), where=lit > 0)  # mean over the lit part of the hour
    dni = np.round(np.divide(hourly(beam), cosine, out=np.zeros(HOURS), where=lit > 0), 1)
    dhi = np.round(hourly(diffuse), 1)
    gust = np.exp(0.42 * lingering(rng, HOURS, 14.0) + 0.2 * lingering(rng, HOURS, 2.0) - 0.11)
    wind = place.wind * gust * (1 + 0.25 * season.afternoon)
    return {
        "ghi": dni * cosine + dhi,
        "dni": dni,
        "dhi": dhi,
        "temp_air": temp,
        "relative_humidity": humidity,
        "wind_speed": wind,
        "pressure": pressure,
        "precipitable_water": water,
        "albedo": albedo,
        "snow_depth": lying,
        "clear": hourly(clear),
        "cover": cover,
        "aod500": aod,
    }


def text(place, columns):
    """Return the file of a place."""
    head = [
        f"site: {place.name}",
        f"note: invented place and weather ({place.climate}); nothing was measured; made by make_samples.py",
        f"latitude_deg: {place.latitude_deg}",
        f"longitude_deg: {place.longitude_deg}",
        f"elevation_m: {place.elevation_m:g}",
        f"utc_offset_h: {place.utc_offset_h}",
        "interval: 60 min",
        "label: start",
    ]
    names = [*USUAL, *place.extra]
    times = np.datetime64(f"{YEAR}-01-01T00:00", "m") + np.arange(HOURS) * 60
    cells = [times.astype(str)] + [
        np.char.mod(f"%.{DECIMALS.get(name, 1)}f", np.round(columns[name], DECIMALS.get(name, 1)) + 0.0)
        for name in names
    ]
    rows = (",".join(row) for row in zip(*cells, strict=True))
    return "\n".join([*(f"# {line}" for line in head), ",".join(["time", *names]), *rows]) + "\n"


def file_name(place):
    return place.name.lower().replace(" ", "_") + ".csv"


def main(folder):
    for place in PLACES:
        (folder / file_name(place)).write_text(text(place, make(place)), encoding="utf-8", newline="\n")


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).parent)
