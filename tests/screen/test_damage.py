"""A clean year damaged in the ways files are: mended to within 0.5 % of its yield with a finding that names the damage,
or refused; never in silence. And clean years pass as they are."""

import os
from dataclasses import replace
from functools import cache
from pathlib import Path

import numpy as np
import pytest

from yieldsim import readers, screen
from yieldsim.config import library
from yieldsim.errors import InputError
from yieldsim.screen import timestamps
from yieldsim.sky import sun
from yieldsim.study import hourly, light
from yieldsim.study.plan import MountingPlan, SitePlan

SAMPLES = Path(__file__).parents[2] / "weather_samples"
PLACES = ("greensboro", "saltmarsh_point")
OTHERS = ("amber_mesa", "birchholm", "mangrove_reach", "highmoor")
LIGHT = ("ghi", "dni", "dhi")
PLANE = MountingPlan("fixed", "fixed", 30.0, 180.0)


@cache
def raw(place):
    return readers.read("pvlib:723170TYA.CSV" if place == "greensboro" else str(SAMPLES / f"{place}.csv"))


@cache
def absorbers():
    return tuple(library.entry(name).absorber for name in ("c-si", "perovskite-1.68"))


def energy(weather):
    """Year's energy of a narrow and a wide gap [Wh m-2]."""
    sky = hourly.site_sky(SitePlan("here", (), ()), weather)
    parts = light.plane_parts(sky, PLANE)
    return hourly.plane_year(sky, PLANE, parts, absorbers()).power.sum(axis=1) * weather.interval_s / 3600


@cache
def clean_energy(place):
    return energy(screen.screen(raw(place)))


def day_and_hour(weather):
    local = weather.time + round(weather.utc_offset_h * 3600)
    return local // 86_400 - local[0] // 86_400, local % 86_400 // 3600


def with_columns(weather, **columns):
    return replace(weather, columns={**weather.columns, **columns})


def without_rows(weather, gone):
    columns = {name: values[~gone] for name, values in weather.columns.items()}
    arrays = {name: getattr(weather, name)[~gone] for name in ("time", "flags", "row")}
    return replace(weather, columns=columns, **arrays)


# ---------------------------------------------------------------------------------------------------- the damages


def shifted(weather, minutes, _rng):
    return replace(weather, time=weather.time + 60 * minutes)


def another_zone(weather, hours, _rng):
    return replace(weather, time=weather.time + 3600 * hours)


def stepped(weather, share, rng, name="ghi"):
    day, _ = day_and_hour(weather)
    changed = day >= rng.integers(60, 300)
    return with_columns(weather, **{name: np.where(changed, weather[name] * share, weather[name])})


def stuck(weather, hours, rng, names=LIGHT):
    """A logger hangs from mid-morning on for some hours, on three days."""
    columns = {name: weather[name].copy() for name in names}
    day, hour = day_and_hour(weather)
    for _ in range(3):
        start = int(np.flatnonzero((day == rng.integers(90, 270)) & (hour == 10))[0])
        for values in columns.values():
            values[start : start + hours] = max(values[start], 150.0)
    return with_columns(weather, **columns)


def shaded(weather, share, rng):
    """Something takes a share of all light from seven to ten in the morning for forty days."""
    day, hour = day_and_hour(weather)
    first = rng.integers(100, 220)
    where = (day >= first) & (day < first + 40) & (hour >= 7) & (hour < 10)
    return with_columns(weather, **{name: np.where(where, weather[name] * share, weather[name]) for name in LIGHT})


def gapped(weather, hours, rng):
    """Values missing for some hours, on forty days."""
    gone = np.zeros(len(weather), dtype=bool)
    for start in rng.choice(len(weather) - 10, 40, replace=False):
        gone[start : start + hours] = True
    return with_columns(weather, **{name: np.where(gone, np.nan, weather[name]) for name in (*LIGHT, "temp_air")})


def rows_gone(weather, hours, rng):
    gone = np.zeros(len(weather), dtype=bool)
    for start in rng.choice(np.arange(10, len(weather) - 10), 30, replace=False):
        gone[start : start + hours] = True
    return without_rows(weather, gone)


def summer_time(weather, _size, _rng):
    """Labels an hour late from 29 March to 25 October, as a clock on the wall has them."""
    day, _ = day_and_hour(weather)
    late = (day >= 87) & (day < 297)
    time = np.where(late, weather.time + 3600, weather.time)
    order = np.argsort(time, kind="stable")
    once = np.concatenate([[True], np.diff(time[order]) > 0])
    kept = order[once]
    columns = {name: values[kept] for name, values in weather.columns.items()}
    return replace(weather, time=time[kept], columns=columns, flags=weather.flags[kept], row=weather.row[kept])


def mirrored(weather, which, _rng):
    field = f"{which}_deg"
    return replace(weather, **{field: -getattr(weather, field)})


