"""The colour of dust."""

import numpy as np
import pytest

from yieldsim import spectrum
from yieldsim.sky import dust


@pytest.mark.parametrize("lost", [0.0, 0.02, 0.2, 0.6])
@pytest.mark.parametrize("exponent", [-1.0, 0.5, 2.0])
def test_colour_leaves_the_level_alone(lost, exponent):
    """Definition: mean 1 under the reference spectrum, so that the loss itself is counted once; to 1e-12."""
    bands = spectrum.reference_bands()
    found = dust.colour(np.array([lost]), exponent)
    assert float(found[0] @ bands / bands.sum()) == pytest.approx(1.0, abs=1e-12)
    assert np.all(found > 0)


def test_grey_dust_has_no_colour():
    np.testing.assert_allclose(dust.colour(np.array([0.3]), 0.0), 1.0, rtol=1e-12)


def test_a_positive_exponent_takes_blue_light():
    found = dust.colour(np.array([0.05]), 1.0)[0]
    assert np.all(np.diff(found) > 0)
