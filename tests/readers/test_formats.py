"""Every format on cuts of real files: place, clock, label, units, missing codes; and what is wrong, with its row."""

import os
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from yieldsim import readers
from yieldsim.errors import InputError
from yieldsim.readers import READERS, Column, ColumnMap

DATA = Path(__file__).parent / "data"
HERE = {"latitude_deg": 40.0, "longitude_deg": -105.0, "elevation_m": 1600.0}
CUTS = {
    "chicago.epw": "epw", "pvgis.epw": "epw", "pvgis.csv": "pvgis", "pvgis.json": "pvgis", "psm3.csv": "psm",
    "psm3_bare.csv": "psm", "surfrad.dat": "surfrad", "bsrn.dat.gz": "bsrn",
}  # fmt: skip


def read(name, **over):
    return readers.read(str(DATA / name), **(HERE if name == "psm3_bare.csv" else {}), **over)


def stamp(seconds):
    return str(np.datetime64(int(seconds), "s"))


@pytest.mark.parametrize("name", CUTS)
def test_recognised_by_content_and_read(name, tmp_path):
    """The name says nothing: a copy called otherwise is read alike, and so with the format said."""
    weather = read(name)
    copy = tmp_path / "weather.txt"
    copy.write_bytes((DATA / name).read_bytes())
    over = HERE if name == "psm3_bare.csv" else {}
    for again in (readers.read(str(copy), **over), readers.read(str(copy), CUTS[name], **over)):
        assert np.array_equal(again.time, weather.time)
        assert np.array_equal(again["ghi"], weather["ghi"], equal_nan=True)
    assert set(CUTS.values()) | {"tmy3", "tmy2", "netcdf", "plain"} == set(READERS)
    assert -90 < weather["temp_air"].min() < weather["temp_air"].max() < 60


def test_epw_hours_end_at_their_label():
    weather = read("chicago.epw")
    assert (weather.latitude_deg, weather.longitude_deg, weather.utc_offset_h) == (41.98, -87.92, -6.0)
    assert weather.label.startswith("end of interval")
    # The first row of the cut is 31 May, hour 1: 00:00 to 01:00 at UTC-6.
    assert stamp(weather.time[0])[5:] == "05-31T06:00:00"


def test_epw_water_ten_times_too_large_is_found():
    """Files made from TMY3 hold tenths of millimetres: told by temperature and humidity (Gueymard 1994)."""
    weather = read("chicago.epw")
    kinds = {finding.kind: finding for finding in weather.findings}
    assert "divided by 10" in kinds["tenfold_water"].done
    assert 0.5 < np.nanmedian(weather["precipitable_water"]) < 5.0
    assert "missing_code" in kinds


def test_pvgis_in_its_three_forms_is_one_year():
    """The same rows as CSV and JSON; light at 10.6 minutes past the hour, so a label stands in the middle there."""
    one, two = read("pvgis.csv"), read("pvgis.json")
    assert np.array_equal(one.time, two.time)
    for name in ("ghi", "dni", "dhi", "temp_air", "pressure"):
        np.testing.assert_array_equal(one[name], two[name])
    assert (one.latitude_deg, one.longitude_deg, one.elevation_m) == (45.0, 8.0, 250.0)
    middle = one.time[0] + 1800
    assert middle % 3600 == round(0.1761 * 3600)
    assert "light +0.1761 h" in one.label
    assert read("pvgis.epw").label.startswith("middle of interval")


def test_psm_values_are_of_the_moment():
    weather = read("psm3.csv")
    assert (weather.interval_s, weather.label.split(",")[0]) == (1800, "middle of interval")
    assert (weather.latitude_deg, weather.elevation_m, weather.utc_offset_h) == (40.53, 2168.0, -7.0)
    assert 60_000 < weather["pressure"].mean() < 90_000
    bare = read("psm3_bare.csv")
    assert bare.utc_offset_h == -7.0
    assert any("taken for UTC-07:00, by its longitude" in note for note in bare.notes)
    with pytest.raises(InputError, match="latitude_deg"):
        readers.read(str(DATA / "psm3_bare.csv"))