def one_column_gone(weather, name, _rng):
    return with_columns(weather, **{name: np.full(len(weather), np.nan)})


DAMAGES = [
    ("timestamps", shifted, 20), ("timestamps", shifted, -30), ("timestamps", shifted, 40),
    ("time_zone", another_zone, 2), ("time_zone", another_zone, -3), ("time_zone", another_zone, 7),
    ("level", stepped, 1.10), ("level", stepped, 0.88),
    ("level", lambda w, s, r: stepped(w, s, r, "dni"), 0.9), ("level", lambda w, s, r: stepped(w, s, r, "dhi"), 1.2),
    ("stuck", stuck, 6), ("stuck", lambda w, s, r: stuck(w, s, r, ("ghi",)), 7),
    ("shading", shaded, 0.7), ("shading", shaded, 0.5),
    ("gap", gapped, 1), ("gap", gapped, 3), ("missing_rows", rows_gone, 2),
    ("daylight_saving", summer_time, 60), ("hemisphere", mirrored, "longitude"), ("hemisphere", mirrored, "latitude"),
    ("from_two", one_column_gone, "ghi"), ("from_two", one_column_gone, "dni"), ("from_two", one_column_gone, "dhi"),
]  # fmt: skip


@pytest.mark.parametrize("place", PLACES)
@pytest.mark.parametrize(("kind", "damage", "size"), DAMAGES)
def test_damage_is_mended_or_refused(place, kind, damage, size):
    """Issue: 0.5 % of the year's yield, at these sizes, narrow and wide gap, with a finding that names it."""
    if kind == "hemisphere" and abs(raw(place).longitude_deg if size == "longitude" else 90) < 5:
        size = "latitude"  # near Greenwich the sign of the longitude changes nothing
    spoilt = damage(raw(place), size, np.random.default_rng(7))
    try:
        good = screen.screen(spoilt)
    except InputError:
        return
    assert kind in {finding.kind for finding in good.findings} - {each.kind for each in raw(place).findings}
    np.testing.assert_allclose(energy(good), clean_energy(place), rtol=0.005)


@pytest.mark.parametrize("place", ["amber_mesa", "birchholm"])
def test_a_step_that_leaves_a_quarter_of_the_year(place):
    """Beam a tenth low from 25 March on, a sunny and a dull place: the rest is little, dull days witness nothing."""
    day, _ = day_and_hour(raw(place))
    good = screen.screen(with_columns(raw(place), dni=np.where(day >= 84, 0.9, 1.0) * raw(place)["dni"]))
    assert "level" in {finding.kind for finding in good.findings}
    np.testing.assert_allclose(energy(good), clean_energy(place), rtol=0.005)


@pytest.mark.parametrize("place", [*PLACES, *OTHERS])
def test_a_clean_year_passes_as_it_is(place):
    """No false alarm: nothing but what is known of these files is found, and light stays what it was."""
    weather = raw(place)
    good = screen.screen(weather)
    known = {"night_light", "unfilled", "negative"}
    assert {finding.kind for finding in good.findings} <= known
    assert screen.review(good).verdict == screen.USABLE
    lit = sun.course(weather.time, 3600, weather.latitude_deg, weather.longitude_deg, weather.elevation_m).lit > 0
    for name in LIGHT:
        np.testing.assert_allclose(good[name][lit], weather[name][lit], rtol=1e-9)


def test_what_is_refused_says_why():
    weather = raw("saltmarsh_point")
    gone = np.zeros(len(weather), dtype=bool)
    gone[4000:4200] = True
    with pytest.raises(InputError, match="gaps too long to mend"):
        screen.screen(with_columns(weather, **{name: np.where(gone, np.nan, weather[name]) for name in LIGHT}))
    with pytest.raises(InputError, match="which the file does not have"):
        screen.screen(without_rows(weather, gone))
    good = screen.screen(without_rows(weather, gone), allow_gaps=True)
    assert "left_out" in {finding.kind for finding in good.findings}
    assert len(good) < len(weather)


def test_global_light_alone_tells_its_clock_by_symmetry():
    """Without beam and diffuse light labels 40 min off are found to 5 min, and light is split by Erbs and Driesse."""
    alone = with_columns(raw("greensboro"), **{name: np.full(8760, np.nan) for name in ("dni", "dhi")})
    good = screen.screen(shifted(alone, 40, None))
    kinds = {finding.kind for finding in good.findings}
    assert {"timestamps", "from_global"} <= kinds
    assert abs(int(good.time[0]) - int(raw("greensboro").time[0])) <= 300
    beam = np.sum(good["dni"]) / np.sum(screen.screen(raw("greensboro"))["dni"])
    assert beam == pytest.approx(1.0, abs=0.08)  # what a split of global light is good to over a year


