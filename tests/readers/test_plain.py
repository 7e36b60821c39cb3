"""The plain CSV: what its docstring promises, and messages that name the row."""

import numpy as np
import pytest

from yieldsim import readers
from yieldsim.errors import InputError

HEAD = """# site: Nowhere
# note: invented
# latitude_deg: 50
# longitude_deg: 10
# elevation_m: 100
# utc_offset_h: 1
"""
NAMES = "time,ghi,dni,dhi,temp_air,wind_speed\n"
ROWS = "2021-06-01T11:00,500,600,100,20,3\n2021-06-01T12:00,510,610,101,21,4\n2021-06-01T13:00,505,600,,22,5\n"


@pytest.fixture
def read(tmp_path):
    def read_text(text, **options):
        path = tmp_path / "site.dat"
        path.write_text(text, encoding="utf-8")
        return readers.read(str(path), **options)

    return read_text


def test_rows(read):
    weather = read(HEAD + NAMES + ROWS)
    assert str(weather.time[0].astype("datetime64[s]")) == "2021-06-01T10:00:00"
    assert weather.interval_s == 3600
    assert weather["dni"].tolist() == [600, 610, 600]
    assert np.isnan(weather["dhi"]).tolist() == [False, False, True]
    assert weather.row.tolist() == [8, 9, 10]
    assert (weather.name, weather.notes) == ("Nowhere", ("invented",))


@pytest.mark.parametrize(
    ("extra", "options", "first"),
    [
        ("# label: end\n", {}, "2021-06-01T09:00:00"),
        ("# label: middle\n", {}, "2021-06-01T09:30:00"),
        ("# clock: UTC\n", {}, "2021-06-01T11:00:00"),
        ("# interval: 30 min\n# label: end\n", {}, "2021-06-01T09:30:00"),
        ("", {"timestamps": "end"}, "2021-06-01T09:00:00"),
        ("", {"timestamps": "start UTC-03:30"}, "2021-06-01T14:30:00"),
        ("# label: end\n", {"timestamps": "start UTC +10 min"}, "2021-06-01T11:10:00"),
    ],
)
def test_where_labels_sit(read, extra, options, first):
    weather = read(HEAD + extra + NAMES + ROWS, **options)
    assert str(weather.time[0].astype("datetime64[s]")) == first
    assert weather.stated == bool(options)


def test_times_that_name_their_clock(read):
    weather = read(HEAD + NAMES + ROWS.replace(":00,5", ":00:00+02:00,5"))
    assert str(weather.time[0].astype("datetime64[s]")) == "2021-06-01T09:00:00"
    assert weather.utc_offset_h == 1  # the header's: the local time that days are counted in
    with pytest.raises(InputError, match="with and without"):
        read(HEAD + NAMES + ROWS.replace("11:00,", "11:00Z,"))


def test_the_study_may_say_where_it_is(read):
    weather = read("# utc_offset_h: 1\n" + NAMES + ROWS, latitude_deg=10.0, longitude_deg=20.0, elevation_m=5.0)
    assert (weather.latitude_deg, weather.longitude_deg, weather.elevation_m) == (10.0, 20.0, 5.0)
    with pytest.raises(InputError) as caught:
        read("# utc_offset_h: 1\n" + NAMES + ROWS)
    assert {p.where for p in caught.value.problems} == {"latitude_deg", "longitude_deg", "elevation_m"}


@pytest.mark.parametrize(
    ("text", "line", "where"),
    [
        (HEAD + NAMES + ROWS.replace("510", "high"), 9, "ghi"),
        (HEAD + NAMES + ROWS.replace("510", "inf"), 9, "ghi"),
        (HEAD + NAMES + ROWS.replace("510", "1_0"), 9, "ghi"),
        (HEAD + NAMES + ROWS.replace("21,4", "21"), 9, ""),
        (HEAD + NAMES + ROWS.replace("2021-06-01T12", "2021-06-31T12"), 9, "time"),
        (HEAD + NAMES.replace("dhi", "diff") + ROWS, 7, "diff"),
        (HEAD + NAMES.replace("dhi", "ghi") + ROWS, 7, "ghi"),
        (HEAD + NAMES.replace("time", "when") + ROWS, 7, "when"),
        (HEAD + "# colour: blue\n" + NAMES + ROWS, 7, "colour"),
        (HEAD + "# label: centre\n" + NAMES + ROWS, 0, "label"),
        (HEAD + "# interval: 2 h\n" + NAMES + ROWS, 0, "interval"),
        (HEAD.replace(": 50", ": fifty") + NAMES + ROWS, 0, "latitude_deg"),
        (HEAD.replace(": 50", ": 95") + NAMES + ROWS, 0, "latitude_deg"),
        (HEAD + NAMES, 0, ""),
        (HEAD + NAMES + ROWS.replace("510", "5100"), 9, "ghi"),
    ],
)
def test_messages_name_the_place(read, text, line, where):
    with pytest.raises(InputError) as caught:
        read(text)
    assert (caught.value.problems[0].line, caught.value.problems[0].where) == (line, where)
    assert all("site.dat" in str(problem) for problem in caught.value.problems)


def test_all_problems_come_at_once(read):
    with pytest.raises(InputError) as caught:
        read(HEAD.replace(": 50", ": fifty") + "# colour: blue\n" + NAMES.replace("dhi", "diff") + ROWS)
    assert {p.where for p in caught.value.problems} == {"latitude_deg", "colour", "diff"}


def test_wrong_options(read):
    with pytest.raises(InputError, match="plain"):
        read(HEAD + NAMES + ROWS, format="paper")
    for text in ("noon", "", "end UTC+15", "end +2000 min", "+5"):
        with pytest.raises(InputError, match="timestamps"):
            read(HEAD + NAMES + ROWS, timestamps=text)


def test_labels_that_come_again_are_told_of(read):
    """A block pasted twice: the first of each label stays, rows are put in order, and both are said."""
    weather = read(HEAD + NAMES + ROWS + ROWS)
    assert len(weather) == len(read(HEAD + NAMES + ROWS))
    assert {finding.kind for finding in weather.findings} == {"out_of_order", "duplicate"}
