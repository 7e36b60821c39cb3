"""How thick a cloud must be to pass a measured share of the light, sought on a few bands."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from yieldsim.sky import column
from yieldsim.sky.column import Air, Optics

Array = NDArray[np.float64]

DEPTH_MAX = 300.0  # the thickest clouds pass about 2 %; beyond it nothing measurable changes
TOLERANCE = 2e-4  # of transmittance: moves no band over broadband by more than 0.01 %
_STEPS = 40


class Search:
    """Cloud depths of hours.

    Parameters
    ----------
    air : Air of n hours, its ground in the few bands
    few : Optics of a few bands that stand for all, their weights in ``factor``
    """

    def __init__(self, air: Air, few: Optics) -> None:
        """Compute the light without cloud."""
        self.air, self.few = air, few
        self.top = few.extraterrestrial * few.factor
        #: (n,) array [W m-2], all light on the horizontal over the sine of the sun's height, without cloud
        self.clear = self._light(np.arange(len(air.cos_zenith)), np.zeros(len(air.cos_zenith)))

    def _light(self, hours: NDArray[np.intp], depth: Array) -> Array:
        return column.transmit(self.air.only(hours), depth, self.few).total @ self.top

    def depth(self, wanted: Array) -> Array:
        """Return the depth (n,) [1] that passes the wanted share (n,) [1] of clear light; 0 where none does.

        Notes
        -----
        1/K is nearly linear in the depth; steps follow the chord between the two ends of a bracket that always holds
        the root, with the kept end's residual halved when it is kept twice (the Illinois rule), so the search cannot
        fail.
        """
        n = len(wanted)
        depth = np.zeros(n)
        low, high = np.zeros(n), np.full(n, DEPTH_MAX)
        target = 1.0 / np.clip(wanted, 1e-3, None)
        miss_low, miss_high = 1.0 - target, np.full(n, np.nan)
        active = np.flatnonzero(wanted < 1.0 - TOLERANCE)
        guess = np.minimum(9.0 * (target - 1.0), DEPTH_MAX)
        kept = np.zeros(n, dtype=np.int8)
        for _ in range(_STEPS):
            if active.size == 0:
                break
            depth[active] = guess[active]
            miss = self.clear[active] / self._light(active, depth[active]) - target[active]
            above = miss > 0
            over, under = active[above], active[~above]
            high[over], miss_high[over] = depth[over], miss[above]
            low[under], miss_low[under] = depth[under], miss[~above]
            miss_low[over[kept[over] == 1]] /= 2
            miss_high[under[kept[under] == -1]] /= 2
            kept[over], kept[under] = 1, -1
            done = (np.abs(miss) < TOLERANCE * target[active]) | (depth[active] >= DEPTH_MAX)
            active = active[~done]
            bounded = ~np.isnan(miss_high)
            chord = low - miss_low * (high - low) / np.where(bounded, miss_high - miss_low, 1.0)
            # Nothing beyond yet: 1/K - 1 grows about in proportion to the depth; a tenth further brackets the root.
            grown = np.maximum(target - 1.0 + miss_low, 1e-9)
            onward = np.clip(1.1 * low * (target - 1.0) / grown, low + 0.1, DEPTH_MAX)
            guess = np.where(bounded, chord, onward)
        return depth
