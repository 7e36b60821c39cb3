"""The year's account on real weather: closure, factors, seasons, and what others have measured."""

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from yieldsim import readers, screen
from yieldsim.device.bank import Bank
from yieldsim.device.junction import Junction
from yieldsim.device.response import step
from yieldsim.device.stack import Absorber
from yieldsim.sky import column
from yieldsim.study import annual
from yieldsim.study.plan import AtmospherePlan
from yieldsim.weather import Flag

STATIONS = ("greensboro", "sand_point")


@pytest.fixture(params=STATIONS)
def station(request):
    return request.getfixturevalue(request.param)


def test_factors_multiply_to_the_performance_ratio(station):
    """Definition: product of the factors = delivered energy over rated power and light, to 1e-9."""
    total = station.sums.year()
    direct = total.delivered[:, 0] / (total.light[0] * station.ratings.terminals / 1000.0)
    np.testing.assert_allclose(station.year.performance_ratio()[:, 0], direct, rtol=1e-9)


def test_band_sums_are_the_measured_light(station):
    """Beam and diffuse band sums equal the screened file's, to 1e-6, in every hour with the sun up at some sub-step."""
    weather, sky = station.weather, station.sky
    np.testing.assert_allclose(sky.sky.beam.sum(axis=1), weather["dni"][sky.lit], rtol=1e-6, atol=1e-9)
    np.testing.assert_allclose(sky.sky.diffuse.sum(axis=1), weather["dhi"][sky.lit], rtol=1e-6, atol=1e-9)
    dark = np.setdiff1d(np.arange(len(weather)), sky.lit)
    assert np.all(weather["ghi"][dark] == 0)


def test_light_at_night_is_listed_and_rare(station):
    """Real files hold a few hours with light while the sun is down: listed, and at most 0.1 % of the year."""
    night = (station.weather.flags & Flag.NIGHT_LIGHT) > 0
    assert night.sum() <= 0.001 * len(station.weather)
    found = [finding for finding in station.weather.findings if finding.kind == "night_light"]
    assert sum(finding.rows for finding in found) == night.sum()


def test_nothing_is_nan(station):
    for record in (station.plane, station.sky.sky, station.parts, station.sums):
        for name in record.__slots__:
            value = getattr(record, name)
            if isinstance(value, np.ndarray) and value.dtype == float and name != "monthly_aod500":
                assert np.all(np.isfinite(value)), name


def test_silicon_at_greensboro(greensboro):
    """Issue's bound for this station, from prototype and literature (US sites: -2 to +1.3 %, Ripalda et al. 2020)."""
    assert 1.005 <= greensboro.factor("spectral", "c-si") <= 1.02


def test_sizes_are_plausible(station):
    """Common practice, no source: what fixed planes reach in temperate places."""
    ratio = station.year.performance_ratio()
    assert np.all((ratio > 0.75) & (ratio < 1.0))
    assert np.all((station.year.temperature > 0.85) & (station.year.temperature < 1.05))
    assert np.all(station.year.low_light <= 1.005)


@pytest.mark.parametrize("name", ["a-si", "perovskite-1.68", "cdte"])
def test_wide_gaps_gain_in_summer_and_lose_in_winter(station, name):
    """Direction away from the tropics, Dirnberger et al. (2015)."""
    months = station.monthly("spectral", name)
    assert months[4:8].mean() > months[[0, 1, 10, 11]].mean() + 0.01


def test_the_seasons_of_a_narrow_gap_are_weaker_than_those_of_a_wide_one(station):
    """Silicon's swing is the smaller one and, against the wide gap, turned round (Dirnberger et al. 2015)."""
    silicon, wide = station.monthly("spectral", "c-si"), station.monthly("spectral", "perovskite-1.68")
    ratio = silicon / wide
    assert ratio[[0, 1, 10, 11]].mean() > ratio[4:8].mean() + 0.01


def test_narrow_gaps_lose_more_to_heat(greensboro):
    """At equal external radiative efficiency the narrower gap loses more: detailed balance, no material constants."""
    sky, hot = greensboro.sky, greensboro.plane.cell_temperature[:1] + 20.0
    absorbers = [Absorber(f"{gap}", (Junction(gap, step(gap), 1e-3),)) for gap in (0.9, 1.12, 1.4, 1.7)]
    bank = Bank.of(absorbers)
    light = greensboro.parts.beam + greensboro.parts.sky + greensboro.parts.ground
    currents = bank.currents(light, np.full(len(sky.lit), 298.15))
    cool = bank.power(currents, np.full(len(sky.lit), 298.15)).sum(axis=1)
    warm = bank.power(currents, hot[0]).sum(axis=1)
    assert np.all(np.diff(warm / cool) > 0)


