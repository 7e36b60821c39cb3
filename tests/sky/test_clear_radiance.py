"""Where clear skies send their light, against radiances of discrete ordinates on tilted planes."""

import numpy as np
import pytest

from yieldsim import reference
from yieldsim.sky import clear_radiance, column

TABLE = reference.table("tilted_skies")
COS_ZENITH = np.cos(np.radians(TABLE["zenith_deg"]))
DEPTH = TABLE["rayleigh"] + TABLE["haze"]
HAZE_SHARE = TABLE["haze"] * TABLE["haze_albedo"]
HAZE_SHARE = HAZE_SHARE / (HAZE_SHARE + TABLE["rayleigh"])
TILT = np.radians(TABLE["tilt_deg"])
COS_AOI = np.maximum(
    np.cos(TILT) * COS_ZENITH
    + np.sin(TILT) * np.sqrt(1 - COS_ZENITH**2) * np.cos(np.radians(TABLE["azimuth_deg"])), 0.0
)  # fmt: skip
FACING = (TABLE["azimuth_deg"] == 0) & (TABLE["tilt_deg"] <= 60)
SMOOTH = (TABLE["haze_kind"] == 1) & (TABLE["albedo"] == 0.2) & (TABLE["zenith_deg"] <= 75)


def deviation(around, rim):
    """Sky light on each plane of the table by three parts, over the table's, less 1."""
    ours = around * COS_AOI / COS_ZENITH + (1 - around) * (1 + np.cos(TILT)) / 2 + rim * np.sin(TILT)
    return ours * TABLE["diffuse"] / TABLE["sky"] - 1


def rms(values):
    return float(np.sqrt(np.mean(values**2)))


@pytest.fixture(scope="module")
def fitted():
    around, rim = clear_radiance.lobes(DEPTH, HAZE_SHARE, COS_ZENITH, np.ones(len(DEPTH)))
    return deviation(around, rim)


@pytest.mark.parametrize(("chosen", "limit"), [(SMOOTH & FACING, 0.04), (SMOOTH & ~FACING, 0.16), (FACING, 0.05)])
def test_fit(fitted, chosen, limit):
    """Reference: PythonicDISORT, 64 streams (table tilted_skies, which the four numbers were fitted to). All bands
    alike from 350 to 1600 nm: 3.4 % rms on planes that face the sun, 14.6 % on the others and on walls, where three
    parts cannot follow a wide glow; with peaked haze and black ground, not fitted to, 3.6 % and no more than 5 %."""
    assert rms(fitted[chosen]) < limit


def test_better_than_one_share_of_the_beam():
    """Direction: on planes that face the sun the fit beats Hay & Davies' share band by band (13 %), with haze's share
    of the scattering (18 %) and an even sky (38 %)."""
    passed = np.exp(-DEPTH / COS_ZENITH)
    fit = rms(deviation(*clear_radiance.lobes(DEPTH, HAZE_SHARE, COS_ZENITH, np.ones(len(DEPTH))))[FACING])
    others = [rms(deviation(around, 0.0)[FACING]) for around in (passed, passed * HAZE_SHARE, 0 * passed)]
    assert fit < 0.4 * min(others)
    # Away from the sun haze's share is the better one: over all planes 28 % rms against 38 %.
    plain, hazy = (rms(deviation(around, 0.0)[SMOOTH]) for around in (passed, passed * HAZE_SHARE))
    assert hazy < plain


def test_never_below_zero():
    """Invariant: any scattering, sun to the horizon, tilted up to a wall, any azimuth: nothing less than nothing."""
    rng = np.random.default_rng(3)
    n = 100_000
    mu, depth, share = rng.uniform(1e-4, 1, n), 10 ** rng.uniform(-3, 0.85, n), rng.random(n)
    around, rim = clear_radiance.lobes(depth, share, mu, rng.random(n))
    tilt, azimuth = rng.uniform(0, np.pi / 2, n), rng.uniform(0, np.pi, n)
    facing = np.maximum(np.cos(tilt) * mu + np.sin(tilt) * np.sqrt(1 - mu**2) * np.cos(azimuth), 0)
    assert np.all((around >= 0) & (around <= 1))
    assert np.all(around * facing / mu + (1 - around) * (1 + np.cos(tilt)) / 2 + rim * np.sin(tilt) > -1e-12)


def test_cloud_hides_the_glow():
    """Closed form: with no open sun nothing comes from around it and the rim is that of an overcast sky."""
    air = column.reference_air()
    around, rim = clear_radiance.shares(air, np.zeros(1))
    assert np.all(around == 0)
    assert np.all(rim == clear_radiance.OVERCAST_RIM)
    around, rim = clear_radiance.shares(air, np.ones(1))
    assert np.all((around > 0) & (around <= 1))
    assert np.all(rim > 0)
