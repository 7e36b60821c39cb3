"""A few days of a whole study: datasets and tables against the hours themselves."""

from dataclasses import replace

import numpy as np
import pytest
import xarray as xr

from yieldsim import spectrum
from yieldsim.config import library
from yieldsim.constants import STANDARD_IRRADIANCE
from yieldsim.device.stack import Absorber
from yieldsim.errors import InputError, Problem
from yieldsim.study import datasets, hourly, light, piece, run
from yieldsim.study.annual import Ratings
from yieldsim.study.ledger import ledger_rows
from yieldsim.study.plan import GapSweepPlan, LossesPlan, MountingPlan, SitePlan, StudyPlan, WorthPlan
from yieldsim.weather import cut

TILTED = MountingPlan("fixed", "fixed", 30.0, 180.0)
MOUNTINGS = (TILTED, replace(TILTED, name="steep", tilt_deg=70.0))
SINGLE32 = 2e-7  # datasets hold single precision: half a unit in its last place is 6e-8
SILICON = library.entry("c-si").absorber
WIDE = library.entry("perovskite-1.68").absorber
TANDEM = Absorber("tandem", (replace(WIDE.junctions[0], transmits=0.02), *SILICON.junctions))


class Days:
    """Two days of January and three of April, run as a study of two sites; the weather of a third is refused."""

    def __init__(self, year, folder):
        april = cut(year, 24 * 100, 24 * 103)
        self.weather = cut(year, 24 * 10, 24 * 12)
        columns = {name: np.concatenate([self.weather[name], april[name]]) for name in year.columns}
        arrays = {
            name: np.concatenate([getattr(self.weather, name), getattr(april, name)]) for name in ("flags", "row")
        }
        time = np.concatenate([self.weather.time, april.time])
        self.weather = replace(year, columns=columns, time=time, **arrays)
        self.sites = tuple(SitePlan(name, (), MOUNTINGS) for name in ("first", "second"))
        sweep = GapSweepPlan((1.1, 1.3), {"as silicon": (SILICON, WIDE)})
        worth = WorthPlan("euro", "area", 1000.0, (0.05,), 0.05, 25, per_m2={"c-si": 50.0, "tandem": 80.0})
        losses = LossesPlan({"wiring": (0.03,) * 12})
        keep = frozenset({"hourly", "spectra"})
        absorbers = (SILICON, TANDEM)
        self.plan = StudyPlan("days", self.sites, absorbers, "c-si", sweep, losses, keep, {}, worth=worth)
        self.folder, self.told = folder, []
        bad = replace(self.plan, sites=(*self.sites, SitePlan("nowhere", (), MOUNTINGS)))
        with pytest.raises(InputError, match="no such year"):
            run.site_pieces(bad, self.load, folder, progress=lambda *step: self.told.append(step))
        self.tables = run.tables(self.plan, folder)
        self.sky = hourly.site_sky(self.sites[0], self.weather)
        self.parts = [light.plane_parts(self.sky, mounting) for mounting in MOUNTINGS]

    def load(self, site):
        if site.name == "nowhere":
            raise InputError([Problem("", 0, "weather", "no such year", "another")])
        yield self.weather

    def open(self, kind):
        return xr.open_dataset(self.folder / kind / "first.nc", engine="h5netcdf")


@pytest.fixture(scope="module")
def days(greensboro_weather, tmp_path_factory):
    return Days(greensboro_weather, tmp_path_factory.mktemp("days"))


def among_all(days, values, fill=0.0):
    """Return values of lit intervals among all intervals."""
    whole = np.full((*np.shape(values)[:-1], len(days.weather)), fill)
    whole[..., days.sky.lit] = values
    return whole


def test_refused_sites_count_as_done_and_hold_up_no_other(days):
    assert days.told == [("first", 1, 3), ("second", 2, 3), ("nowhere", 3, 3)]
    assert set(days.tables["annual"]["site"]) == {"first", "second"}
    again = []
    found = run.site_pieces(days.plan, days.load, days.folder, progress=lambda *step: again.append(step))
    assert found == {"first": 0.0, "second": 0.0}
    assert again == []
    fresh = run.site_pieces(days.plan, days.load, days.folder, fresh=True)
    assert min(fresh.values()) > 0


def test_same_weather_gives_same_rows(days):
    for table, columns in days.tables.items():
        rows = [dict(zip(columns, row, strict=True)) for row in zip(*columns.values(), strict=True)]
        first, second = ([row for row in rows if row["site"] == name] for name in ("first", "second"))
        assert len(first) == len(second), table
        assert first or table in ("yearly", "gap_pairs"), table
        for one, two in zip(first, second, strict=True):
            np.testing.assert_equal(one | {"site": ""}, two | {"site": ""})