def test_surfrad_minutes_are_utc_and_its_longitude_is_west():
    weather = read("surfrad.dat")
    assert (weather.latitude_deg, weather.longitude_deg, weather.elevation_m) == (37.7, -105.92, 2317.0)
    assert weather.interval_s == 60
    assert stamp(weather.time[0]) == "2016-01-01T16:59:00"  # labelled 17:00, the end of the minute
    assert weather["pressure"][0] == pytest.approx(77_000, rel=0.02)


def test_bsrn_place_and_minutes():
    weather = read("bsrn.dat.gz")
    assert weather.latitude_deg == pytest.approx(46.815)
    assert weather.longitude_deg == pytest.approx(6.944)
    assert weather.elevation_m == 491
    assert (weather.interval_s, len(weather)) == (60, 120)
    assert stamp(weather.time[0]) == "2016-06-01T10:00:00"
    kinds = {finding.kind for finding in weather.findings}
    assert "no_wind" in kinds
    assert np.all(weather["wind_speed"] == 2.0)


def test_tmy2_that_pvlib_ships():
    weather = readers.read("pvlib:12839.tm2")
    assert len(weather) == 8760
    assert weather.typical
    assert weather.latitude_deg == pytest.approx(25.8)
    assert weather.longitude_deg == pytest.approx(-80.267, abs=1e-3)
    assert weather["ghi"].sum() / 1000 == pytest.approx(1793, abs=1)  # as pvlib's own reader sums it
    assert 1 < weather["precipitable_water"].mean() < 5


def test_tmy2_against_pvlib_s_reader():
    """Reference: pvlib.iotools.read_tmy2 on the same file, column by column."""
    from pvlib.iotools import read_tmy2

    theirs, _ = read_tmy2(str(Path(__import__("pvlib").__file__).parent / "data" / "12839.tm2"))
    ours = readers.read("pvlib:12839.tm2")
    for name, column, factor in (
        ("ghi", "GHI", 1.0), ("dni", "DNI", 1.0), ("dhi", "DHI", 1.0), ("temp_air", "DryBulb", 0.1),
        ("wind_speed", "Wspd", 0.1), ("relative_humidity", "RHum", 1.0),
    ):  # fmt: skip
        np.testing.assert_allclose(ours[name], theirs[column].to_numpy(dtype=float) * factor, atol=1e-9)


# ------------------------------------------------------------------------------------------ against pvlib's readers


SURFRAD = {
    "dw_solar": "ghi", "direct_n": "dni", "diffuse": "dhi", "temp": "temp_air", "rh": "relative_humidity",
    "windspd": "wind_speed",
}  # fmt: skip


def by_pvlib(name):
    """Return a cut as pvlib reads it: a frame of its own column names and UTC labels."""
    from pvlib import iotools

    path = str(DATA / name)
    if name.endswith(".epw"):
        return iotools.read_epw(path)[0]
    if name.startswith("pvgis"):
        return iotools.read_pvgis_tmy(path, map_variables=True)[0]
    if name.startswith("psm3"):
        return iotools.read_nsrdb_psm4(path, map_variables=True)[0]
    if name.startswith("bsrn"):
        return iotools.read_bsrn(path)[0]
    return iotools.read_surfrad(path, map_variables=False)[0].rename(columns=SURFRAD)


@pytest.mark.parametrize("name", ["chicago.epw", "psm3.csv", "surfrad.dat", "bsrn.dat.gz", "pvgis.json"])
def test_values_are_those_pvlib_reads(name):
    """Reference: pvlib.iotools (0.16.1) on the same cut, column by column; pressure in hPa there but for EPW, PVGIS."""
    theirs, ours = by_pvlib(name), read(name)
    # A typical year comes in the order of its months: rows are matched by their line, kept in the order of the file.
    order = np.argsort(ours.row)
    hecto = 1.0 if name.endswith(".epw") or name.startswith("pvgis") else 100.0
    names = {"temp_air": "temp_air", "wind_speed": "wind_speed", "pressure": "pressure", "ghi": "ghi", "dni": "dni",
             "dhi": "dhi", "relative_humidity": "relative_humidity"}  # fmt: skip
    theirs = theirs.rename(columns={"atmospheric_pressure": "pressure"})
    compared = 0
    for ours_name, theirs_name in names.items():
        if theirs_name not in theirs or ours_name not in ours:
            continue
        expected = theirs[theirs_name].to_numpy(dtype=float)[-len(ours) :]
        expected = expected * (hecto if ours_name == "pressure" else 1.0)
        values = ours[ours_name][order]
        told = np.isfinite(values) & np.isfinite(expected)
        assert told.sum() >= 0.95 * np.isfinite(expected).sum()
        np.testing.assert_allclose(values[told], expected[told], rtol=1e-12, err_msg=ours_name)  # one decimal text
        compared += 1
    assert compared >= 5


