"""Grounds: the library, measured spectra, levels, and snow when the file says so."""

import numpy as np
import pytest

from yieldsim import spectrum
from yieldsim.sky import ground

NAN = np.array([np.nan])


@pytest.mark.parametrize("name", ground.surfaces())
def test_every_surface_of_the_library(name):
    albedo = ground.surface(name)
    assert albedo.shape == spectrum.band_wavelengths().shape
    assert np.all((albedo > 0) & (albedo < 1))
    assert not albedo.flags.writeable


def test_the_library_holds_what_the_study_file_may_name():
    wanted = {
        "grass",
        "dry-soil",
        "wet-soil",
        "sand",
        "gravel",
        "concrete",
        "asphalt",
        "fresh-snow",
        "old-snow",
        "water",
    }
    assert set(ground.surfaces()) == wanted
    with pytest.raises(KeyError):
        ground.surface("lava")


def test_colours():
    """Directions: leaves throw back near infrared and little red, snow the visible and little at 1500 nm."""
    at = {nm: int(np.argmin(np.abs(spectrum.band_wavelengths() - nm))) for nm in (550, 670, 870, 1500)}
    grass, snow = ground.surface("grass"), ground.surface("fresh-snow")
    assert grass[at[870]] > 5 * grass[at[670]]
    assert snow[at[550]] > 0.9 > 0.3 > snow[at[1500]]
    assert np.all(ground.surface("wet-soil") < ground.surface("dry-soil"))
    level = {name: ground.broadband(ground.surface(name)) for name in ground.surfaces()}
    assert (
        level["fresh-snow"] > level["old-snow"] > level["dry-soil"] > level["grass"] > level["asphalt"] > level["water"]
    )


def test_a_grey_spectrum_stays_grey():
    """Closed form: a constant folds to itself; 1e-12."""
    np.testing.assert_allclose(ground.folded(np.array([400.0, 900.0]), np.array([0.3, 0.3])), 0.3, rtol=1e-12)


def test_ends_are_held_and_a_ramp_lies_within_its_band():
    folded = ground.folded(np.array([500.0, 1000.0]), np.array([0.1, 0.6]))
    wavelength, edges = spectrum.band_wavelengths(), spectrum.band_edges()
    np.testing.assert_allclose(folded[wavelength < 490], 0.1, rtol=1e-12)
    np.testing.assert_allclose(folded[wavelength > 1050], 0.6, rtol=1e-12)
    inside = (edges[:-1] >= 500) & (edges[1:] <= 1000)
    low, high = 0.1 + (edges[:-1] - 500) * 1e-3, 0.1 + (edges[1:] - 500) * 1e-3
    assert np.all((folded >= low - 1e-12)[inside] & (folded <= high + 1e-12)[inside])


@pytest.mark.parametrize("name", ["grass", "old-snow", "asphalt"])
def test_scaled_has_the_level_and_stays_possible(name):
    """Definition: broadband level under the reference spectrum, to 1e-12; between 0 and 1 at every wavelength."""
    level = np.array([0.0, 0.05, 0.2, 0.5, 0.9, 1.0])
    found = ground.scaled(ground.surface(name), level)
    np.testing.assert_allclose(ground.broadband(found), level, rtol=1e-12, atol=1e-12)
    assert np.all((found >= 0) & (found <= 1 + 1e-12))
    assert np.all(np.diff(found, axis=0) >= -1e-12)


class TestHours:
    grass = ground.surface("grass")

    def test_file_gives_the_level(self):
        albedo, snow = ground.albedo_of(self.grass, None, np.array([0.1, np.nan, 0.3]), np.full(3, np.nan))
        assert ground.broadband(albedo) == pytest.approx([0.1, float(ground.broadband(self.grass)), 0.3], abs=1e-12)
        assert not snow.any()

    def test_study_stands_above_the_file(self):
        albedo, _ = ground.albedo_of(self.grass, 0.15, np.array([0.1, 0.3]), np.full(2, np.nan))
        assert ground.broadband(albedo) == pytest.approx(0.15, abs=1e-12)

    def test_snow_by_depth_and_by_brightness(self):
        measured = np.array([np.nan, 0.8, 0.3, 0.8, 0.8])
        depth = np.array([10.0, np.nan, 10.0, 0.0, 1.0])
        albedo, snow = ground.albedo_of(self.grass, None, measured, depth)
        assert list(snow) == [True, True, True, False, False]
        old = float(ground.broadband(ground.surface("old-snow")))
        assert ground.broadband(albedo) == pytest.approx([old, 0.8, 0.3, 0.8, 0.8], abs=1e-12)
        visible = spectrum.band_wavelengths() < 700
        assert albedo[1, visible].mean() > 0.9 > albedo[3, visible].mean()


def test_black_and_white_grounds_can_be_scaled():
    """Ends of the range: what reflects nothing stays black at level 0, what reflects all stays white at level 1."""
    bands = np.ones_like(spectrum.band_wavelengths())
    assert np.all(ground.scaled(0 * bands, np.array([0.0])) == 0)
    assert np.all(ground.scaled(bands, np.array([1.0])) == 1)
    np.testing.assert_allclose(ground.scaled(0 * bands, np.array([0.3])), 0.3, rtol=1e-12)
    np.testing.assert_allclose(ground.scaled(bands, np.array([0.3])), 0.3, rtol=1e-12)
