"""TMY3: typical years of the United States, hourly, labels at the end of the hour in local standard time.

Wilcox & Marion, Users Manual for TMY3 Data Sets, NREL/TP-581-43156 (2008): one line for the place, one with the names
of 68 columns, then the hours 01:00 to 24:00. Missing values are -9900. Water, aerosol and albedo are 0 where a station
has none. ``AOD`` is the broadband optical depth of the aerosol for one air mass (table 1-1 there).
"""

from __future__ import annotations

from collections.abc import Iterator
from itertools import islice

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from yieldsim.readers import _raw, _table
from yieldsim.readers._raw import Raw
from yieldsim.readers._source import WHOLE_BYTES, Source

FORMAT = "tmy3"
_DATE = "Date (MM/DD/YYYY)"
_CLOCK = "Time (HH:MM)"
_MISSING_BELOW = -1000.0  # the code is -9900; no column reaches down to this
# Column of the file -> ours, and what one of its units is in ours.
_COLUMNS = {
    "GHI (W/m^2)": ("ghi", 1.0),
    "DNI (W/m^2)": ("dni", 1.0),
    "DHI (W/m^2)": ("dhi", 1.0),
    "Dry-bulb (C)": ("temp_air", 1.0),
    "Dew-point (C)": ("temp_dew", 1.0),
    "RHum (%)": ("relative_humidity", 1.0),
    "Pressure (mbar)": ("pressure", 100.0),
    "Wspd (m/s)": ("wind_speed", 1.0),
    "Pwat (cm)": ("precipitable_water", 1.0),
    "AOD (unitless)": ("aod_broadband", 1.0),
    "Alb (unitless)": ("albedo", 1.0),
}


def claims(source: Source) -> bool:
    """Return whether the file is of this format."""
    return len(source.lines_of_head) > 1 and source.lines_of_head[1].lstrip().startswith(_DATE)


def read(source: Source) -> Iterator[Raw]:
    """Yield the rows of the file.

    Raises
    ------
    InputError
        For a place that is not given, columns missing, cells that are not numbers or dates.
    """
    lines = source.lines(WHOLE_BYTES)
    head = list(islice(lines, 2))
    name, offset_h, position = _place(source, head[0])
    clock_s = _raw.offset_s(source, 1, "time zone", offset_h)
    names = _table.split(head[1])
    at = _table.positions(source, 2, names, (_DATE, _CLOCK, *_COLUMNS))
    missing = [name for name in (_DATE, _CLOCK) if name not in at]
    if missing:
        raise source.refuse(2, missing[0], "column missing", "the columns of a TMY3 file")
    numbers = {ours: at[theirs] for theirs, (ours, _) in _COLUMNS.items() if theirs in at}
    scale = dict(_COLUMNS.values())
    block = _table.whole(source, lines, 3, numbers, {"date": at[_DATE], "clock": at[_CLOCK]}, len(names))
    time = _times(source, block)
    columns = {name: values * scale[name] for name, values in block.numbers.items()}
    coded = {name: values <= _MISSING_BELOW for name, values in block.numbers.items()}
    columns, marks = _raw.without_codes(source, columns, coded, time, block.row)
    yield Raw(
        shown=source.shown,
        name=name,
        latitude_deg=position[0],
        longitude_deg=position[1],
        elevation_m=position[2],
        utc_offset_h=offset_h,
        clock_offset_s=clock_s,
        label="end",
        clock="local standard time",
        time=time,
        interval_s=None,
        row=block.row,
        columns=columns,
        typical=_raw.is_typical(time),
        marks=marks,
    )


def _place(source: Source, line: str) -> tuple[str, float, list[float]]:
    """Return name, local standard time less UTC [h], and latitude, longitude, elevation from the first line."""
    cells = _table.split(line)
    try:
        name, offset_h = f"{cells[1]}, {cells[2]}", float(cells[3])
        position = [float(cell) for cell in cells[4:7]]
        if len(position) < 3 or not np.isfinite([offset_h, *position]).all():
            raise ValueError
    except (ValueError, IndexError):
        allowed = "station, name, state, time zone, latitude, longitude, elevation"
        raise source.refuse(1, "place", repr(line[:80]), allowed) from None
    return name, offset_h, position


def _times(source: Source, block: _table.Block) -> NDArray[np.int64]:
    """Return the labels as unix seconds of the file's clock; 24:00 is the next day's midnight."""
    date = pd.to_datetime(pd.Series(block.texts["date"], dtype=object), format="%m/%d/%Y", errors="coerce")
    clock = pd.Series(block.texts["clock"], dtype=object).str.extract(r"^\s*(\d{1,2}):(\d{2})\s*$").astype(np.float64)
    minutes = (clock[0] * 60 + clock[1]).to_numpy()
    bad = date.isna().to_numpy() | ~(minutes <= 1440)
    if bad.any():
        i = int(np.argmax(bad))
        found = f"{block.texts['date'][i]!r}, {block.texts['clock'][i]!r} ({int(bad.sum())} such rows)"
        raise source.refuse(int(block.row[i]), "time", found, "a date MM/DD/YYYY and a time HH:MM up to 24:00")
    days = date.to_numpy().astype("datetime64[s]").astype(np.int64)
    return np.asarray(days + (minutes * 60).astype(np.int64), dtype=np.int64)
