"""Snow that lies on the modules: when it covers them, and how it slides off."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

COVERING_CM_H = 1.0  # snowfall that covers a row, threshold of Marion et al. (2013)
SLIDING_W_M2_K = -80.0  # sliding starts where the air is warmer than light / this, Marion et al. (2013)
SLIDING_PER_H = 0.197  # share of the row that slides off an hour, times sin(tilt), Marion et al. (2013)
GONE_CM = 1.0  # snow on the ground below which none is left on the rows, Ryberg & Freeman (2017)
STEEPEST_DEG = 75.0  # steeper planes hold no snow (common practice, no source)


def held(depth_cm: Array) -> Array:
    """Return the depth with the last value held through gaps, (n,) [cm]; no snow before the first."""
    known = np.maximum.accumulate(np.where(np.isfinite(depth_cm), np.arange(len(depth_cm)), -1))
    return np.where(known >= 0, depth_cm[np.maximum(known, 0)], 0.0)


def snowfall(depth_cm: Array) -> Array:
    """Return the snow that fell in each interval, (n,) [cm]: by how much the depth on the ground rose."""
    return np.maximum(np.diff(depth_cm, prepend=depth_cm[:1]), 0.0)


def coverage(depth_cm: Array, light: Array, temp_air_c: Array, tilt_deg: Array, interval_h: float) -> Array:
    """Return the share of a row's width that snow covers.

    Parameters
    ----------
    depth_cm : (n,) array [cm], snow on the ground; NaN = not known
    light : (n,) array [W m-2], on the plane, without snow
    temp_air_c : (n,) array [degC]
    tilt_deg : (n,) array [deg], from horizontal
    interval_h : float [h]

    Returns
    -------
    (n,) array [1]

    Notes
    -----
    Snowfall of `COVERING_CM_H` covers the row whole. Then, in every interval in which the air is warmer than light /
    `SLIDING_W_M2_K`, the share `SLIDING_PER_H` sin(tilt) an hour slides off. Once less than `GONE_CM` lies on the
    ground the rows are free. Fitted to fixed planes of 23 to 40 deg in Colorado and Wisconsin.

    References
    ----------
    B. Marion, R. Schaefer, H. Caine, G. Sanchez, Measured and modeled photovoltaic system energy losses from snow for
    Colorado and Wisconsin locations, Solar Energy 97 (2013) 112. D. Ryberg, J. Freeman, NREL/TP-6A20-68705 (2017).
    """
    depth = held(depth_cm)
    falls = (snowfall(depth) > COVERING_CM_H * interval_h) & (depth >= GONE_CM) & (tilt_deg < STEEPEST_DEG)
    slides = np.where(temp_air_c > light / SLIDING_W_M2_K, SLIDING_PER_H * np.sin(np.radians(tilt_deg)), 0.0)
    slides = np.where(depth < GONE_CM, 1.0, slides * interval_h)
    gone = np.cumsum(slides)
    last = np.maximum.accumulate(np.where(falls, np.arange(len(depth)), -1))
    since = gone - gone[np.maximum(last, 0)]
    return np.where(last >= 0, np.clip(1.0 - since, 0.0, 1.0), 0.0)
