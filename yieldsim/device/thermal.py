"""Cell temperature from light, air and wind."""

from __future__ import annotations

from typing import Any

import numpy as np


def faiman(light: Any, temp_air: Any, wind_speed: Any, u0: Any, u1: Any) -> Any:
    """Return the temperature of the cells of a module in the open.

    Parameters
    ----------
    light : (...) array [W m-2], light on the plane of the module
    temp_air : (...) array [K]
    wind_speed : (...) array [m s-1], at the module
    u0 : (...) array [W m-2 K-1], heat loss in still air
    u1 : (...) array [W m-3 s K-1], heat loss added per wind speed

    Returns
    -------
    (...) array [K]

    Notes
    -----
    T = Ta + light/(u0 + u1 v) (Faiman 2008, eq. 3). The coefficients absorb the module's own yield, so nothing is
    subtracted for the power taken out. Fitted to open racks at more than 400 W/m2; hourly means.

    References
    ----------
    Faiman, D. (2008), Prog. Photovolt. Res. Appl. 16, 307.
    """
    return (np.asarray(temp_air) + np.asarray(light) / (u0 + np.asarray(u1) * np.asarray(wind_speed)))[()]
