"""Several files, several years: what is a year, where it is cut, and what is said of the rest."""

import tracemalloc

import numpy as np
import pytest

from yieldsim import readers
from yieldsim.errors import InputError
from yieldsim.readers import File
from yieldsim.readers._raw import Raw, Wanted
from yieldsim.readers._years import Stretch

HOUR = 3600


def stamp(seconds):
    return str(np.datetime64(int(seconds), "s"))


def plain(
    first, rows, latitude=50.0, offset=0, clock="local standard time", step="h", each=1, label="start", light=100
):
    """Return a plain file of constant weather; labels from `first` on, in steps."""
    start = np.datetime64(first)
    lines = [f"{start + np.timedelta64(i * each, step)},{light},50,60,10,2" for i in range(rows)]
    head = [f"# utc_offset_h: {offset}", f"# latitude_deg: {latitude}", "# longitude_deg: 0", "# elevation_m: 0"]
    head += [f"# clock: {clock}", f"# label: {label}"]
    return "\n".join([*head, "time,ghi,dni,dhi,temp_air,wind_speed", *lines]) + "\n"


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


def kinds(weather):
    return {finding.kind: finding for finding in weather.findings}


THREE = 8760 + 8784 + 8760
CUT = [("2019-01-01", 8760), ("2020-01-01", 8784), ("2021-01-01", 8760)]


def test_one_file_of_many_years_is_cut_at_the_turn_of_the_year(files):
    assert lengths(files(all=plain("2019-01-01T00:00", THREE))) == CUT


@pytest.mark.parametrize("offset", [-7, 9])
def test_years_turn_by_local_time(files, offset):
    """Rows that begin at the turn of the local year are cut there."""
    years = list(readers.years(files(all=plain("2019-01-01T00:00", THREE, offset=offset))))
    assert [len(year) for year in years] == [8760, 8784, 8760]
    assert all(stamp(year.time[0] + offset * HOUR)[5:16] == "01-01T00:00" for year in years)


@pytest.mark.parametrize("offset", [-7, 9])
def test_years_in_utc_are_whole_wherever_the_place_lies(files, offset):
    """Rows that begin at the turn of the year in UTC are cut in UTC: by local time the ends would be stubs of hours."""
    assert lengths(files(all=plain("2019-01-01T00:00", THREE, offset=offset, clock="UTC"))) == CUT


def test_labels_at_the_end_of_the_hour_belong_to_the_year_before(files):
    assert lengths(files(all=plain("2019-01-01T01:00", THREE, label="end"))) == CUT


def test_a_last_midnight_beyond_the_year_is_left_out_and_said(files):
    """Exports often end with the first label of the next year."""
    years = list(readers.years(files(all=plain("2019-01-01T00:00", THREE + 1))))
    assert [len(year) for year in years] == [8760, 8784, 8760]
    assert "beyond_year" not in kinds(years[1])
    found = kinds(years[-1])["beyond_year"]
    assert (found.rows, stamp(found.first)) == (1, "2022-01-01T00:00:00")
    assert "row" in found.found


def test_first_hours_before_the_year_are_left_out_and_said(files):
    years = list(readers.years(files(all=plain("2018-12-31T21:00", THREE + 3))))
    assert [len(year) for year in years] == [8760, 8784, 8760]
    assert kinds(years[0])["beyond_year"].rows == 3


def test_a_year_may_start_anywhere(files):
    assert lengths(files(odd=plain("2019-07-01T00:00", 8784))) == [("2019-07-01", 8784)]


def test_files_a_year_each_and_files_a_month_each(files):
    years = {f"y{year}": plain(f"{year}-01-01T00:00", 8760) for year in (2018, 2019, 2021)}
    assert [count for _, count in lengths(files(**years))] == [8760] * 3
    months = {f"m{month:02d}": plain(f"2019-{month:02d}-01T00:00", 672) for month in range(1, 7)}
    assert lengths(files(**months)) == [("2019-01-01", 6 * 672)]


def test_files_that_share_a_label_are_one_stretch(files):
    """Months whose last label is the first of the next: told as duplicates, not taken for years of their own."""
    days = {"01": 31, "02": 28, "03": 31}
    months = {f"m{month}": plain(f"2019-{month}-01T00:00", 24 * count + 1) for month, count in days.items()}
    (year,) = readers.years(files(**months))
    assert len(year) == 90 * 24 + 1
    assert kinds(year)["duplicate"].rows == 2
    assert year.source == "m01.csv to m03.csv (3 files)"