def test_hours_are_the_weather_s_the_sky_s_and_the_plane_s(days):
    with days.open("hourly") as found:
        np.testing.assert_array_equal(
            found["time"].values, days.weather.time.astype("datetime64[s]").astype(found["time"].dtype)
        )
        assert list(found["junction"].values) == ["c-si / 1", "tandem / 1", "tandem / 2"]
        assert list(found["mounting"].values) == ["fixed", "steep"]
        for name in ("ghi", "dni", "dhi", "temp_air", "wind_speed"):
            np.testing.assert_allclose(found[name], days.weather[name], rtol=SINGLE32)
        sky = days.sky
        for name, values, fill in (
            ("zenith", np.degrees(np.arccos(sky.sun.cos_zenith)), np.nan), ("lit_share", sky.sun.lit, 0.0),
            ("aod500", sky.sky.aod500, np.nan), ("precipitable_water", sky.air.water_cm, np.nan),
            ("ozone", sky.air.ozone_atm_cm, np.nan), ("cloud_optical_depth", sky.sky.cloud_depth, 0.0),
            ("open_share", sky.sky.open_share, 0.0), ("clear", sky.sky.clear, 0.0),
        ):  # fmt: skip
            np.testing.assert_allclose(found[name], among_all(days, values, fill), rtol=SINGLE32, err_msg=name)
        poa = found["plane_of_array"].values
        np.testing.assert_allclose(poa, among_all(days, [p.total() for p in days.parts]), rtol=SINGLE32)
        dark = found["lit_share"].values == 0
        power, warm = found["power"].values, found["cell_temperature"].values
        assert np.all(power[:, :, dark] == 0)
        assert np.isnan(warm[:, :, dark]).all()
        assert np.all(warm[:, :, days.sky.lit] > days.weather["temp_air"][days.sky.lit] - 1e-3)  # light warms, in degC
        assert np.all(power <= poa[:, None])
        # what is delivered is 3 % less than the hours' power
        annual = days.tables["annual"]
        for m, mounting in enumerate(MOUNTINGS):
            for a, absorber in enumerate((SILICON, TANDEM)):
                at = next(
                    i
                    for i, key in enumerate(zip(annual["site"], annual["mounting"], annual["absorber"], strict=True))
                    if key == ("first", mounting.name, absorber.name)
                )
                per_module = power[m, a].sum() * 0.97e-3 * absorber.area_fraction
                assert annual["energy_kwh_m2"][at] == pytest.approx(per_module, rel=1e-6)
                assert annual["poa_kwh_m2"][at] == pytest.approx(poa[m].sum() / 1000, rel=1e-6)
        # series: no more current than the junction with least light makes, within what its shunt and heat leave
        current = found["current_density"].values
        assert np.all(current >= 0)
        assert np.all(current[:, :, dark] == 0)


