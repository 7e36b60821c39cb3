"""Where films make their pairs: against the current of their response, and closed forms."""

import numpy as np
import pytest

from yieldsim import config
from yieldsim.constants import STANDARD_CELL_TEMPERATURE
from yieldsim.device import material, optics
from yieldsim.spectrum import reference_spectrum
from yieldsim.study import generation

STUDY = """
study: films
sites: [{name: here, weather: "pvlib:723170TYA.CSV"}]
mounting: {tilt_deg: 30, azimuth_deg: 180}
absorbers:
  - {name: film, material: {name: cdte, thickness_um: 3, trapping: single_pass}, reflection: 0.1, quality: ideal}
  - name: pair
    terminals: 2
    stack:
      - {material: {name: mapbi3, thickness_um: 0.45, trapping: single_pass}, external_radiative_efficiency: 1.0e-3}
      - {material: {name: c-si, thickness_um: 160, trapping: lambertian}, external_radiative_efficiency: 1.0e-3}
"""


@pytest.fixture(scope="module")
def plan(tmp_path_factory):
    path = tmp_path_factory.mktemp("films") / "films.yaml"
    path.write_text(STUDY, encoding="utf-8")
    return config.load(path)


def by_film(plan):
    found = {}
    for row in generation.rows(plan.absorbers, plan.films):
        found.setdefault((row["absorber"], row["junction"]), []).append(row)
    return found


def test_every_film_is_told_of(plan):
    assert list(by_film(plan)) == [("film", 1), ("pair", 1), ("pair", 2)]
    assert [film.thickness for film in plan.films] == pytest.approx([3e-6, 0.45e-6, 160e-6])


def test_what_is_made_is_what_is_collected(plan):
    """Closed form: charge summed over depth is the photocurrent of the junction where it sits in its stack: the film
    collects all it absorbs. 1 %: depths are 121 points and wavelengths those of the standard."""
    wave, light = reference_spectrum()
    for (name, number), rows in by_film(plan).items():
        absorber = next(each for each in plan.absorbers if each.name == name)
        response = optics.in_stack(absorber.junctions, STANDARD_CELL_TEMPERATURE)[number - 1]
        level = np.interp(wave, response.wavelength_nm, response.quantum_efficiency, left=0.0, right=0.0)
        current = np.trapezoid(level * light / material.photon_energy_ev(wave), wave) / 10  # mA cm-2
        depth, rate = (np.array([row[key] for row in rows]) for key in ("depth_um", "generation_ma_cm2_um"))
        assert np.trapezoid(rate, depth) == pytest.approx(current, rel=0.01), name


def test_shares_rise_from_none_to_all(plan):
    for rows in by_film(plan).values():
        shares = np.array([row["share_above"] for row in rows])
        assert shares[0] == 0.0
        assert shares[-1] == 1.0
        assert np.all(np.diff(shares) >= 0)


def test_most_is_made_near_the_front(plan):
    """Direction: strong absorbers make half of their pairs in the first tenth of a micrometre or so, a wafer under a
    film in some tens, red light being left to it."""
    half = {
        film: np.interp(0.5, [row["share_above"] for row in rows], [row["depth_um"] for row in rows])
        for film, rows in by_film(plan).items()
    }
    assert half["film", 1] < 0.3
    assert half["pair", 1] < 0.2
    assert 5 < half["pair", 2] < 80
