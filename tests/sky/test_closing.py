"""Hours closed on measured light: sums, haze and cloud given back, and nothing invented."""

from dataclasses import replace

import numpy as np
import pytest

from yieldsim import reference
from yieldsim.sky import closing, column, kernel
from yieldsim.sky.atmosphere import AOD_RANGE
from yieldsim.sky.sun import relative_air_mass


def some_air(n, seed=3, **changes):
    rng = np.random.default_rng(seed)
    fields = {
        "cos_zenith": rng.uniform(0.05, 1.0, n), "pressure": np.full(n, 98000.0), "water_cm": rng.uniform(0.3, 5.0, n),
        "ozone_atm_cm": np.full(n, 0.3), "aod500": np.full(n, 0.12), "angstrom_exponent": np.full(n, 1.2),
        "albedo": np.full(n, 0.2),
    }  # fmt: skip
    return column.Air(**{**fields, **changes})


def light_of(air, cloud, open_share):
    """Measured beam and diffuse light of a sky with a cloud over a share of each hour."""
    optics = column.optics()
    top = optics.extraterrestrial * optics.factor
    clear, cloudy = column.transmit(air, np.zeros(len(cloud))), column.transmit(air, cloud)
    dni = (clear.beam @ top) * open_share
    dhi = ((clear.total - clear.beam) @ top) * air.cos_zenith * open_share
    return dni, dhi + (cloudy.total @ top) * air.cos_zenith * (1 - open_share)


def close(air, dni, dhi, **options):
    n = len(dni)
    return closing.close(air, np.ones(n), dni, dhi, np.ones(n, dtype=bool), **options)


def test_sums_are_the_measured_light():
    """Invariant: band sums equal beam and diffuse light to 1e-6 relative, for anything a file may hold."""
    rng = np.random.default_rng(5)
    air = some_air(600)
    dni = rng.uniform(0, 1100, 600) * (rng.random(600) < 0.7)
    dhi = rng.uniform(0, 600, 600) * (rng.random(600) < 0.95)
    sky = close(air, dni, dhi)
    np.testing.assert_allclose(sky.beam.sum(axis=1), dni, rtol=1e-6, atol=1e-9)
    np.testing.assert_allclose(sky.diffuse.sum(axis=1), dhi, rtol=1e-6, atol=1e-9)
    assert np.all(sky.beam >= 0)
    assert np.all(sky.diffuse >= 0)


def test_haze_of_clear_hours_comes_back():
    """A cloudless file made by the column gives its haze back: 1e-6 is Newton's last step."""
    rng = np.random.default_rng(2)
    truth = np.repeat(0.12 * 2 ** rng.uniform(-1, 1, 60), 10)
    air = some_air(600)
    dni, dhi = light_of(air.with_aod500(truth), np.zeros(600), np.ones(600))
    sky = close(air, dni, dhi)
    assert sky.clear.mean() > 0.95
    np.testing.assert_allclose(sky.aod500[sky.clear], truth[sky.clear], rtol=1e-6)


def test_cloud_depth_comes_back():
    """Overcast hours made by the column give their cloud back: the search stops at 2e-4 of transmittance."""
    rng = np.random.default_rng(4)
    cloud = rng.uniform(2.0, 80.0, 300)
    air = some_air(300, cos_zenith=rng.uniform(0.2, 1.0, 300))
    sky = close(air, *light_of(air, cloud, np.zeros(300)))
    np.testing.assert_allclose(sky.cloud_depth, cloud, rtol=0.01)
    assert np.all(sky.open_share == 0)


def test_cloud_over_snow_comes_back():
    """A bright ground under thin cloud receives more than under none; the search still finds the thicker cloud that
    gives what was measured, not the thickest of all."""
    rng = np.random.default_rng(17)
    cloud = rng.uniform(3.0, 40.0, 200)
    snow = np.repeat(reference.table("ground_albedo")["fresh_snow"][None], 200, axis=0)
    air = some_air(200, cos_zenith=rng.uniform(0.4, 0.9, 200), albedo=snow)
    sky = close(air, *light_of(air, cloud, np.zeros(200)))
    np.testing.assert_allclose(sky.cloud_depth, cloud, rtol=0.03)