def test_beam_of_another_moment_is_worked_out_anew():
    """Beam made from global less diffuse light with the sun of each label: labels stand, since noon is where it was."""
    weather = screen.screen(raw("saltmarsh_point"))
    later = sun.course(weather.time + 1800, 3600, weather.latitude_deg, weather.longitude_deg, weather.elevation_m)
    horizontal = weather["ghi"] - weather["dhi"]
    wrong = np.where(later.cos_zenith > 0.1, horizontal / np.maximum(later.cos_zenith * later.lit, 0.05), 0.0)
    good = screen.screen(replace(with_columns(weather, dni=np.minimum(wrong, 1300.0)), findings=()))
    assert "beam_of_another_moment" in {finding.kind for finding in good.findings}
    assert np.array_equal(good.time, weather.time)
    np.testing.assert_allclose(energy(good), clean_energy("saltmarsh_point"), rtol=0.005)


REAL = os.environ.get("YIELDSIM_REAL_WEATHER")
#: What is wrong with the clock of real files; of the others nothing.
TRAPS = {
    "ESP_Granada.084190_SWEC.epw": "beam_of_another_moment",
    "PRT_Lisboa.085360_INETI.epw": "timestamps",
}


@pytest.mark.skipif(REAL is None, reason="whole real files: see tests/readers/fetch_weather.py")
def test_clocks_of_real_files():
    """Right labels leave 0.5 to 7 W/m2, the wrong ones 33 to 61."""
    paths = sorted(Path(REAL).glob("*.epw")) + [
        Path(REAL) / f"tmy_45.000_8.000_2005_2023.{kind}" for kind in ("csv", "json")
    ]
    for path in paths:
        good = screen.screen(readers.read(str(path)))
        clock = {"timestamps", "time_zone", "daylight_saving", "hemisphere", "beam_of_another_moment"}
        found = {finding.kind for finding in good.findings} & clock
        assert found == ({TRAPS[path.name]} if path.name in TRAPS else set()), path.name
        sample = timestamps.sampled(good)
        assert timestamps.rms(timestamps.residuals(sample, good, 0)) < 7.0, path.name


def test_a_stated_label_is_not_moved():
    weather = replace(shifted(raw("greensboro"), 30, None), stated=True)
    good = screen.screen(weather)
    (note,) = [finding for finding in good.findings if finding.kind == "timestamps"]
    assert note.done == "kept as the study says"
    assert np.array_equal(good.time, weather.time)


def test_impossible_light_is_taken_out_and_mended():
    weather = raw("saltmarsh_point")
    ghi = weather["ghi"].copy()
    noon = int(np.argmax(ghi))
    ghi[noon] = 2400.0
    good = screen.screen(with_columns(weather, ghi=ghi))
    assert good["ghi"][noon] == pytest.approx(weather["ghi"][noon], rel=0.01)
    assert "beyond_possible" in {finding.kind for finding in good.findings}


def test_another_place_is_refused_or_told_of():
    """The weather of a wet tropical coast under a header of the far north; of a plateau under one of the tropics."""
    with pytest.raises(InputError, match="is the place or the clock another"):
        screen.screen(replace(raw("mangrove_reach"), latitude_deg=68.0, stated=True))
    good = screen.screen(replace(raw("birchholm"), latitude_deg=raw("birchholm").latitude_deg - 12, stated=True))
    assert {"other_place", "ceiling", "closure"} & {finding.kind for finding in good.findings}
    assert screen.review(good).verdict == screen.WITH_CARE


def test_mended_intervals_are_marked():
    from yieldsim.weather import Flag

    good = screen.screen(gapped(raw("saltmarsh_point"), 2, np.random.default_rng(1)))
    assert np.count_nonzero(good.flags & Flag.MENDED_LIGHT) > 10
    assert np.count_nonzero(good.flags & Flag.MENDED_AIR) > 10


def test_smaller_damage_slips_through_by_less_than_it_is(capsys):
    """What is too small to be found, and what it does to the year's energy [%]; printed for the record."""
    slipped = {}
    for name, damage, size in (
        ("label 10 min", shifted, 10), ("step of global 2 %", stepped, 1.02), ("stuck 3 h", stuck, 3),
        ("shade of 15 %", shaded, 0.85), ("all columns 10 % low", all_low, 0.9),
    ):  # fmt: skip
        good = screen.screen(damage(raw("greensboro"), size, np.random.default_rng(3)))
        slipped[name] = 100 * float(np.max(np.abs(energy(good) / clean_energy("greensboro") - 1)))
    with capsys.disabled():
        print("\n", {name: round(value, 2) for name, value in slipped.items()})
    assert slipped["label 10 min"] < 1.5
    assert slipped["stuck 3 h"] < 0.2
    assert slipped["shade of 15 %"] < 0.5


def all_low(weather, share, rng):
    """All three columns drop alike: nothing in the file contradicts it but its clear days."""
    day, _ = day_and_hour(weather)
    changed = day >= rng.integers(60, 300)
    return with_columns(weather, **{name: np.where(changed, weather[name] * share, weather[name]) for name in LIGHT})
