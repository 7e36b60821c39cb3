"""The published references behind ``yieldsim verify``; the tests hold the same figures to the same limits."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from yieldsim.checks import clear_sky, cloud, device
from yieldsim.checks.record import Outcome
from yieldsim.device.stack import Absorber

__all__ = ["Outcome", "outcomes"]


def outcomes(
    library: Mapping[str, Absorber], published: Mapping[str, Mapping[str, tuple[float, str]]]
) -> Iterator[Outcome]:
    """Yield every check, done on this machine as it is asked for.

    Parameters
    ----------
    library : entry name -> Absorber
    published : entry name -> quantity -> (value, source)
    """
    yield from device.spectrum_outcomes()
    yield from device.balance_outcomes()
    yield from clear_sky.six_s_outcomes()
    yield from clear_sky.bird_outcomes()
    yield from clear_sky.example_outcomes()
    yield from cloud.clear_regression_outcomes(library)
    yield from cloud.ordinate_outcomes()
    yield from cloud.regression_outcomes(library)
    yield from device.library_outcomes(library, published)