def test_files_out_of_order_are_refused(files):
    found = files(b=plain("2019-02-01T00:00", 600), a=plain("2019-01-01T00:00", 600))
    with pytest.raises(InputError, match=r"a\.csv.*in the order of time"):
        list(readers.years(found))


def test_files_of_one_stretch_must_be_of_one_kind(files):
    found = files(a=plain("2019-01-01T00:00", 600), b=plain("2019-01-26T00:00", 600, latitude=40.0))
    with pytest.raises(InputError, match="latitude_deg"):
        list(readers.years(found))


def test_a_year_mistyped_is_named(files):
    """One row of 2091 among those of 2019 to 2021, and one at the very end: the message says which."""
    lines = plain("2019-01-01T00:00", THREE).splitlines()
    row = 20_000
    wrong = [*lines[: row - 1], lines[row - 1].replace("2021", "2091"), *lines[row:]]
    with pytest.raises(InputError) as caught:
        list(readers.years(files(wrong="\n".join(wrong) + "\n")))
    (problem,) = caught.value.problems
    assert problem.file == "wrong.csv"
    assert problem.line == row or f"row {row}" in str(problem)


def test_findings_stay_with_their_year_and_are_in_utc(files):
    """The reader finds things by the file's clock; a year is told of its own only, in UTC."""
    lines = plain("2019-01-01T00:00", THREE, offset=9).splitlines()
    head = lines.index("time,ghi,dni,dhi,temp_air,wind_speed")
    at = head + 1 + 8760 + 100  # 100 hours into the second year
    twice = [*lines[: at + 1], lines[at].replace(",100,", ",300,"), *lines[at + 1 :]]
    years = list(readers.years(files(twice="\n".join(twice) + "\n")))
    assert ["duplicate" in kinds(year) for year in years] == [False, True, False]
    found = kinds(years[1])["duplicate"]
    assert stamp(found.first) == "2020-01-04T19:00:00"  # 2020-01-05 04:00 at UTC+9
    assert found.found == f"the same interval again with other values in 1 rows, first in row {at + 2}"
    assert years[1]["ghi"][100] == 100.0  # the first of the two


def test_rows_between_intervals_are_left_out_or_refused(files):
    lines = plain("2019-01-01T00:00", 2000).splitlines()
    one = [*lines[:500], lines[499].replace(":00,", ":10,"), *lines[500:]]
    (year,) = readers.years(files(one="\n".join(one) + "\n"))
    assert kinds(year)["stray_rows"].rows == 1
    assert len(year) == 2000
    rest = plain("2019-03-24T08:00", 300, step="m", each=10).splitlines()[-300:]
    with pytest.raises(InputError) as caught:
        list(readers.years(files(both="\n".join([*lines, *rest]) + "\n")))
    assert caught.value.problems[0].line == len(lines) + 2  # the first row ten minutes after the one before


def test_no_more_than_a_year_and_a_block_is_held():
    """Ten years of ten-minute rows in blocks: what is held stays below 1.2 years of them and the copies being made."""
    rows, block = 10 * 52_560, 65_536 // 8
    a_year_mb = 52_560 * 8 * 7 / 1e6  # five columns, time and row of 8 bytes each
    start = int(np.datetime64("2010-01-01", "s").astype(np.int64))
    tracemalloc.start()
    stretch, got = Stretch(), 0
    for first in range(0, rows, block):
        count = min(block, rows - first)
        number = np.arange(first, first + count, dtype=np.int64)
        columns = {name: np.full(count, 50.0) for name in ("ghi", "dni", "dhi", "temp_air", "wind_speed")}
        raw = Raw("x", "", 50.0, 0.0, 0.0, 0.0, 0, "start", "UTC", start + 600 * number, None, number, columns)
        got += sum(len(year) for year in stretch.add(raw, Wanted()))
    got += sum(len(year) for year in stretch.rest())
    peak_mb = tracemalloc.get_traced_memory()[1] / 1e6
    tracemalloc.stop()
    assert got == rows
    assert peak_mb < 5 * a_year_mb  # pieces, pieces strung together, the year cut out, masks and flags