def by_hand(days):
    """Return (month, kind) -> local date of the clearest and the middle day of a month, by plain sums."""
    weather, sky = days.weather, days.sky
    found = {}
    local = weather.time + 1800 - 5 * 3600
    for month, dates in ((0, {}), (3, {})):
        for k, i in enumerate(sky.lit):
            if sky.month[k] == month:
                top = sky.sun.earth_sun[k] * sky.sun.cos_zenith[k] * sky.sun.lit[k]
                entry = dates.setdefault(int(local[i] // 86400), [0.0, 0.0])
                entry[0] += weather["ghi"][i]
                entry[1] += top
        order = sorted(dates, key=lambda date: dates[date][0] / dates[date][1])
        found[month, "clear"], found[month, "median"] = order[-1], order[len(order) // 2]
    return found


def test_spectra_are_those_of_the_clearest_and_the_middle_day(days):
    with days.open("spectra") as found, days.open("hourly") as hours:
        stamps = found["time"].values.astype("datetime64[s]").astype(np.int64)
        kinds, months = found["day_kind"].values.astype(str), found["month"].values
        for (month, kind), date in by_hand(days).items():
            chosen = (kinds == kind) & (months == month + 1)
            assert set((stamps[chosen] + 1800 - 5 * 3600) // 86400) == {date}
            assert set(found["day"].values[chosen]) == {2 * month + (kind == "median")}
        at = np.searchsorted(days.weather.time, stamps)
        wide = hours.isel(time=at)
        np.testing.assert_allclose(found["plane_of_array"].sum("band"), wide["plane_of_array"], rtol=1e-5)
        np.testing.assert_allclose(found["beam"].sum("band"), days.weather["dni"][at], rtol=1e-5, atol=1e-5)
        np.testing.assert_allclose(found["diffuse"].sum("band"), days.weather["dhi"][at], rtol=1e-5, atol=1e-5)
        edges = found["band_edges"].values
        np.testing.assert_array_equal(edges[1:, 0], edges[:-1, 1])
        assert np.all((edges[:, 0] <= found["wavelength"]) & (found["wavelength"] <= edges[:, 1]))
        for name in ("zenith", "aod500", "precipitable_water", "ozone", "cloud_optical_depth", "open_share", "ghi"):
            np.testing.assert_allclose(found[name], wide[name], rtol=1e-5, err_msg=name)


def test_all_spectra_of_chosen_intervals(days):
    """Invariants: parts of the plane add up to it, and photons have the energy of the light that is there."""
    at = np.flatnonzero(days.sky.sun.cos_zenith > 0.3)[::3]
    found = datasets.all_spectra_dataset("first", days.sky, MOUNTINGS, at)
    whole = sum(found[f"plane_{name}"] for name in ("beam", "sky", "ground"))
    np.testing.assert_allclose(whole.sum("band"), [parts.total()[at] for parts in days.parts], rtol=1e-12)
    ghi = days.weather["ghi"][days.sky.lit[at]]
    level = found["beam"].sum("band") * days.sky.sun.cos_zenith[at] + found["diffuse"].sum("band")
    horizontal = found["beam"].values * days.sky.sun.cos_zenith[at][:, None] + found["diffuse"].values
    photons = (horizontal * spectrum.band_wavelengths()).sum(axis=1) / horizontal.sum(axis=1)
    # hc over the mean wavelength by energy; bands are narrow: 0.2 %
    np.testing.assert_allclose(found["average_photon_energy"], 1239.84198 / photons, rtol=2e-3)
    assert np.all(np.abs(level.values - ghi) < 0.1 * ghi + 10)
    np.testing.assert_array_equal(found["time"].values, days.weather.time[days.sky.lit[at]])
    assert list(found["mounting"].values) == ["fixed", "steep"]


def test_sweep_and_ratings_are_those_of_the_absorbers(days):
    sweep, annual = days.tables["gap_sweep"], days.tables["annual"]
    rows = [dict(zip(sweep, row, strict=True)) for row in zip(*sweep.values(), strict=True)]
    mine = [row for row in rows if (row["site"], row["mounting"], row["gap_ev"]) == ("first", "steep", 1.1)]
    own = [
        energy
        for energy, *key in zip(
            annual["energy_kwh_m2"], annual["site"], annual["mounting"], annual["absorber"], strict=True
        )
        if key == ["first", "steep", "c-si"]
    ]
    assert mine[0]["energy_kwh_m2"] == pytest.approx(own[0], rel=1e-9)
    ratings = Ratings.of((SILICON, TANDEM))
    for absorber, rated in zip((SILICON, TANDEM), ratings.terminals, strict=True):
        at = annual["absorber"].index(absorber.name)
        module = rated * absorber.area_fraction / STANDARD_IRRADIANCE
        assert annual["specific_yield_kwh_kwp"][at] * module == pytest.approx(annual["energy_kwh_m2"][at], rel=1e-9)


def test_quality_tells_of_every_lit_interval(days):
    table = days.tables["weather_quality"]
    rows = [dict(zip(table, row, strict=True)) for row in zip(*table.values(), strict=True)]
    mine = {row["kind"]: row for row in rows if row["site"] == "first"}
    n, clear = len(days.sky.lit), int(days.sky.sky.clear.sum())
    assert mine["clear_hours"]["rows"] == clear
    assert mine["clear_hours"]["found"].startswith(f"{clear} of {n} lit intervals")
    for name, source in days.sky.sources:
        assert sum(r["rows"] for r in rows if r["site"] == "first" and r["kind"] == f"source:{name}") == n
        assert any(r["found"] == source for r in rows)
    np.testing.assert_array_equal(piece.monthly_hours(days.weather), [48, 0, 0, 72, *[0] * 8])


def test_a_sweep_stands_under_the_same_light(days):
    sweep, annual = days.tables["gap_sweep"], days.tables["annual"]
    of = zip(annual["site"], annual["mounting"], annual["poa_kwh_m2"], strict=True)
    light = {(site, mounting): poa for site, mounting, poa in of}
    for site, mounting, poa in zip(sweep["site"], sweep["mounting"], sweep["poa_kwh_m2"], strict=True):
        if mounting:
            assert poa == pytest.approx(light[site, mounting], rel=1e-9)


def test_the_ledger_of_days_holds_all_light(days):
    """Invariant: what became of the light adds up to it, rear light by its share; what is delivered is the yield."""
    both = replace(SILICON, name="both sides", bifaciality=0.7)
    for absorber in (SILICON, TANDEM, both):
        rear = light.rear_parts(days.sky, TILTED, [absorber])
        faces = hourly.FacesOfYear(days.sky, days.parts[0], rear, None)
        year = hourly.plane_year(days.sky, TILTED, days.parts[0], [absorber])
        paid = hourly.light_paid(year, [absorber], days.sky.month)
        (row,) = ledger_rows("first", "fixed", [absorber], paid, days.plan.losses, 3600)
        fates = [value for value in row.values() if isinstance(value, float)]
        behind = 0.0 if rear is None else rear.total().sum()
        assert (behind > 0) == (absorber is both)
        wanted = (faces.front.total().sum() + absorber.bifaciality * behind) / 1000
        assert sum(fates) == pytest.approx(wanted, rel=1e-9)
        assert row["delivered"] == pytest.approx(0.97 * year.power.sum() / 1000, rel=1e-9)
        assert row["wiring"] == pytest.approx(0.03 * year.power.sum() / 1000, rel=1e-9)
        assert min(row[name] for name in ("reflected", "below_gap", "thermalised", "nonradiative_voltage")) > 0
