"""A year in parts is the year in one piece."""

import weakref
from dataclasses import replace

import numpy as np
import pytest

from yieldsim.config import library
from yieldsim.study import annual, hourly, parts, piece
from yieldsim.study.book import Book
from yieldsim.study.plan import GapSweepPlan, LossesPlan, MountingPlan, SitePlan, StudyPlan
from yieldsim.weather import cut

TILTED = MountingPlan("fixed", "fixed", 30.0, 180.0)


def plan(keep=frozenset()):
    absorbers = tuple(library.entry(name).absorber for name in ("c-si", "perovskite-1.68"))
    sweep = GapSweepPlan((1.1, 1.3), {"as c-si": (absorbers[0], absorbers[0])})
    site = SitePlan("here", (), (TILTED, replace(TILTED, name="steep", tilt_deg=60.0)))
    losses = LossesPlan({"soiling": (0.02,) * 12, "wiring": tuple(0.01 + 0.001 * month for month in range(12))})
    return StudyPlan("s", (site,), absorbers, "c-si", sweep, losses, keep, {})


@pytest.mark.parametrize("most", [3000, 1000, 10])
def test_parts_are_whole_months_and_miss_nothing(greensboro_weather, most):
    found = list(parts.parts(greensboro_weather, most))
    assert np.array_equal(np.concatenate([part.time for part in found]), greensboro_weather.time)
    months = [set(np.unique(parts.local_month_and_day(part)[0])) for part in found]
    assert sum(len(each) for each in months) == 12  # no month is in two parts
    assert all(len(part) <= max(most, 744) for part in found)
    assert len(found) >= len(greensboro_weather) / max(most, 744)


def test_a_year_that_fits_stays_whole(greensboro_weather):
    (only,) = parts.parts(greensboro_weather)
    assert only is greensboro_weather


def compute(years, tmp_path, monkeypatch, most=None, keep=frozenset()):
    if most is not None:
        monkeypatch.setattr(parts, "MOST", most)
        monkeypatch.setattr(piece, "parts", lambda weather: parts.parts(weather, most))
    study = plan(keep)
    return piece.compute(study, study.sites[0], iter(years), tmp_path)


def test_the_year_in_parts(greensboro_weather, tmp_path, monkeypatch):
    """Invariant: cut into months, every table is that of the whole year. 0.02 %: the hour on either side of a cut does
    not know its neighbour, which tells haze from cloud."""
    whole = compute([greensboro_weather], tmp_path / "a", monkeypatch, keep=frozenset({"hourly", "spectra"}))
    pieces = compute([greensboro_weather], tmp_path / "b", monkeypatch, 800, frozenset({"hourly", "spectra"}))
    assert set(whole) == set(pieces)
    for table in ("annual", "monthly", "ledger", "gap_sweep"):
        assert len(whole[table]) == len(pieces[table])
        for one, two in zip(whole[table], pieces[table], strict=True):
            assert list(one) == list(two)
            for name, value in one.items():
                if isinstance(value, float):
                    assert two[name] == pytest.approx(value, rel=2e-4, abs=2e-3), (table, name)
                else:
                    assert two[name] == value
    import xarray as xr

    for kind in ("hourly", "spectra"):
        with (
            xr.open_dataset(tmp_path / "a" / kind / "here.nc") as one,
            xr.open_dataset(tmp_path / "b" / kind / "here.nc") as two,
        ):
            assert one.sizes == two.sizes
            assert one.attrs["site"] == two.attrs["site"]
            assert np.array_equal(one["time"], two["time"])


def test_several_years_are_their_mean(greensboro_weather, sand_point, tmp_path, monkeypatch):
    """Definition: annual is the mean of the years' sums; yearly has each; ledgers and sweeps are means too."""
    second = replace(
        greensboro_weather,
        time=greensboro_weather.time + 365 * 86400,
        columns={
            name: values * (0.9 if name in ("ghi", "dni", "dhi") else 1.0)
            for name, values in greensboro_weather.columns.items()
        },
    )
    alone = [compute([year], tmp_path / str(i), monkeypatch) for i, year in enumerate((greensboro_weather, second))]
    both = compute([greensboro_weather, second], tmp_path / "both", monkeypatch)
    assert alone[0]["yearly"] == []
    assert [row["year"] for row in both["yearly"] if row["absorber"] == both["yearly"][0]["absorber"]] == [
        2002,
        2003,
    ] * 2
    for table, measure in (("annual", "poa_kwh_m2"), ("ledger", "thermalised"), ("gap_sweep", "energy_kwh_m2")):
        for i, row in enumerate(both[table]):
            assert row[measure] == pytest.approx(np.mean([one[table][i][measure] for one in alone]), rel=1e-12)


def following(weather, number):
    return replace(weather, time=weather.time + number * 365 * 86400)


def test_hours_are_on_disk_before_the_next_year_is_read(greensboro_weather, tmp_path, monkeypatch):
    def years():
        yield greensboro_weather
        assert (tmp_path / "hourly" / "here.nc").is_file()
        yield following(greensboro_weather, 1)

    compute(years(), tmp_path, monkeypatch, keep=frozenset({"hourly"}))


def test_a_book_of_one_year_is_its_sums(greensboro):
    book = Book()
    book.add(greensboro.sums, new_year=True)
    assert book.mean() is greensboro.sums
    book.add(greensboro.sums, new_year=False)
    twice = annual.added(greensboro.sums, greensboro.sums)
    np.testing.assert_array_equal(book.mean().charge, twice.charge)
    assert book.mean_rows("gap_sweep") == []


def test_no_year_is_held_while_the_next_is_read(greensboro_weather, tmp_path, monkeypatch):
    """Memory does not grow with the years: when the next is asked for, nothing of those before is left, light least."""
    stretch = cut(greensboro_weather, 0, 1416)  # January and February
    seen: list[weakref.ref] = []
    skies: list[weakref.ref] = []

    def years(count):
        for number in range(count):
            assert not any(ref() is not None for ref in (*seen, *skies)), number
            columns = {name: values.copy() for name, values in stretch.columns.items()}
            year = replace(stretch, time=stretch.time + number * 365 * 86_400, columns=columns)
            seen.extend(weakref.ref(values) for values in (year.time, *columns.values()))
            del columns
            yield year
            del year

    def site_sky(*given):
        sky = hourly.site_sky(*given)
        skies.extend(weakref.ref(light) for light in (sky.sky.beam, sky.sky.diffuse))
        return sky

    monkeypatch.setattr(piece, "site_sky", site_sky)
    monkeypatch.setattr(piece, "parts", lambda weather: parts.parts(weather, 800))
    study = replace(plan(frozenset({"hourly", "spectra"})), gap_sweep=None)
    piece.compute(study, study.sites[0], years(3), tmp_path)
    assert len(skies) == 3 * 2 * 2  # years, months, beam and diffuse
