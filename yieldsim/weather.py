"""The record every weather reader makes and everything above reads; checks shape, unit and finiteness only."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from enum import IntFlag
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

from yieldsim.errors import InputError, Problem

#: Columns a Weather may hold, by pvlib's names, with unit and possible range (outside it a value is refused).
COLUMNS: Mapping[str, tuple[str, float, float]] = MappingProxyType(
    {
        "ghi": ("W m-2", -50.0, 2500.0),
        "dni": ("W m-2", -50.0, 2500.0),
        "dhi": ("W m-2", -50.0, 2500.0),
        "temp_air": ("degC", -90.0, 65.0),
        "relative_humidity": ("%", 0.0, 110.0),
        "temp_dew": ("degC", -110.0, 50.0),
        "wind_speed": ("m s-1", 0.0, 120.0),
        "pressure": ("Pa", 30_000.0, 110_000.0),
        "precipitable_water": ("cm", 0.0, 12.0),
        "aod500": ("1", 0.0, 8.0),
        "aod_broadband": ("1", 0.0, 8.0),
        "albedo": ("1", 0.0, 1.0),
        "snow_depth": ("cm", 0.0, 2000.0),
        "rain": ("mm", 0.0, 500.0),
    }
)
REQUIRED = ("ghi", "dni", "dhi", "temp_air", "wind_speed")


class Flag(IntFlag):
    """What was done to an interval; kept in ``hourly/<site>.nc``."""

    NIGHT_LIGHT = 1  # light while the sun is down at every sub-step: set to zero
    NEGATIVE = 2  # negative irradiance: set to zero
    MENDED_LIGHT = 4  # ghi, dni or dhi replaced by the mender
    MENDED_AIR = 8  # temperature, wind or humidity replaced by the mender
    GAP = 16  # left out: not in the file, not mended
    DNI_LIMITED = 32  # beam above what the sun sends: limited


@dataclass(frozen=True, slots=True)
class Finding:
    """Something noticed in a weather file and what was done about it.

    Parameters
    ----------
    kind : str, short name of the check (``night_light``)
    rows : int, intervals concerned
    first, last : int, UTC unix seconds of the first and last interval concerned; 0, 0 if none
    found, done : str, plain words
    """

    kind: str
    rows: int
    first: int
    last: int
    found: str
    done: str


@dataclass(frozen=True, slots=True)
class Stamp:
    """Where time labels sit, as a study says it with ``timestamps:``.

    Parameters
    ----------
    label : ``start``, ``middle`` or ``end`` of the interval; None = as the format documents
    utc_offset_s : int [s], the labels' clock less UTC; None = as the file says
    shift_s : int [s], to be added to every label
    """

    label: str | None = None
    utc_offset_s: int | None = None
    shift_s: int = 0


LABELS = ("start", "middle", "end")
STAMP_FORM = "start, middle or end, then optionally UTC, UTC+1 or UTC-03:30, then optionally a shift such as +10 min"
_STAMP = re.compile(
    r"(?P<label>start|middle|end)?\s*(?P<utc>UTC\s*(?:(?P<sign>[+-])(?P<hours>\d{1,2})(?::(?P<minutes>[0-5]\d))?)?)?"
    r"\s*(?:(?P<shift>[+-]\s*\d{1,4})\s*min)?",
    re.IGNORECASE,
)


def parse_stamp(text: str) -> Stamp:
    """Return what a ``timestamps:`` text says: ``end``, ``start UTC+1``, ``middle UTC-03:30 +10 min``.

    Raises
    ------
    ValueError
        If the text is not of that form or goes beyond UTC-14 to UTC+14 or a day of shift.
    """
    match = _STAMP.fullmatch(text.strip())
    if not match or not text.strip():
        raise ValueError(f"{text!r} is not: {STAMP_FORM}")
    offset = None
    if match["utc"]:
        size = 3600 * int(match["hours"] or 0) + 60 * int(match["minutes"] or 0)
        offset = -size if match["sign"] == "-" else size
    shift = 60 * int((match["shift"] or "0").replace(" ", ""))
    if abs(offset or 0) > 14 * 3600 or abs(shift) > 86400:
        raise ValueError(f"{text!r} is beyond UTC-14 to UTC+14 or a shift of 1440 min")
    return Stamp(match["label"].lower() if match["label"] else None, offset, shift)


@dataclass(frozen=True, slots=True)
class Weather:
    """Weather of one place over one stretch of time.

    Parameters
    ----------
    latitude_deg, longitude_deg : float [deg], north and east positive
    elevation_m : float [m]
    utc_offset_h : float [h], local standard time less UTC
    time : (n,) int64 array [s], UTC unix seconds of the *start* of each interval, rising
    interval_s : int [s], length of every interval
    columns : mapping name -> (n,) float64 array in the units of `COLUMNS`; NaN where the file has no value
    source : str, the file(s) it came from, as shown to people
    label : str, where the file's time labels sit (``end of interval, local standard time``)
    flags : (n,) uint32 array of `Flag`
    row : (n,) int64 array, line of the file each interval came from; 0 where there is none
    notes : what the reader wants people to know (``invented``)
    findings : what the reader already found and did
    name : str, of the place as the file gives it; may be empty
    typical : bool, months of several years set together; ``time`` then runs through one year without a leap day
    stated : bool, the study said where the time labels sit, so that no check may move them

    Raises
    ------
    InputError
        For unequal lengths, unknown columns, time that does not rise, an interval outside 1-60 minutes.
    """

    latitude_deg: float
    longitude_deg: float
    elevation_m: float
    utc_offset_h: float
    time: NDArray[np.int64]
    interval_s: int
    columns: Mapping[str, NDArray[np.float64]]
    source: str
    label: str
    flags: NDArray[np.uint32]
    row: NDArray[np.int64]
    notes: tuple[str, ...] = ()
    findings: tuple[Finding, ...] = field(default=())
    name: str = ""
    typical: bool = False
    stated: bool = False

    def __post_init__(self) -> None:
        """Refuse what cannot be used."""
        problems = [Problem(self.source, 0, where, found, allowed) for where, found, allowed in _faults(self)]
        if problems:
            raise InputError(problems)

    def __len__(self) -> int:
        """Return the number of intervals."""
        return len(self.time)

    def __getitem__(self, name: str) -> NDArray[np.float64]:
        """Return a column by name."""
        return self.columns[name]

    def __contains__(self, name: object) -> bool:
        """Return whether there is a column of that name."""
        return name in self.columns


def cut(weather: Weather, start: int, end: int) -> Weather:
    """Return the intervals from ``start`` to before ``end``; what was found stays with all of it."""
    columns = {name: values[start:end] for name, values in weather.columns.items()}
    arrays = {name: getattr(weather, name)[start:end] for name in ("time", "flags", "row")}
    return replace(weather, columns=columns, **arrays)


def _faults(weather: Weather) -> list[tuple[str, str, str]]:
    """Return (where, found, allowed) for everything that makes a Weather unusable in shape or unit."""
    n = len(weather.time)
    faults: list[tuple[str, str, str]] = []
    for name, low, high in (
        ("latitude_deg", -90.0, 90.0),
        ("longitude_deg", -180.0, 180.0),
        ("elevation_m", -450.0, 9000.0),
        ("utc_offset_h", -14.0, 14.0),
    ):
        value = getattr(weather, name)
        if not low <= value <= high:
            faults.append((name, f"{value}", f"{low:g} to {high:g}"))
    if n == 0:
        faults.append(("time", "no rows", "at least one"))
    elif n > 1 and not np.all(np.diff(weather.time) > 0):
        at = int(np.argmin(np.diff(weather.time) > 0)) + 1
        faults.append(("time", f"time goes back or repeats at row {weather.row[at]}", "rising time"))
    if not 60 <= weather.interval_s <= 3600:
        faults.append(("interval", f"{weather.interval_s} s", "60 to 3600 s"))
    shapes = {"flags": weather.flags.shape, "row": weather.row.shape}
    shapes |= {name: values.shape for name, values in weather.columns.items()}
    faults.extend((name, f"shape {shape}", f"({n},)") for name, shape in shapes.items() if shape != (n,))
    for name, values in weather.columns.items():
        if name in COLUMNS and values.shape == (n,):
            faults.extend(_column_faults(weather, name, values))
    faults.extend((name, "unknown column", ", ".join(COLUMNS)) for name in weather.columns if name not in COLUMNS)
    faults.extend((name, "column missing", "a column of that name") for name in REQUIRED if name not in weather.columns)
    return faults


def _column_faults(weather: Weather, name: str, values: NDArray[np.float64]) -> list[tuple[str, str, str]]:
    unit, low, high = COLUMNS[name]
    outside = (values < low) | (values > high) | np.isinf(values)
    if not outside.any():
        return []
    at = int(np.argmax(outside))
    found = f"{values[at]:g} {unit} in row {weather.row[at]} ({int(outside.sum())} such rows)"
    return [(name, found, f"{low:g} to {high:g} {unit}")]
