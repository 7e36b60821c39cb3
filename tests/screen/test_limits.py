"""Light at night, below zero and beyond the sun; too short a year; values missing."""

from dataclasses import replace

import numpy as np
import pytest

from yieldsim import readers, screen
from yieldsim.errors import InputError
from yieldsim.sky import sun
from yieldsim.weather import Flag

SAND_POINT = "pvlib:703165TY.csv"


@pytest.fixture(scope="module")
def weather():
    return readers.read(SAND_POINT)


def changed(weather, **columns):
    return replace(weather, columns={**weather.columns, **columns})


def kinds(weather):
    return {finding.kind: finding for finding in weather.findings}


def test_night_light_is_dark_and_listed(weather):
    good = screen.screen(weather)
    course = sun.course(weather.time, 3600, weather.latitude_deg, weather.longitude_deg, weather.elevation_m)
    night = course.lit == 0
    assert good["ghi"][night].max() == good["dni"][night].max() == good["dhi"][night].max() == 0
    note = kinds(good)["night_light"]
    assert note.rows == np.count_nonzero(good.flags & Flag.NIGHT_LIGHT)
    assert 0 < note.rows <= 0.001 * 8760  # what the issue allows a real file
    assert note.first < note.last
    assert np.array_equal(good["ghi"][~night], weather["ghi"][~night])


def test_negative_light(weather):
    day = np.argmax(weather["dhi"])
    dhi = weather["dhi"].copy()
    dhi[day] = -3.0
    good = screen.screen(changed(weather, dhi=dhi))
    assert good["dhi"][day] == 0.0
    assert kinds(good)["negative"].rows == 1
    assert good.flags[day] & Flag.NEGATIVE


def test_beam_beyond_the_sun(weather):
    noon = np.argmax(weather["dni"])
    dni = weather["dni"].copy()
    dni[noon] = 1800.0
    good = screen.screen(changed(weather, dni=dni))
    # The earth is between 0.983 and 1.017 of its mean distance from the sun.
    assert 1361 / 1.017**2 < good["dni"][noon] < 1361 / 0.983**2
    assert kinds(good)["dni_beyond_sun"].rows == 1
    assert good.flags[noon] & Flag.DNI_LIMITED


def cut(weather, n):
    columns = {name: values[:n] for name, values in weather.columns.items()}
    return replace(weather, time=weather.time[:n], columns=columns, flags=weather.flags[:n], row=weather.row[:n])


def test_too_short_a_year(weather):
    with pytest.raises(InputError, match="8760 hours or more"):
        screen.screen(cut(weather, 8759))
    assert len(screen.screen(cut(weather, 8759), allow_gaps=True)) == 8759
    with pytest.raises(InputError, match="hours with light"):
        screen.screen(cut(weather, 20), allow_gaps=True)


def test_missing_value_is_named(weather):
    temp = weather["temp_air"].copy()
    temp[3000:5000] = np.nan
    with pytest.raises(InputError, match=f"row {weather.row[3000]}"):
        screen.screen(changed(weather, temp_air=temp))