def test_broken_cloud_is_split_into_open_and_hidden():
    rng = np.random.default_rng(6)
    share = rng.uniform(0.2, 0.8, 200)
    air = some_air(200, cos_zenith=np.full(200, 0.7))
    sky = close(air, *light_of(air, np.full(200, 15.0), share), haze_hourly=False)
    np.testing.assert_allclose(sky.open_share, share, rtol=1e-9)
    np.testing.assert_allclose(sky.cloud_depth, 15.0, rtol=0.02)


def test_fixed_haze_keeps_the_given_one():
    air = some_air(50)
    sky = close(air, *light_of(air.with_aod500(np.full(50, 0.3)), np.zeros(50), np.ones(50)), haze_hourly=False)
    np.testing.assert_array_equal(sky.aod500, air.aod500)
    assert not sky.clear.any()


def test_lone_hours_are_not_called_clear():
    """An hour whose neighbours disagree may be thin cloud: it keeps the prior unless it is brighter than that
    allows."""
    air = some_air(3, cos_zenith=np.full(3, 0.7))
    dni, dhi = light_of(air.with_aod500(np.array([0.9, 0.15, 0.9])), np.zeros(3), np.ones(3))
    sky = close(air, dni, dhi)
    assert not sky.clear.any()


def test_darkness_stays_dark():
    air = some_air(4)
    sky = close(air, np.zeros(4), np.zeros(4))
    assert np.all(sky.beam == 0)
    assert np.all(sky.diffuse == 0)


@pytest.mark.parametrize("n", [1, 255, 256, 257])
def test_block_size_changes_nothing(n):
    air = some_air(600)
    dni, dhi = light_of(air, np.full(600, 8.0), np.full(600, 0.5))
    whole = close(air, dni, dhi, haze_hourly=False)
    part = close(air.only(slice(0, n)), dni[:n], dhi[:n], haze_hourly=False)
    np.testing.assert_allclose(part.diffuse, whole.diffuse[:n], rtol=1e-9, atol=1e-12)


def test_low_hazy_sun_on_the_horizon_is_finite():
    """Every band of the clear beam lies below the smallest number; its shape is still formed."""
    air = some_air(2, cos_zenith=np.full(2, 0.001), aod500=np.full(2, 3.0))
    sky = close(air, np.array([5.0, 0.0]), np.array([3.0, 2.0]), haze_hourly=False)
    assert np.all(np.isfinite(sky.beam))
    assert sky.beam[0].sum() == pytest.approx(5.0)


def test_thin_cloud_is_not_taken_for_haze():
    """Thin cloud that changes from hour to hour scatters as thick haze would: it stays cloud, haze stays the
    expected."""
    rng = np.random.default_rng(12)
    air = some_air(300, cos_zenith=np.full(300, 0.6))
    sky = close(air, *light_of(air, rng.uniform(1.0, 4.0, 300), rng.uniform(0.1, 0.5, 300)))
    assert np.mean(sky.aod500 > 0.4) < 0.02


def test_steady_dust_is_believed():
    """A day of thick haze that holds still is haze, however much more it is than expected."""
    air = some_air(24, cos_zenith=np.full(24, 0.6))
    sky = close(air, *light_of(air.with_aod500(np.full(24, 1.2)), np.zeros(24), np.ones(24)))
    np.testing.assert_allclose(sky.aod500[1:-1], 1.2, rtol=1e-6)


