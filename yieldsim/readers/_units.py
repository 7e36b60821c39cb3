"""Units as files write them, and what turns them into ours."""

from __future__ import annotations

from yieldsim.errors import InputError, Problem
from yieldsim.weather import COLUMNS

#: Our unit -> unit of a file -> (factor, offset).
UNITS: dict[str, dict[str, tuple[float, float]]] = {
    "degC": {"K": (1.0, -273.15), "kelvin": (1.0, -273.15), "degF": (5 / 9, -160 / 9), "F": (5 / 9, -160 / 9)},
    "%": {"1": (100.0, 0.0)},
    "Pa": {"hPa": (100.0, 0.0), "mbar": (100.0, 0.0), "kPa": (1000.0, 0.0), "bar": (1e5, 0.0)},
    "cm": {"mm": (0.1, 0.0), "m": (100.0, 0.0), "kg m-2": (0.1, 0.0), "kg/m2": (0.1, 0.0)},
    "W m-2": {"kW m-2": (1000.0, 0.0), "kW/m2": (1000.0, 0.0), "kWh/m2": (1000.0, 0.0)},
    "1": {"%": (0.01, 0.0)},
    "mm": {"m": (1000.0, 0.0), "cm": (10.0, 0.0)},
    "m s-1": {"km h-1": (1 / 3.6, 0.0), "km/h": (1 / 3.6, 0.0), "kn": (1852 / 3600, 0.0), "mph": (0.44704, 0.0)},
}
_SAME = {
    "W m-2": {"W/m2", "W/m^2", "W/m²", "W m**-2", "Wh/m2", "watt m-2"},
    "degC": {"C", "°C", "celsius", "degrees_celsius", "degree_Celsius", "deg_C"},
    "m s-1": {"m/s", "m s**-1"},
    "1": {"", "-", "none", "dimensionless"},
    "%": {"percent"},
    "Pa": {"pascal"},
}


def conversion(column: str, unit: str | None, shown: str, where: str = "") -> tuple[float, float]:
    """Return (factor, offset) that turn a unit of a file into that of our column.

    Raises
    ------
    InputError
        For a unit not known for the column.
    """
    ours = COLUMNS[column][0]
    written = ours if unit is None else unit.strip()
    if written == ours or written in _SAME.get(ours, ()):
        return 1.0, 0.0
    if written in UNITS.get(ours, {}):
        return UNITS[ours][written]
    allowed = ", ".join([ours, *UNITS.get(ours, {})])
    raise InputError(Problem(shown, 0, where or column, f"unit {written!r}", allowed))
