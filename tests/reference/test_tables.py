"""The published tables: each says where it comes from, and the calculated ones obey what any light must obey."""

from importlib import resources

import numpy as np
import pytest

from yieldsim import reference, spectrum

NAMES = sorted(file.name[:-4] for file in resources.files("yieldsim.reference").iterdir() if file.name.endswith(".csv"))


@pytest.mark.parametrize("name", NAMES)
def test_header_says_source_licence_and_script(name):
    header = reference.table(name).header
    assert "icence:" in header
    assert "Units:" in header
    assert "Obtained: tests/reference/make_" in header


@pytest.mark.parametrize("name", NAMES)
def test_every_cell_is_a_number(name):
    for column, values in reference.table(name).columns.items():
        assert np.isfinite(values).all(), column


def test_single_layers_lose_nothing_without_absorption():
    table = reference.table("discrete_ordinates_layer")
    whole = table["single_scattering_albedo"] == 1
    total = (table["direct"] + table["diffuse"] + table["up"])[whole]
    assert np.abs(total - 1).max() < 5e-7  # seven digits are printed; the solver was given an albedo of 1 - 1e-10


def test_beam_of_the_layers_follows_the_law_of_absorption():
    table = reference.table("discrete_ordinates_layer")
    beam = np.exp(-table["depth"] / np.cos(np.radians(table["zenith_deg"])))
    assert np.abs(table["direct"] - beam).max() < 1e-7  # seven digits are printed


def test_columns_of_air_never_give_back_more_light_than_they_get():
    table = reference.table("discrete_ordinates")
    down = table["direct"] + table["diffuse"]
    absorbed = 1 - table["up"] - (1 - table["albedo"]) * down
    assert absorbed.min() > 0  # haze and cloud absorb a little at every wavelength


def test_sixs_beam_is_dimmed_by_scattering_alone_where_no_gas_absorbs():
    air, light = reference.table("sixs_conditions"), reference.table("sixs_clear_skies")
    haze = reference.table("sixs_haze_optics")
    band = list(spectrum.band_wavelengths()).index(450.0)
    direct = light["direct"].reshape(len(air["condition"]), -1)[:, band]
    rayleigh = air["rayleigh550"] * (550.0 / 450.0) ** 4.09  # between the two, Bucholtz (1995), from memory
    depth = (rayleigh + air["aod550"] * haze["extinction"][band]) / np.cos(np.radians(air["zenith_deg"]))
    # 1 %: rayleigh550 has four digits, ozone takes 0.1 % at 450 nm, and the band is 10 nm wide
    assert np.abs(direct / np.exp(-depth) - 1).max() < 0.01


def test_sixs_skies_pass_no_more_light_than_comes():
    light = reference.table("sixs_clear_skies")
    assert light["direct"].min() >= 0
    assert light["diffuse"].min() >= 0
    assert (light["direct"] + light["diffuse"]).max() < 1


@pytest.mark.parametrize("name", ["sixs_gas_transmittance", "hgrs_gas_transmittance"])
def test_longer_paths_pass_less(name):
    table = reference.table(name)
    for gas in np.unique(table["gas"]):
        for band in np.unique(table["wavelength_nm"]):
            chosen = (table["gas"] == gas) & (table["wavelength_nm"] == band)
            order = np.argsort(table["path"][chosen])
            assert np.all(np.diff(table["transmittance"][chosen][order]) <= 0), (gas, band)


def test_ground_albedos_are_what_eyes_and_literature_say():
    table = reference.table("ground_albedo")
    sun = spectrum.reference_bands()
    broad = {name: values @ sun / sun.sum() for name, values in table.columns.items() if name != "wavelength_nm"}
    # Ranges of broadband albedo common in the trade (common practice, no source).
    ranges = {
        "grass": (0.15, 0.26),
        "dry_soil": (0.2, 0.35),
        "wet_soil": (0.08, 0.2),
        "sand": (0.2, 0.45),
        "gravel": (0.15, 0.3),
        "concrete": (0.2, 0.4),
        "asphalt": (0.05, 0.18),
        "fresh_snow": (0.8, 0.95),
        "old_snow": (0.5, 0.8),
        "water": (0.03, 0.1),
    }
    assert set(ranges) == set(broad)
    for name, (low, high) in ranges.items():
        assert low < broad[name] < high, name
    assert np.all(table["wet_soil"] < table["dry_soil"])  # every colour darkens
    at = {nm: int(np.argmin(np.abs(table["wavelength_nm"] - nm))) for nm in (667.6, 780.0)}
    assert table["grass"][at[780.0]] > 5 * table["grass"][at[667.6]]  # the red edge of leaves