def test_few_bands_stand_for_all():
    """Sums over the few bands are those over all: what the header of the table says, on skies it was not fitted to."""
    rng = np.random.default_rng(21)
    air = some_air(400, albedo=np.repeat(rng.uniform(0.05, 0.8, (400, 1)), 122, axis=1))
    few, cloud = closing.few_bands(column.optics()), rng.choice([0.0, 1.0, 10.0, 60.0], 400)
    part = column.transmit(closing.on_few_bands(air), cloud, few).total @ (few.extraterrestrial * few.factor)
    whole = column.transmit(air, cloud).total @ (column.optics().extraterrestrial * column.optics().factor)
    assert np.sqrt(np.mean((part / whole - 1) ** 2)) < 1e-3
    assert np.max(np.abs(part / whole - 1)) < 0.01


def test_other_bands_than_usual_are_all_used():
    """A grid of other bands has no table of few: the search takes them all, however many."""
    optics, air = column.optics(), some_air(40)
    dni, dhi = light_of(air, np.full(40, 9.0), np.full(40, 0.3))
    for n_band in (121, 100):
        part = optics.replace(**{name: getattr(optics, name)[:n_band] for name in column.Optics.__slots__})
        sky = close(air, dni, dhi, haze_hourly=False, constants=part)
        np.testing.assert_allclose(sky.diffuse.sum(axis=1), dhi, rtol=1e-9)
        assert np.all(sky.cloud_depth > 0)


def plainly_closed(air, dni, dhi, optics):
    """Beam, diffuse light and cloud depth by plain numpy, halving instead of chords, haze as given."""
    n = len(dni)
    top, level = optics.extraterrestrial * optics.factor, air.cos_zenith
    clear = column.transmit_plain(air, np.zeros(n), optics)
    direct, light = clear.beam * top, clear.total * top
    share = np.minimum(1.0, dni / direct.sum(axis=1))
    few, few_air = closing.few_bands(optics), closing.on_few_bands(air)

    def bright(cloud):
        return column.transmit_plain(few_air, cloud, few).total @ (few.extraterrestrial * few.factor)

    whole = bright(np.zeros(n))
    wanted = (dni + dhi / level - share * whole) / np.maximum((1 - share) * whole, 1e-12)
    low, high = np.zeros(n), np.full(n, kernel.CLOUD_DEPTH_MAX)
    for _ in range(60):
        middle = (low + high) / 2
        dark = bright(middle) / whole < np.maximum(wanted, 1e-3)
        low, high = np.where(dark, low, middle), np.where(dark, middle, high)
    depth = np.where((wanted < 1 - kernel.CLOUD_TOLERANCE) & (1 - share > 1e-3) & (dhi > 0), high, 0.0)
    return share, depth, direct / direct.sum(axis=1, keepdims=True) * dni[:, None], (light - direct) * level[:, None]


def bands(which):
    """All bands, or so few that the search can be run without compiling."""
    if which == "all":
        return column.optics()
    bare, chosen = column.bare_optics(), [8, 25, 40, 41, 70, 100]
    return bare.replace(**{name: getattr(bare, name)[chosen] for name in column.Optics.__slots__})


def assert_plainly_split(air, dni, dhi, optics):
    """The compiled search and split against halving and plain numpy: the same cloud to its tolerance, and with that
    cloud the same light to 1e-9 of the sun."""
    sky = close(air, dni, dhi, haze_hourly=False, constants=optics)
    share, depth, beam, clear_diffuse = plainly_closed(air, dni, dhi, optics)
    np.testing.assert_allclose(sky.open_share, share, rtol=1e-9)
    np.testing.assert_allclose(sky.beam, beam, atol=1e-6)
    assert np.array_equal(sky.cloud_depth > 0, depth > 0)
    few, few_air = closing.few_bands(optics), closing.on_few_bands(air)
    weight = few.extraterrestrial * few.factor
    found, halved = (column.transmit_plain(few_air, each, few).total @ weight for each in (sky.cloud_depth, depth))
    np.testing.assert_allclose(found, halved, rtol=kernel.CLOUD_TOLERANCE)
    assert (depth > 0).mean() > 1 / 3
    clouded = column.transmit_plain(air, sky.cloud_depth, optics).total * optics.extraterrestrial * optics.factor
    given = clear_diffuse * share[:, None]
    rest = np.where(1 - share > 1e-3, np.maximum(dhi - given.sum(axis=1), 0.0), 0.0) / clouded.sum(axis=1)
    expected = given + clouded * rest[:, None]
    light = expected.sum(axis=1)
    expected *= np.divide(dhi, light, out=np.zeros(len(light)), where=light > 0)[:, None]
    np.testing.assert_allclose(sky.diffuse, expected, atol=1e-6)


