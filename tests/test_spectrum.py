"""The band grid and what is folded onto it, against ASTM G173-03 and closed forms."""

import numpy as np
import pytest

from yieldsim import reference, spectrum
from yieldsim.constants import ELEMENTARY_CHARGE, LIGHT_SPEED, PLANCK
from yieldsim.units import photon_energy_ev, wavelength_nm


def step(gap_ev):
    edge = wavelength_nm(gap_ev)
    return np.array([280.0, edge, edge]), np.array([1.0, 1.0, 0.0])


def test_reference_integral_is_the_published_one():
    """ASTM G173-03 global over 280-4000 nm integrates to 1000.37 W/m2 (the standard's own sum); 0.005 is its last
    digit."""
    assert spectrum.reference_bands().sum() == pytest.approx(1000.37, abs=0.005)


def test_silicon_edge_lies_where_common_practice_puts_it():
    """1.12 eV is 2.7e14 Hz and 1107-1110 nm: common practice, no source; half a last digit as tolerance."""
    assert 1106.5 <= wavelength_nm(1.12) <= 1110.0
    assert pytest.approx(2.7e14, abs=0.05e14) == 1.12 * ELEMENTARY_CHARGE / PLANCK


@pytest.mark.parametrize(("gap_ev", "published"), [(1.12, 43.81), (1.34, 35.03), (1.42, 32.05), (1.60, 25.47)])
def test_photocurrent_of_a_step(gap_ev, published):
    """Detailed-balance currents [mA/cm2] under G173, found independently with a fine-grid sum; 0.1 % is their last
    digit."""
    current = spectrum.photocurrent(spectrum.reference_bands(), spectrum.band_yield(*step(gap_ev)))
    assert current / 10 == pytest.approx(published, rel=1e-3)


@pytest.mark.parametrize("gap_ev", np.linspace(0.7, 2.2, 16))
def test_band_sum_equals_fine_grid_integral(gap_ev):
    """Closed form: a step's current is the integral of q lambda/(hc) G over the standard's own table up to the gap."""
    table = reference.table("astm_g173_03")
    fine = np.unique(np.append(table["wavelength_nm"], wavelength_nm(gap_ev)))
    light = np.interp(fine, table["wavelength_nm"], table["global"])
    inside = fine <= wavelength_nm(gap_ev)
    charge = ELEMENTARY_CHARGE * fine * 1e-9 / (PLANCK * LIGHT_SPEED) * light
    expected = np.trapezoid(charge[inside], fine[inside])
    current = spectrum.photocurrent(spectrum.reference_bands(), spectrum.band_yield(*step(gap_ev)))
    # The product of two straight pieces is a parabola; the trapezoid overlooks its bow, below 1e-5 on steps of 5 nm.
    assert current == pytest.approx(expected, rel=2e-5)


def test_narrow_line_through_unit_response_gives_charge_per_photon():
    """Closed form: light in a narrow line at 800 nm yields q E lambda/(hc)."""
    line = np.array([799.9, 800.0, 800.1]), np.array([0.0, 10.0, 0.0])
    ends = np.array([280.0, 4000.0])
    charge = spectrum.integrate_product_bands(line, (ends, ends)).sum() * 1e-9
    expected = 1.0 * 800e-9
    assert charge == pytest.approx(expected, rel=1e-9)


@pytest.mark.parametrize("wavelength", [281.0, 617.0, 1108.0, 3999.0])
def test_bands_split_and_add(wavelength):
    """Invariant: a function cut in two at any wavelength gives bands that add up to those of the whole."""
    x, y = np.array([280.0, 900.0, 4000.0]), np.array([1.0, 3.0, 0.5])
    at = np.interp(wavelength, x, y)
    left = np.append(x[x < wavelength], wavelength), np.append(y[x < wavelength], at)
    right = np.append(wavelength, x[x > wavelength]), np.append(at, y[x > wavelength])
    whole = spectrum.integrate_bands(x, y)
    parts = spectrum.integrate_bands(*left) + spectrum.integrate_bands(*right)
    np.testing.assert_allclose(parts, whole, rtol=1e-12, atol=1e-12)  # rounding only


def test_steps_are_honoured():
    """Closed form: a step at 500 nm cuts the band it falls into."""
    bands = spectrum.integrate_bands(np.array([280.0, 500.0, 500.0, 4000.0]), np.array([0.0, 0.0, 1.0, 1.0]))
    assert bands.sum() == pytest.approx(3500.0, rel=1e-12)
    assert np.all(bands[spectrum.band_edges()[1:] <= 500] == 0)


def test_four_functions_are_refused():
    line = np.array([300.0, 4000.0]), np.ones(2)
    with pytest.raises(ValueError, match="at most 3"):
        spectrum.integrate_product_bands(line, line, line, line)


def test_photocurrent_takes_any_leading_shape():
    light = np.ones((2, 3, 122))
    yields = np.stack([spectrum.band_yield(*step(1.12)), spectrum.band_yield(*step(1.7))])
    assert spectrum.photocurrent(light, yields).shape == (2, 3, 2)
    assert spectrum.photocurrent(light[0, 0], yields[0]).shape == ()
    assert spectrum.photocurrent(light[0, 0], yields)[1] == pytest.approx(spectrum.photocurrent(light[0, 0], yields[1]))


def test_average_photon_energy_of_the_reference():
    """Direction and size: 1.88 eV over 350-1050 nm is often quoted; over all bands it is lower. Here: energy over
    photons."""
    table = reference.table("astm_g173_03")
    w, g = table["wavelength_nm"], table["global"]
    expected = np.trapezoid(g, w) / np.trapezoid(g / photon_energy_ev(w), w)
    assert spectrum.average_photon_energy(spectrum.reference_bands()) == pytest.approx(
        expected, rel=1e-4
    )  # bow of cells
    assert np.isnan(spectrum.average_photon_energy(np.zeros(122)))


def test_reference_tables_say_where_they_come_from():
    for name in ("astm_g173_03", "bird_riordan_1984", "water_segelstein_1981"):
        header = reference.table(name).header
        assert "Source:" in header
        assert "Licence:" in header
        assert "Obtained:" in header
