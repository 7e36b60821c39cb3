"""TMY3 against pvlib's own reader, and what happens to broken files."""

import os
from pathlib import Path

import numpy as np
import pvlib
import pytest

from yieldsim import readers
from yieldsim.errors import InputError

DATA = Path(pvlib.__file__).parent / "data"
STATIONS = ["723170TYA.CSV", "703165TY.csv"]


@pytest.fixture(scope="module")
def lines():
    return (DATA / STATIONS[0]).read_text().splitlines()


def written(tmp_path, lines):
    path = tmp_path / "station.txt"  # recognised by content, so any name will do
    path.write_text("\n".join(lines) + "\n")
    return str(path)


@pytest.mark.parametrize("name", STATIONS)
def test_values_are_those_pvlib_reads(name):
    weather = readers.read(f"pvlib:{name}")
    frame, meta = pvlib.iotools.read_tmy3(DATA / name)
    assert len(weather) == 8760
    for column, scale in [("ghi", 1), ("dni", 1), ("dhi", 1), ("temp_air", 1), ("wind_speed", 1), ("pressure", 100)]:
        assert np.array_equal(weather[column], frame[column].to_numpy() * scale)
    assert (weather.latitude_deg, weather.longitude_deg) == (meta["latitude"], meta["longitude"])
    assert weather.utc_offset_h == meta["TZ"]
    start = weather.time + 3600 * meta["TZ"]  # the file's first label, 01:00, ends the hour that starts at midnight
    assert str(start[0].astype("datetime64[s]")) == "2002-01-01T00:00:00"
    assert np.all(np.diff(weather.time) == 3600)
    assert weather.typical
    assert any("typical year" in note for note in weather.notes)


def test_unfilled_columns_are_missing_not_zero():
    greensboro, sand_point = (readers.read(f"pvlib:{name}") for name in STATIONS)
    assert "aod_broadband" not in greensboro
    assert "albedo" not in greensboro
    assert {f.kind for f in greensboro.findings} == {"unfilled"}
    assert np.isfinite(sand_point["aod_broadband"]).all()
    assert not sand_point.findings


def test_missing_code_is_missing(tmp_path, lines):
    cells = lines[500].split(",")
    cells[31] = "-9900"  # Dry-bulb (C)
    weather = readers.read(written(tmp_path, [*lines[:500], ",".join(cells), *lines[501:]]))
    assert np.isnan(weather["temp_air"]).sum() == 1
    assert np.isnan(weather["temp_air"][498])
    assert weather.row[498] == 501


def test_every_bad_cell_is_named(tmp_path, lines):
    bad = list(lines)
    for row, cell in [(10, 4), (4000, 7), (4001, 31)]:
        cells = bad[row - 1].split(",")
        cells[cell] = "n.n."
        bad[row - 1] = ",".join(cells)
    with pytest.raises(InputError) as caught:
        readers.read(written(tmp_path, bad))
    assert [(p.line, p.where) for p in caught.value.problems] == [(10, "ghi"), (4000, "dni"), (4001, "temp_air")]
    assert all("station.txt" in str(p) for p in caught.value.problems)


@pytest.mark.parametrize(
    ("change", "line", "where"),
    [
        (lambda rows: [*rows[:99], rows[99][:40], *rows[100:]], 100, ""),  # a row cut short
        (lambda rows: [rows[0].replace("36.100", "north"), *rows[1:]], 1, "place"),
        (lambda rows: [*rows[:49], rows[49].replace("/1988", "-1988"), *rows[50:]], 50, "time"),
        (lambda rows: [rows[0], rows[1].replace("Dry-bulb (C)", "Dry"), *rows[2:]], 0, "temp_air"),
        (lambda rows: rows[:2], 3, ""),
        (lambda rows: rows[:3], 3, "time"),
    ],
)
def test_broken_file(tmp_path, lines, change, line, where):
    with pytest.raises(InputError) as caught:
        readers.read(written(tmp_path, change(list(lines))))
    assert (caught.value.problems[0].line, caught.value.problems[0].where) == (line, where)


def test_gzip_and_windows_line_ends(tmp_path, lines):
    import gzip

    path = tmp_path / "packed"
    path.write_bytes(gzip.compress("\r\n".join(lines).encode()))
    assert np.array_equal(readers.read(str(path))["ghi"], readers.read(f"pvlib:{STATIONS[0]}")["ghi"])


def test_a_damaged_gzip_file(tmp_path, lines):
    import gzip

    whole = gzip.compress("\n".join(lines).encode())
    path = tmp_path / "cut.gz"
    path.write_bytes(whole[: len(whole) // 2])
    with pytest.raises(InputError, match="gzip"):
        readers.read(str(path))


def test_what_is_no_weather_file(tmp_path):
    for content, match in [
        (b"", "empty"),
        (b"Lorem ipsum dolor sit amet\n" * 100, "no known weather format"),
        (os.urandom(4096) + b"\x00", "no known weather format"),
    ]:
        path = tmp_path / "file"
        path.write_bytes(content)
        with pytest.raises(InputError, match=match):
            readers.read(str(path))
    with pytest.raises(InputError, match="no such file"):
        readers.read(str(tmp_path / "none"))
    with pytest.raises(InputError, match="723170TYA"):
        readers.read("pvlib:none.csv")
    with pytest.raises(InputError, match="data folder"):
        readers.read("pvlib:../version.py")
