"""Every format on cuts of real files: place, clock, label, units, missing codes; and what is wrong, with its row."""

import os
from pathlib import Path

import numpy as np
import pytest
import xarray as xr
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from yieldsim import readers
from yieldsim.errors import InputError
from yieldsim.readers import READERS, Column, ColumnMap, File

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


# ------------------------------------------------------------------------------------------------- several years


def plain(first, hours, latitude=50.0):
    start = np.datetime64(first)
    rows = [f"{start + np.timedelta64(i, 'h')},100,50,60,10,2" for i in range(hours)]
    head = ["# utc_offset_h: 0", f"# latitude_deg: {latitude}", "# longitude_deg: 0", "# elevation_m: 0"]
    return "\n".join([*head, "time,ghi,dni,dhi,temp_air,wind_speed", *rows]) + "\n"


@pytest.fixture
def files(tmp_path):
    def write(**texts):
        made = []
        for name, text in texts.items():
            path = tmp_path / f"{name}.csv"
            path.write_text(text, encoding="utf-8")
            made.append(File(str(path), path.name))
        return made

    return write


def lengths(found):
    return [(stamp(weather.time[0])[:10], len(weather)) for weather in readers.years(found)]


def test_one_file_of_many_years_is_cut_at_the_turn_of_the_year(files):
    found = lengths(files(all=plain("2019-01-01T00:00", 8760 + 8784 + 8760)))
    assert found == [("2019-01-01", 8760), ("2020-01-01", 8784), ("2021-01-01", 8760)]


def test_a_year_may_start_anywhere(files):
    assert lengths(files(odd=plain("2019-07-01T00:00", 8784))) == [("2019-07-01", 8784)]


def test_files_a_year_each_and_files_a_month_each(files):
    years = {f"y{year}": plain(f"{year}-01-01T00:00", 8760) for year in (2018, 2019, 2021)}
    assert [count for _, count in lengths(files(**years))] == [8760] * 3
    months = {f"m{month:02d}": plain(f"2019-{month:02d}-01T00:00", 672) for month in range(1, 7)}
    assert lengths(files(**months)) == [("2019-01-01", 6 * 672)]


def test_files_of_one_stretch_must_be_of_one_kind(files):
    found = files(a=plain("2019-01-01T00:00", 600), b=plain("2019-01-26T00:00", 600, latitude=40.0))
    with pytest.raises(InputError, match="latitude_deg"):
        list(readers.years(found))


# --------------------------------------------------------------------------------------------------------- damage


@settings(max_examples=150, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(
    name=st.sampled_from([name for name in CUTS if not name.endswith(".gz")]),
    place=st.floats(0, 1), junk=st.binary(min_size=0, max_size=40), cut=st.booleans(),
)  # fmt: skip
def test_damaged_files_are_read_or_refused_by_name(tmp_path, name, place, junk, cut):
    """Any bytes anywhere in any format: a Weather, or an error that names the file; never another exception."""
    content = (DATA / name).read_bytes()
    at = int(place * len(content))
    path = tmp_path / "damaged"
    path.write_bytes(content[:at] + junk + (b"" if cut else content[at + len(junk) :]))
    problems, weather = (), None
    try:
        weather = readers.read(str(path), shown="damaged", **HERE)
    except InputError as error:
        problems = error.problems
    assert all("damaged" in str(problem) for problem in problems)
    assert problems or np.all(np.diff(weather.time) > 0)


@settings(max_examples=100, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(content=st.binary(max_size=2000), name=st.sampled_from(sorted(READERS)))
def test_any_bytes_into_any_reader(tmp_path, content, name):
    path = tmp_path / "bytes"
    path.write_bytes(content)
    with pytest.raises(InputError, match="bytes"):
        readers.read(str(path), name, shown="bytes", **HERE)


# ------------------------------------------------------------------------------------------------ the whole files

REAL = os.environ.get("YIELDSIM_REAL_WEATHER")


@pytest.mark.skipif(REAL is None, reason="whole real files: see tests/readers/fetch_weather.py")
def test_every_real_file_reads():
    names = sorted(
        path for path in Path(REAL).iterdir()
        if path.suffix == ".epw" or path.name.startswith(("tmy_45", "bsrn-", "surfrad-")) or "psm3" in path.name
    )  # fmt: skip
    assert len(names) > 20
    for path in names:
        if path.name.endswith("userhorizon.json"):
            continue
        weather = readers.read(str(path), **(HERE if "psm3_" in path.name and "read" not in path.name else {}))
        assert np.isfinite(weather["temp_air"]).mean() > 0.9, path.name