def test_pvgis_epw_holds_hours_of_utc():
    """The same rows as the CSV form: hour 1 of the cut's EPW is 00:00 UTC, light 10.6 minutes later in both."""
    csv, epw = read("pvgis.csv"), read("pvgis.epw")
    assert "UTC, light -0.8239 h" in epw.label
    shared = np.isin(csv.time, epw.time)
    assert shared.sum() >= 24
    np.testing.assert_array_equal(csv["ghi"][shared], epw["ghi"][np.isin(epw.time, csv.time)])


def test_psm_aerosol_is_brought_to_500_nm(tmp_path):
    """Angstrom's law by hand: 0.1 at 550 nm with the file's exponent of 1 is 0.11 at 500 nm; 0 stays missing."""
    rows = ["Year,Month,Day,Hour,Minute,GHI,DNI,DHI,Temperature,AOD,Alpha"]
    rows += [f"2020,6,1,{hour},0,500,600,100,20,{aod},1.0" for hour, aod in ((10, 0.1), (11, 0.1), (12, -999))]
    path = tmp_path / "psm.csv"
    path.write_text("\n".join(rows) + "\n", encoding="utf-8")
    weather = readers.read(str(path), **HERE)
    assert weather["aod500"][:2] == pytest.approx(0.11, rel=1e-9)
    assert np.isnan(weather["aod500"][2])
    assert any("500 nm with the file's exponent" in note for note in weather.notes)


# --------------------------------------------------------------------------------------------- tables of any kind

TABLE = """station 5; exported
Datum;Zeit;Global [kW/m2];Direkt;Diffus;Temp [K];Wind
01.06.2021;12:00;0,850;700;120;295,15;3,5
01.06.2021;13:00;0,800;650;130;296,15;4,0
02.06.2021;12:00;;500;200;290,15;2,0
"""
MAP = ColumnMap(
    ("Datum", "Zeit"),
    {
        "ghi": Column("Global [kW/m2]", "kW m-2"), "dni": Column("Direkt"), "dhi": Column("Diffus"),
        "temp_air": Column("Temp [K]", "K"), "wind_speed": Column("Wind"),
    },
    "%d.%m.%Y %H:%M",
)  # fmt: skip


def test_columns_named_by_the_study(tmp_path):
    """Semicolons, decimal commas, units of the file, a date of the file's own form; the clock from the longitude."""
    path = tmp_path / "station.csv"
    path.write_text(TABLE, encoding="utf-8")
    weather = readers.read(str(path), columns=MAP, latitude_deg=50.0, longitude_deg=8.0, elevation_m=100.0)
    assert weather["ghi"][:2] == pytest.approx([850.0, 800.0])
    assert np.isnan(weather["ghi"][2])
    assert weather["temp_air"] == pytest.approx([22.0, 23.0, 17.0])
    assert stamp(weather.time[0]) == "2021-06-01T11:00:00"
    end = readers.read(
        str(path), columns=MAP, timestamps="end UTC", latitude_deg=50.0, longitude_deg=8.0, elevation_m=100.0
    )
    assert stamp(end.time[0]) == "2021-06-01T11:00:00"


@pytest.mark.parametrize(
    ("change", "told"),
    [
        (("Direkt", "Beam"), "Direkt"),
        (("01.06.2021;13:00", "31.06.2021;13:00"), "row"),
        (("650", "bright"), "bright"),
    ],
)
def test_what_is_wrong_in_a_table_is_named(tmp_path, change, told):
    path = tmp_path / "station.csv"
    path.write_text(TABLE.replace(*change), encoding="utf-8")
    with pytest.raises(InputError) as caught:
        readers.read(str(path), columns=MAP, latitude_deg=50.0, longitude_deg=8.0, elevation_m=100.0)
    assert told in str(caught.value) or caught.value.problems[0].line > 2