def test_haze_that_scatters_daily_is_found_from_the_beam(greensboro_weather, year_of):
    """A cloudless file made by the column with haze scattering daily by a factor of two around the prior moves no
    absorber's
    annual factor by more than 0.3 % against knowing that haze."""
    base = year_of(greensboro_weather, AtmospherePlan(aod500=(0.15,) * 12))
    sky, n_day = base.sky, 365
    rng = np.random.default_rng(11)
    daily = 0.15 * 2.0 ** rng.uniform(-1, 1, n_day + 1)
    truth = daily[(sky.weather.time[sky.lit] - sky.weather.time[0]) // 86400]
    optics = column.optics()
    passed = column.transmit(sky.air.with_aod500(truth), np.zeros(len(truth)))
    top = optics.extraterrestrial * optics.factor
    dni = (passed.beam @ top) * sky.sun.earth_sun * sky.sun.lit
    dhi = ((passed.total - passed.beam) @ top) * sky.sun.earth_sun * sky.sun.cos_zenith * sky.sun.lit
    columns = {name: values.copy() for name, values in greensboro_weather.columns.items()}
    for name, values in (("dni", dni), ("dhi", dhi), ("ghi", dni * sky.sun.cos_zenith + dhi)):
        columns[name][:] = 0.0
        columns[name][sky.lit] = values
    made = replace(greensboro_weather, columns=columns)
    found = year_of(made, AtmospherePlan(aod500=(0.15,) * 12))
    known_weather = replace(made, columns={**columns, "aod500": _spread(truth, sky)})
    known = year_of(known_weather, AtmospherePlan(haze="fixed"))
    np.testing.assert_allclose(found.year.spectral, known.year.spectral, atol=0.003)
    blind = year_of(made, AtmospherePlan(aod500=(0.15,) * 12, haze="fixed"))
    assert np.max(np.abs(blind.year.spectral - known.year.spectral)) > np.max(
        np.abs(found.year.spectral - known.year.spectral)
    )


def _spread(values, sky):
    whole = np.full(len(sky.weather), 0.15)
    whole[sky.lit] = values
    return whole


def test_months_add_up_to_the_year(greensboro):
    total, year = greensboro.sums, greensboro.sums.year()
    for name in total.__slots__:
        np.testing.assert_allclose(getattr(total, name).sum(axis=-1), getattr(year, name)[..., 0], rtol=1e-12)


def test_a_month_without_light_has_empty_ratios(greensboro):
    dark = annual.Sums(**{name: getattr(greensboro.sums, name) * 0 for name in greensboro.sums.__slots__})
    found = annual.factors(dark, greensboro.ratings)
    for name in found.__slots__:
        assert np.all(np.isnan(getattr(found, name)))


def test_losses_multiply():
    """Closed form: shares lost one after the other."""
    from yieldsim.study.plan import LossesPlan

    kept = annual.kept_share(LossesPlan({"soiling": (0.1,) * 12, "snow": (0.5, *(0.0,) * 11)}))
    assert kept[0] == pytest.approx(0.45)
    assert kept[5] == pytest.approx(0.9)


def test_silicon_reverses(year_of):
    """Direction away from the tropics: silicon the reverse of the wide gap (Dirnberger et al. 2015), at the high
    mountain of
    weather_samples, where summer air is dry. In wet summers vapour takes the infrared that silicon leaves, and hides
    it."""
    folder = Path(__file__).resolve().parents[2] / "weather_samples"
    months = year_of(screen.screen(readers.read(str(folder / "highmoor.csv"))))
    silicon, wide = months.monthly("spectral", "c-si"), months.monthly("spectral", "perovskite-1.68")
    winter, summer = [0, 1, 10, 11], [4, 5, 6, 7]
    assert silicon[winter].mean() > silicon[summer].mean() + 0.003
    assert wide[winter].mean() < wide[summer].mean()


def test_vapour_is_what_hides_silicon_s_season(greensboro, greensboro_weather, year_of):
    """At humid Greensboro the same water all year turns silicon's summer gain down by more than half a point."""
    dry = year_of(greensboro_weather, AtmospherePlan(water_cm=(1.4,) * 12)).monthly("spectral", "c-si")
    wet = greensboro.monthly("spectral", "c-si")
    winter, summer = [0, 1, 10, 11], [4, 5, 6, 7]
    assert (dry[summer].mean() - dry[winter].mean()) < (wet[summer].mean() - wet[winter].mean()) - 0.005


def test_the_narrowest_gap_reverses_over_the_year(greensboro):
    """CIGS, 1.08 eV: better off in winter over whole months (Dirnberger et al. 2015: narrow gaps the reverse of wide
    ones)."""
    months = greensboro.monthly("spectral", "cigs")
    assert months[[0, 1, 10, 11]].mean() > months[4:8].mean()


def test_haze_of_its_own_is_used(greensboro_weather, greensboro, year_of):
    """A site's darker haze leaves less light explained as clear or moves its spectra; sources say the study gave it."""
    dark = year_of(greensboro_weather, AtmospherePlan(single_scattering_albedo=0.8, asymmetry=0.7))
    assert np.max(np.abs(dark.year.spectral - greensboro.year.spectral)) > 1e-4
    assert dict(dark.sky.sources)["single_scattering_albedo"] == "study"
    assert dict(greensboro.sky.sources)["asymmetry"] == "Bird & Riordan 1984"
    np.testing.assert_allclose(dark.sky.optics.haze_asymmetry, 0.7)
    np.testing.assert_allclose(
        dark.sky.optics.haze_albedo.max(), 0.8 * np.max(greensboro.sky.optics.haze_albedo) / 0.945
    )
