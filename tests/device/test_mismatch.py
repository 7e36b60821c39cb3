"""Spectral factors by the bands' fold against pvlib's spectral mismatch of the same exported spectra."""

import numpy as np
import pandas as pd
import pytest
from pvlib.spectrum import calc_spectral_mismatch_field

from yieldsim.config import library
from yieldsim.constants import PHOTON_EV_NM
from yieldsim.device.fold import folded
from yieldsim.device.response import at
from yieldsim.spectrum import band_edges, band_wavelengths, band_widths, reference_bands, reference_spectrum

CLEAR_TO_RED = np.linspace(-0.6, 0.6, 7)
SINGLE = [name for name in library.names() if len(library.entry(name).absorber.junctions) == 1]


def spectra():
    """Return band spectra from blue to red, (7, 122) [W m-2]."""
    return reference_bands() * (band_wavelengths() / 700) ** CLEAR_TO_RED[:, None]


def ours(response):
    light = spectra()
    currents = light @ folded(response) / (reference_bands() @ folded(response))
    return currents / (light.sum(axis=1) / reference_bands().sum())


def theirs(response, wavelength, light, reference):
    """Return pvlib's factor; spectral response [A/W] and spectra [W m-2 nm-1] on the same wavelengths."""
    sensitivity = pd.Series(at(response, wavelength) * wavelength / PHOTON_EV_NM, index=wavelength)
    sun = pd.DataFrame(light, columns=wavelength)
    return calc_spectral_mismatch_field(sensitivity, sun, pd.Series(reference, index=wavelength)).to_numpy()


@pytest.mark.parametrize("name", SINGLE)
def test_pvlib_on_the_coarse_grid(name):
    response = library.entry(name).absorber.junctions[0].response
    coarse = theirs(response, band_wavelengths(), spectra() / band_widths(), reference_bands() / band_widths())
    assert np.abs(coarse / ours(response) - 1).max() < 5e-3  # the limit: trapezoids between band centres


@pytest.mark.parametrize("name", SINGLE)
def test_a_finer_grid_closes_the_difference(name):
    response = library.entry(name).absorber.junctions[0].response
    wave, density = reference_spectrum()
    band = np.clip(np.searchsorted(band_edges(), wave, side="right") - 1, 0, len(band_widths()) - 1)
    light = density * (spectra() / reference_bands())[:, band]
    fine = theirs(response, wave, light, density)
    coarse = theirs(response, band_wavelengths(), spectra() / band_widths(), reference_bands() / band_widths())
    # what remains are the steps of the light at the edges of bands, which trapezoids round off
    assert np.abs(fine / ours(response) - 1).max() < 2e-4
    assert np.abs(fine / ours(response) - 1).max() < 0.6 * np.abs(coarse / ours(response) - 1).max()