def test_split_by_plain_numpy():
    rng = np.random.default_rng(15)
    air = some_air(300, cos_zenith=rng.uniform(0.1, 1.0, 300))
    dni = rng.uniform(0, 900, 300) * rng.choice([0.0, 1.0], 300)
    assert_plainly_split(air, dni, rng.uniform(0, 500, 300), column.optics())


@pytest.mark.parametrize("per_band", [False, True])
def test_split_of_some_bands_by_plain_numpy(per_band):
    """Beam alone, no light but a little, dim and bright diffuse light under no beam, broken cloud; grey ground and
    coloured."""
    rng, n, optics = np.random.default_rng(16), 24, bands("some")
    sun = (optics.extraterrestrial * optics.factor).sum()
    air = some_air(n, cos_zenith=rng.uniform(0.2, 1.0, n), aod500=rng.uniform(0.02, 0.4, n))
    if per_band:
        air = replace(air, albedo=rng.uniform(0.0, 0.5, (n, 6)))
    dni = sun * np.resize([0.0, 0.05, 0.0, 0.3, 0.5, 2.0], n)
    dhi = sun * np.concatenate([[0.0, 1e-4, 1e-3], rng.uniform(0.02, 0.3, n - 3)])
    assert_plainly_split(air, dni, dhi, optics)


@pytest.mark.parametrize(("which", "n"), [("all", 200), ("some", 24)])
def test_haze_by_plain_newton(which, n):
    """The compiled search against Newton's steps in plain numpy: the same haze to 1e-9, within its bounds."""
    air, optics = some_air(n), bands(which)
    sun = (optics.extraterrestrial * optics.factor).sum()
    dni = np.random.default_rng(3).uniform(0.001, 0.75, n) * sun
    passed = column.transmit_plain(air.with_aod500(np.zeros(n)), np.zeros(n), optics).beam
    passed = passed * optics.extraterrestrial * optics.factor
    slope = np.exp(-air.angstrom_exponent[:, None] * optics.haze_shape)
    slope *= relative_air_mass(air.cos_zenith)[:, None]
    haze = air.aod500.copy()
    for _ in range(50):
        light = passed * np.exp(-haze[:, None] * slope)
        total = np.maximum(light.sum(axis=1), 1e-300)
        steep = np.maximum((light * slope).sum(axis=1) / total, 1e-6)
        haze = np.clip(haze + np.log(total / dni) / steep, *AOD_RANGE)
    assert np.mean((haze > AOD_RANGE[0]) & (haze < AOD_RANGE[1])) > 0.5
    np.testing.assert_allclose(closing.beam_haze(air, np.ones(n), dni, optics), haze, rtol=1e-9)


