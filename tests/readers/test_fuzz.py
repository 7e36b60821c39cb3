"""Any bytes into any reader: a Weather that can be used, or an error that names the file; within bounds."""

import gzip
from itertools import pairwise
from pathlib import Path

import numpy as np
import pvlib
import pytest
import xarray as xr
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from tests import strategies
from yieldsim import readers
from yieldsim.errors import InputError
from yieldsim.readers import READERS, Column, ColumnMap, File, _source
from yieldsim.readers.grid import seconds

DATA = Path(__file__).parent / "data"
SHIPPED = Path(pvlib.__file__).parent / "data"
HERE = {"latitude_deg": 40.0, "longitude_deg": -105.0, "elevation_m": 1600.0}
PLAIN = """# site: Here
# latitude_deg: 52.6
# longitude_deg: 1.9
# elevation_m: 4
# utc_offset_h: 0
# interval: 60 min
time,ghi,dni,dhi,temp_air,wind_speed,precipitable_water
2021-06-01T10:00,500,600,100,12.5,3.1,1.2
2021-06-01T11:00,510,600,100,12.5,3.1,
2021-06-01T12:00,520,600,100,12.5,3.1,1.4
"""
TABLE = """station 5; exported
Datum;Zeit;Global;Diffus;Temp
01.06.2021;12:00;0,850;120;295,15
01.06.2021;13:00;0,800;130;296,15
01.06.2021;14:00;;200;290,15
"""
MAP = ColumnMap(
    ("Datum", "Zeit"),
    {"ghi": Column("Global", "kW m-2"), "dhi": Column("Diffus"), "temp_air": Column("Temp", "K")},
    "%d.%m.%Y %H:%M",
    (-999.0,),
)
ISO = ColumnMap(("t",), {"ghi": Column("g"), "dhi": Column("d"), "temp_air": Column("T")})
ISO_TABLE = "t,g,d,T\n" + "".join(f"2021-06-01 {hour}:00+02:00,500,100,20\n" for hour in range(10, 16))


def head_of(path, lines):
    return b"".join(path.read_bytes().splitlines(keepends=True)[:lines])


def netcdf(folder):
    """Return the bytes of a small CF file, of the classic kind, whose header is as easily hurt as its values."""
    names = {"ghi": 500.0, "dni": 600.0, "dhi": 100.0, "temp_air": 20.0, "wind_speed": 2.0}
    data = {name: ("time", np.full(8, value)) for name, value in names.items()}
    axis = ("time", np.arange(8.0), {"units": "hours since 2021-06-01"})
    place = {"latitude": 48.0, "longitude": 11.0, "elevation": 500.0, "utc_offset_h": 1.0}
    xr.Dataset(data, {"time": axis}, place).to_netcdf(folder / "made.nc", engine="scipy")
    return (folder / "made.nc").read_bytes()


class Files(dict):
    """Files by name; shown by their names alone."""

    def __repr__(self):
        return f"{len(self)} files"


@pytest.fixture(scope="module")
def whole(tmp_path_factory):
    """Return a good file of every format, and the column map it needs."""
    cuts = {path.name: (path.read_bytes(), None) for path in DATA.iterdir() if path.suffix not in (".md", ".gz")}
    made = {
        "bsrn": (gzip.decompress((DATA / "bsrn.dat.gz").read_bytes()), None),
        "bsrn.gz": ((DATA / "bsrn.dat.gz").read_bytes(), None),
        "tmy3": (head_of(SHIPPED / "703165TY.csv", 50), None),
        "tmy2": (head_of(SHIPPED / "12839.tm2", 49), None),
        "plain": (PLAIN.encode(), None),
        "table": (TABLE.encode(), MAP),
        "iso table": (ISO_TABLE.encode(), ISO),
        "netcdf": (netcdf(tmp_path_factory.mktemp("netcdf")), None),
    }
    return Files(cuts | made)