def test_netcdf_of_one_place(tmp_path):
    """CF: standard names and units; a place from attributes; classic and HDF5 files alike."""
    time = np.arange(48) * 3600 + 1_609_459_200
    data = {
        name: ("time", np.full(48, value), {"units": unit, "standard_name": standard})
        for name, value, unit, standard in (
            ("a", 100.0, "W m-2", "surface_downwelling_shortwave_flux_in_air"),
            ("b", 50.0, "W m-2", "surface_diffuse_downwelling_shortwave_flux_in_air"),
            ("c", 300.0, "W m-2", "surface_direct_along_beam_shortwave_flux_in_air"),
            ("d", 283.15, "K", "air_temperature"),
            ("e", 3.0, "m s-1", "wind_speed"),
        )
    }
    axis = ("time", time.astype(np.float64), {"units": "seconds since 1970-01-01"})
    dataset = xr.Dataset(data, {"time": axis}, {"latitude": 48.0, "longitude": 11.0, "elevation": 500.0})
    for engine, name in (("h5netcdf", "new.nc"), ("scipy", "old.nc")):
        dataset.to_netcdf(tmp_path / name, engine=engine)
        weather = readers.read(str(tmp_path / name))
        assert (weather.latitude_deg, weather.elevation_m, weather.utc_offset_h) == (48.0, 500.0, 1.0)
        assert weather["temp_air"][0] == pytest.approx(10.0)
        assert np.array_equal(weather.time, time)


# ------------------------------------------------------------------------------------------------ the whole files

REAL = os.environ.get("YIELDSIM_REAL_WEATHER")


# Horizontal global light of the file [kWh m-2], as summed from what pvlib.iotools' reader of the format gives (0.16.1);
# for test_psm3_tmy-2017.csv, a table without the header that reader needs, from what pandas gives.
SUMS = {
    "tmy_45.000_8.000_2005_2023.csv": 1436, "tmy_45.000_8.000_2005_2023.json": 1436,
    "tmy_45.000_8.000_2005_2023.epw": 1436, "NLD_Amsterdam062400_IWEC.epw": 982, "test_read_psm3.csv": 1749,
    "test_read_psm4.csv": 1827, "test_psm3_tmy-2017.csv": 1778, "USA_AZ_Davis-Monthan.AFB.722745_TMY3.epw": 2002,
    "SGP_Singapore.486980_IWEC.epw": 1671, "bsrn-pay0616.dat.gz": 162,
}  # fmt: skip


@pytest.mark.skipif(REAL is None, reason="whole real files: see tests/readers/fetch_weather.py")
def test_every_real_file_reads():
    """All of them; no inhabited place has less light than 800 or more than 2700 kWh/m2 a year (from memory)."""
    names = sorted(
        path for path in Path(REAL).iterdir()
        if path.suffix == ".epw" or path.name.startswith(("tmy_45", "bsrn-", "surfrad-")) or "psm" in path.name
    )  # fmt: skip
    assert len(names) > 20
    for path in names:
        if path.name.endswith("userhorizon.json") or "polar" in path.name:
            continue
        weather = readers.read(str(path), **(HERE if "_psm" in path.name and "read" not in path.name else {}))
        assert np.isfinite(weather["temp_air"]).mean() > 0.9, path.name
        hours = weather.interval_s / 3600
        light = np.nansum(weather["ghi"]) * hours / 1000
        if len(weather) * hours >= 8760:
            assert 800 < light < 2700, path.name
        if path.name in SUMS:
            assert light == pytest.approx(SUMS[path.name], abs=0.6), path.name  # given in whole kWh


@pytest.mark.skipif(REAL is None, reason="whole real files: see tests/readers/fetch_weather.py")
def test_pvgis_is_one_year_in_three_forms():
    """The EPW form names the zone of its place and holds hours of UTC: its times are those of the other two."""
    csv, json, epw = (readers.read(f"{REAL}/tmy_45.000_8.000_2005_2023.{kind}") for kind in ("csv", "json", "epw"))
    for other in (json, epw):
        assert np.array_equal(csv.time, other.time)
        np.testing.assert_array_equal(csv["ghi"], other["ghi"])