class TestMonthlyHaze:
    """A year of haze that scatters daily, with cloud and noise, gives its months back."""

    def year(self, rng, latitude=40.0):
        from yieldsim.sky import sun

        time = np.arange(1_704_067_200, 1_704_067_200 + 365 * 86400, 3600, dtype=np.int64)
        course = sun.course(time, 3600, latitude, 0.0)
        lit = course.lit > 0
        course, time = course.only(lit), time[lit]
        month = time.astype("datetime64[s]").astype("datetime64[M]").astype(int) % 12
        day = (time // 86400).astype(np.intp)
        truth = np.array([0.08, 0.09, 0.12, 0.16, 0.2, 0.26, 0.3, 0.28, 0.2, 0.14, 0.1, 0.07])[month]
        scatter = np.exp(0.3 * rng.standard_normal(366))[day - day[0]]
        n = len(time)
        air = some_air(
            n,
            cos_zenith=course.cos_zenith,
            water_cm=np.full(n, 1.5),
            aod500=truth * scatter,
            pressure=np.full(n, 101325.0),
        )
        overcast = (rng.random(366) < 0.5)[day - day[0]]
        share = np.where(overcast, rng.uniform(0, 0.7, n), 1.0)
        return time, month, day, course, air, truth, share

    def closed(self, time, month, day, course, air, dni, dhi):
        prior = air.with_aod500(np.full(len(dni), 0.15))
        follows = np.diff(time, prepend=time[0] - 1) == 3600
        return closing.close(
            prior, course.earth_sun, dni / course.lit, dhi / course.lit, follows, calendar=(day, month.astype(np.intp))
        )

    def median(self, air, month, day, open_share):
        """Median haze of each month's days with sun: what half a month of cloud hides no method can know."""
        sunny = open_share == 1.0
        days = [np.unique(day[(month == m) & sunny]) for m in range(12)]
        return np.array([np.median([air.aod500[day == d][0] for d in numbers]) for numbers in days])

    def test_file_made_by_the_column(self):
        """Within max(0.02, 15 %) of each month's median over its sunny days, with 2 % of noise in both irradiances
        and half the days cloudy."""
        rng = np.random.default_rng(8)
        time, month, day, course, air, _, share = self.year(rng)
        dni, dhi = light_of(air, np.full(len(time), 12.0), share)
        noise = 1 + 0.02 * rng.standard_normal((2, len(time)))
        dni, dhi = dni * course.earth_sun * course.lit * noise[0], dhi * course.earth_sun * course.lit * noise[1]
        found = self.closed(time, month, day, course, air, dni, dhi)
        truth = self.median(air, month, day, share)
        assert np.all(found.clear_days >= 5)
        assert np.all(np.abs(found.monthly_aod500 - truth) <= np.maximum(0.02, 0.15 * truth))

    def test_file_made_by_bird(self):
        """Reference: pvlib.clearsky.bird, an independent broadband model: within max(0.04, 30 %), since the two
        differ by a few
        percent of beam under the same haze."""
        from pvlib import clearsky

        from yieldsim.sky import sun

        rng = np.random.default_rng(9)
        time, month, day, course, air, _, _ = self.year(rng)
        bird = clearsky.bird(
            np.degrees(np.arccos(course.cos_zenith)), sun.relative_air_mass(course.cos_zenith),
            air.aod500 * (380 / 500) ** -1.2, air.aod500, 1.5, 0.3, 101325.0,
            1361.0 * course.earth_sun, albedo=0.2,
        )  # fmt: skip
        found = self.closed(
            time, month, day, course, air, np.asarray(bird["dni"]) * course.lit, np.asarray(bird["dhi"]) * course.lit
        )
        truth = self.median(air, month, day, np.ones(len(time)))
        assert np.all(found.clear_days >= 5)
        assert np.all(np.abs(found.monthly_aod500 - truth) <= np.maximum(0.04, 0.3 * truth))

    def test_a_month_without_clear_days_keeps_the_prior(self):
        prior, dark = np.full(40, 0.2), np.zeros(40, dtype=bool)
        day, month = np.repeat(np.arange(4), 10), np.repeat([0, 1], 20)
        expected, days = closing.monthly_haze(prior * 2, prior, dark, day, month)
        np.testing.assert_allclose(expected[:2], 0.2)
        assert np.all(np.isnan(expected[2:]))
        assert np.all(days == 0)


def test_the_middle_of_three_hours_may_be_steady():
    """Three are the fewest that tell; less tell nothing."""
    assert list(closing.steady(np.full(3, 0.2), np.ones(3, dtype=bool))) == [False, True, False]
    assert not closing.steady(np.full(2, 0.2), np.ones(2, dtype=bool)).any()
