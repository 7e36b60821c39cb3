"""``yieldsim verify`` and ``yieldsim spectra`` as a user calls them."""

import json
import warnings
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from yieldsim import api
from yieldsim.checks import Outcome
from yieldsim.cli import main

STUDY = str(Path(__file__).resolve().parents[2] / "configs" / "five-climates.yaml")


def some(deviation):
    return [Outcome("sky", "a thing", "a source", 1.0, 0.1, 0.5), Outcome("sky", "other", "b", 2.0, deviation, 0.5)]


def test_verify_prints_source_value_deviation_limit(monkeypatch, capsys):
    monkeypatch.setattr(api, "verify", lambda: iter(some(0.2)))
    assert main(["verify"]) == 0
    said = capsys.readouterr().out
    assert "against a source" in said
    assert "deviation 0.1 %, limit 0.5 %" in said
    assert "0 beyond it" in said


def test_verify_beyond_a_limit_is_exit_code_2(monkeypatch, capsys):
    monkeypatch.setattr(api, "verify", lambda: iter(some(0.7)))
    assert main(["verify", "--json"]) == 2
    assert [each["passed"] for each in json.loads(capsys.readouterr().out)] == [True, False]


def test_spectra_are_cf_and_sum_to_the_light(tmp_path, capsys):
    """Band sums equal beam and diffuse; parts on the plane add up; xarray opens the file without a warning."""
    out = tmp_path / "light.nc"
    line = ["spectra", STUDY, "--site", "Saltmarsh Point", "--out", str(out)]
    assert main([*line, "--from", "2021-06-01", "--to", "2021-06-03T00:00:00+02:00"]) == 0
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        with xr.open_dataset(out) as found:
            found.load()
    assert found.attrs["Conventions"].startswith("CF-")
    assert len(found.attrs["input_sha256"].split()[-1]) == 64
    assert found["wavelength"].attrs["bounds"] == "band_edges"
    np.testing.assert_allclose(found["beam"].sum("band"), found["dni"], rtol=1e-6, atol=1e-9)
    np.testing.assert_allclose(found["diffuse"].sum("band"), found["dhi"], rtol=1e-6, atol=1e-9)
    stamps = found["time"].values
    assert stamps.min() >= np.datetime64("2021-06-01")
    assert stamps.max() < np.datetime64("2021-06-02T22:00")
    # The standard spectrum has 1.45 eV (280-4000 nm); clear suns down to 5 deg 1.35, overcast skies up to 1.98 (found
    # over this whole year). A wrong unit or a swapped axis is far off. Nearer to the horizon it is 0.6 eV and more.
    up = found["zenith"].values < 85.0
    photon = found["average_photon_energy"].values[up]
    assert np.all((photon > 1.3) & (photon < 2.05))
    assert float(found["plane_ground"].min()) >= 0


def test_a_mistyped_site_gets_the_nearest_name(capsys):
    assert main(["spectra", STUDY, "--site", "Saltmarsh Poin"]) == 1
    assert "did you mean 'Saltmarsh Point'" in capsys.readouterr().err


@pytest.mark.parametrize("when", ["yesterday", "2001-13-01"])
def test_a_moment_that_is_none_is_refused(when, capsys):
    assert main(["spectra", STUDY, "--site", "Saltmarsh Point", "--from", when]) == 1
    assert "allowed: a moment" in capsys.readouterr().err