NAMES = (
    "chicago.epw", "pvgis.epw", "pvgis.csv", "pvgis.json", "psm3.csv", "psm3_bare.csv", "surfrad.dat", "bsrn",
    "bsrn.gz", "tmy3", "tmy2", "plain", "table", "iso table", "netcdf",
)  # fmt: skip


def read_or_refused(path, **options):
    """Return a Weather, or None for one refused with errors that all name the file."""
    weather, problems = None, ()
    try:
        weather = readers.read(str(path), shown="damaged", **HERE, **options)
    except InputError as error:
        problems = error.problems
    assert weather is not None or problems
    assert all(problem.file.startswith("damaged") and problem.found for problem in problems)
    return weather


def test_every_format_is_there(whole):
    """What is damaged below is read when whole, so that the errors met there are those of the damage."""
    assert set(whole) == set(NAMES)
    assert all(any(name.startswith(form[:3]) for name in NAMES) or form == "epw" for form in READERS)


@pytest.mark.parametrize("name", NAMES)
def test_whole_files_read(tmp_path, whole, name):
    content, columns = whole[name]
    (tmp_path / "x").write_bytes(content)
    assert read_or_refused(tmp_path / "x", columns=columns) is not None


@pytest.mark.parametrize("name", NAMES)
@settings(max_examples=40, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(data=st.data())
def test_damaged_files_are_read_or_refused_by_name(tmp_path, whole, name, data):
    """Never another exception; what is read rises in time, has finite or missing values, and findings with rows."""
    content, columns = whole[name]
    path = tmp_path / "damaged"
    path.write_bytes(data.draw(strategies.damaged(content)))
    weather = read_or_refused(path, columns=columns)
    if weather is not None:
        assert np.all(np.diff(weather.time) > 0)
        assert not any(np.isinf(values).any() for values in weather.columns.values())
        assert all(finding.rows > 0 and finding.first <= finding.last for finding in weather.findings)


@settings(max_examples=100, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(content=st.binary(max_size=2000), name=st.sampled_from(sorted(READERS)))
def test_any_bytes_into_any_reader(tmp_path, content, name):
    path = tmp_path / "bytes"
    path.write_bytes(content)
    with pytest.raises(InputError, match="damaged"):
        readers.read(str(path), name, shown="damaged", **HERE)


@settings(max_examples=30, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(data=st.data())
def test_damaged_files_in_years(tmp_path, data):
    """The same for a stretch of three years in one file: years in order, none of them of stray rows."""
    start = np.datetime64("2019-01-01T00")
    rows = [f"{start + np.timedelta64(6 * i, 'h')}:00,100,50,60,10,2" for i in range(3 * 1461)]
    head = PLAIN.splitlines()[:5]
    text = "\n".join([*head, "# interval: 60 min", "time,ghi,dni,dhi,temp_air,wind_speed", *rows]).encode()
    path = tmp_path / "damaged"
    path.write_bytes(data.draw(strategies.damaged(text)))
    found, problems = [], ()
    try:
        found.extend(readers.years([File(str(path), "damaged")]))
    except InputError as error:
        problems = error.problems
    assert found or problems
    assert all(problem.file == "damaged" for problem in problems)
    assert all(one.time[-1] < two.time[0] for one, two in pairwise(found))


# ----------------------------------------------------------------------------------------------------------- bounds


def refused_quickly(path, match, **options):
    """Refuse for the bound itself, which the error names: without it the file would take minutes or gigabytes."""
    with pytest.raises(InputError, match=match):
        readers.read(str(path), shown="bomb", **HERE, **options)


def test_a_line_without_end(tmp_path):
    (tmp_path / "x").write_bytes(PLAIN.encode() + b"1" * 1_000_000)
    refused_quickly(tmp_path / "x", "bomb:11: found a line that does not end")


@pytest.mark.parametrize("form", ["tmy3", "epw", "psm", "bsrn", "pvgis"])
def test_gzip_that_unpacks_to_many_lines(tmp_path, monkeypatch, form):
    """A few kilobytes of gzip hold millions of empty lines: counted, and refused beyond a bound."""
    monkeypatch.setattr(_source, "WHOLE_LINES", 100_000)
    starts = {
        "tmy3": head_of(SHIPPED / "703165TY.csv", 3), "epw": (DATA / "chicago.epw").read_bytes(),
        "psm": (DATA / "psm3.csv").read_bytes(), "pvgis": (DATA / "pvgis.csv").read_bytes(),
        "bsrn": gzip.decompress((DATA / "bsrn.dat.gz").read_bytes()),
    }  # fmt: skip
    (tmp_path / "x").write_bytes(gzip.compress(starts[form] + b"\n" * 300_000))
    refused_quickly(tmp_path / "x", "more than 100000 lines")


@pytest.mark.parametrize("form", ["plain", "surfrad"])
def test_streams_have_an_end_too(tmp_path, monkeypatch, form):
    monkeypatch.setattr(_source, "STREAM_LINES", 100_000)
    start = PLAIN.encode() if form == "plain" else (DATA / "surfrad.dat").read_bytes()
    (tmp_path / "x").write_bytes(gzip.compress(start + b"\n" * 300_000))
    refused_quickly(tmp_path / "x", "more than 100000 lines")


def test_json_beyond_a_size_is_not_taken_apart(tmp_path):
    """Nested brackets would take fifty times their size in memory."""
    start = b'{"inputs": {"location": {}}, "outputs": {"tmy_hourly": ['
    (tmp_path / "x").write_bytes(gzip.compress(start + b"[]," * 12_000_000))
    refused_quickly(tmp_path / "x", "more than 32 MiB")


def test_netcdf_of_more_moments_than_it_can_be(tmp_path):
    """A chunked variable without values takes no room in the file, whatever length it claims."""
    import h5netcdf

    with h5netcdf.File(tmp_path / "x", "w") as file:
        file.dimensions = {"time": 10**11}
        variable = file.create_variable("time", ("time",), "f8", chunks=(1000,))
        variable.attrs["units"] = "seconds since 1970-01-01"
        file.create_variable("ghi", ("time",), "f8", chunks=(1000,))
    refused_quickly(tmp_path / "x", "moments")


def test_a_shape_that_trips_the_library_in_an_odd_way(tmp_path):
    """Records of no width in a classic file: their shape becomes a broken expression, and numpy raises SyntaxError."""
    from scipy.io import netcdf_file

    with netcdf_file(tmp_path / "x", "w") as file:
        file.createDimension("time", None)
        file.createDimension("nv", 0)
        file.createVariable("time", "f8", ("time",))[:] = np.arange(3.0)
        file.createVariable("ghi", "f8", ("time", "nv"))
    refused_quickly(tmp_path / "x", "bomb: found it cannot be read")


@pytest.mark.parametrize("name", ["tmy3", "psm3.csv", "plain", "table", "pvgis.csv", "surfrad.dat"])
def test_a_carriage_return_within_a_line(tmp_path, whole, name):
    """To some parsers it ends the line and to others not: rows and header would be counted apart."""
    content, columns = whole[name]
    lines = content.split(b"\n")
    for at in (0, len(lines) // 2):
        half = len(lines[at]) // 2
        hurt = [*lines[:at], lines[at][:half] + b"\r" + lines[at][half:], *lines[at + 1 :]]
        (tmp_path / "x").write_bytes(b"\n".join(hurt))
        refused_quickly(tmp_path / "x", f"bomb:{at + 1}: found a carriage return", columns=columns)


@pytest.mark.parametrize(("name", "column"), [("tmy3", b"DNI (W/m^2)"), ("psm3.csv", b"DNI"), ("pvgis.csv", b"Gb(n)")])
def test_a_column_named_twice(tmp_path, whole, name, column):
    other = {b"DNI (W/m^2)": b"DHI (W/m^2)", b"DNI": b"DHI", b"Gb(n)": b"Gd(h)"}[column]
    content = b"\n".join(
        line.replace(b"," + other + b",", b"," + column + b",") if i < 40 else line
        for i, line in enumerate(whole[name][0].split(b"\n"))
    )
    (tmp_path / "x").write_bytes(content)
    refused_quickly(tmp_path / "x", "the column twice")


def test_header_lines_that_differ(tmp_path):
    (tmp_path / "x").write_bytes(PLAIN.replace("# interval", "# latitude_deg: -52.6\n# interval").encode())
    refused_quickly(tmp_path / "x", "bomb:6: latitude_deg: found '-52.6' after '52.6'")


def test_a_clock_that_no_place_has(tmp_path):
    (tmp_path / "x").write_bytes(PLAIN.replace(":00,", ":00+99:00,").encode())
    refused_quickly(tmp_path / "x", "a clock of UTC")


def test_two_months_in_one_file(tmp_path, whole):
    (tmp_path / "x").write_bytes(2 * whole["bsrn"][0])
    refused_quickly(tmp_path / "x", "a month a file")


@pytest.mark.parametrize("value", ["true", '"500"', "[1]"])
def test_json_of_other_things_than_numbers(tmp_path, whole, value):
    content = whole["pvgis.json"][0]
    at = content.index(b'"G(h)"', content.index(b"tmy_hourly"))
    end = content.index(b",", at)
    (tmp_path / "x").write_bytes(content[:at] + f'"G(h)": {value}'.encode() + content[end:])
    refused_quickly(tmp_path / "x", "where a number should be")


def test_json_rows_of_many_keys_take_no_table(tmp_path, whole):
    """Rows that each name keys of their own: as a table their number squared, as columns read one by one nothing."""
    import json
    import tracemalloc

    content = json.loads(whole["pvgis.json"][0])
    row = content["outputs"]["tmy_hourly"][0]
    hours = [f"201801{1 + i // 24:02d}:{i % 24:02d}10" for i in range(700)]
    content["outputs"]["tmy_hourly"] = [
        {**row, "time(UTC)": hour, **{f"{i} {k}": 0 for k in range(40)}} for i, hour in enumerate(hours)
    ]
    (tmp_path / "x").write_bytes(json.dumps(content).encode())
    readers.read(str(tmp_path / "x"), **HERE)  # what is loaded on the way is no part of it
    tracemalloc.start()
    weather = readers.read(str(tmp_path / "x"), **HERE)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert len(weather) == 700
    assert peak < 700 * 28_000 * 8 / 2  # half of a table of 700 rows by 28,000 columns


@pytest.mark.parametrize("kind", ["c16", "?"])
def test_netcdf_of_other_things_than_numbers(tmp_path, kind):
    import h5netcdf

    with h5netcdf.File(tmp_path / "x", "w", invalid_netcdf=True) as file:
        file.dimensions = {"time": 3}
        time = file.create_variable("time", ("time",), "f8")
        time[...], time.attrs["units"] = np.arange(3.0), "hours since 2021-06-01"
        file.create_variable("ghi", ("time",), kind)[...] = np.ones(3, dtype=kind)
    refused_quickly(tmp_path / "x", "ghi: found values of the type")


def test_long_rows_are_parsed_before_they_fill_the_memory(tmp_path, monkeypatch):
    """Rows of 50 kB, too many cells each: refused after some megabytes, not after a block of 65,536 of them."""
    from yieldsim.readers import _table

    monkeypatch.setattr(_table, "BLOCK_CHARACTERS", 500_000)
    (tmp_path / "x").write_bytes(gzip.compress(PLAIN.encode() + 100 * (b"1," * 25_000 + b"\n") + b"\x00"))
    refused_quickly(tmp_path / "x", "25001 cells")


def test_moments_outside_the_calendar():
    with pytest.raises(InputError, match="cannot be read"):
        seconds(np.array([1e246, 2e246]), {"units": "hours since 2021-06-01"}, "x.nc")
