"""PSM: satellite files of the United States' national solar radiation database, 5 to 60 minutes.

Two lines of names and values for the place, then one of column names; ``Local Time Zone`` and ``Time Zone`` tell the
clock. Values are those of the moment of the label, so labels stand in the middle of their interval. Some programs save
the table alone, without the two lines: then the study must give the place, and the clock is taken for the standard
time of its longitude.
"""

from __future__ import annotations

from collections.abc import Iterator
from itertools import chain, islice

import numpy as np
from numpy.typing import NDArray

from yieldsim.readers import _raw, _table
from yieldsim.readers._raw import Raw
from yieldsim.readers._source import WHOLE_BYTES, Source

FORMAT = "psm"
_DATE = ("Year", "Month", "Day", "Hour", "Minute")
_COLUMNS = {
    "GHI": ("ghi", 1.0),
    "DNI": ("dni", 1.0),
    "DHI": ("dhi", 1.0),
    "Temperature": ("temp_air", 1.0),
    "Dew Point": ("temp_dew", 1.0),
    "Relative Humidity": ("relative_humidity", 1.0),
    "Pressure": ("pressure", 100.0),
    "Wind Speed": ("wind_speed", 1.0),
    "Precipitable Water": ("precipitable_water", 1.0),
    "Surface Albedo": ("albedo", 1.0),
    "Aerosol Optical Depth": ("aod500", 1.0),
    "AOD": ("aod500", 1.0),
}
_ALPHA = "Alpha"
_AOD_NM = 550.0  # the aerosol is MERRA-2's at 550 nm, its exponent that of 470 to 870 nm (from memory)
_USUAL_ALPHA = 1.3  # Angstrom's own, where the file has none
_ALPHA_RANGE = (-0.5, 3.0)
_MISSING_BELOW = -900.0  # codes are -999 and -9999


def _header(source: Source) -> int | None:
    """Return the line, from 0, that names the columns; None where there is none."""
    for i, line in enumerate(source.lines_of_head[:3]):
        cells = _table.split(line)
        if set(_DATE) <= set(cells) and {"GHI", "DNI", "DHI"} & set(cells):
            return i
    return None


def claims(source: Source) -> bool:
    """Return whether the file is of this format."""
    return _header(source) is not None


def read(source: Source) -> Iterator[Raw]:
    """Yield the rows of the file.

    Raises
    ------
    InputError
        For columns missing, cells that are not numbers or dates.
    """
    at_header = _header(source)
    if at_header is None:
        raise source.refuse(1, "", "no line with Year, Month, Day, Hour, Minute", "the columns of a PSM file")
    lines = source.lines(WHOLE_BYTES)
    head = list(islice(lines, at_header + 1))
    names = _table.split(head[-1].rstrip(","))
    first = next(lines, "")
    fields = max(len(names), first.rstrip(",").count(",") + 1)
    about = dict(zip(_table.split(head[0]), _table.split(head[1]), strict=False)) if at_header == 2 else {}
    at = _table.positions(source, at_header + 1, names, (*_COLUMNS, *_DATE, _ALPHA))
    numbers = {_COLUMNS[name][0] if name in _COLUMNS else name: i for name, i in at.items()}
    block = _table.whole(source, chain([first], lines), at_header + 2, numbers, {}, fields)
    year, month, day, hour, minute = (block.numbers[name] for name in _DATE)
    time = _table.calendar_seconds(source, block.row, year, month, day, hour * 3600.0 + minute * 60.0, 86_399)
    scale = dict(_COLUMNS.values())
    columns = {name: block.numbers[name] * scale[name] for name in numbers if name in scale}
    coded = {name: block.numbers[name] <= _MISSING_BELOW for name in columns}
    columns, marks = _raw.without_codes(source, columns, coded, time, block.row)
    notes: tuple[str, ...] = ()
    if "aod500" in columns:
        columns["aod500"], notes = _at_500_nm(columns["aod500"], block.numbers.get(_ALPHA))
    place = [_number(about.get(name)) for name in ("Latitude", "Longitude", "Elevation")]
    clock_h, local_h = _number(about.get("Time Zone")), _number(about.get("Local Time Zone"))
    clock_s = None if clock_h is None else _raw.offset_s(source, 2, "Time Zone", clock_h)
    yield Raw(
        shown=source.shown,
        name=" ".join(about[name] for name in ("Source", "Location ID") if about.get(name)),
        latitude_deg=place[0],
        longitude_deg=place[1],
        elevation_m=place[2],
        utc_offset_h=local_h,
        clock_offset_s=clock_s,
        label="middle",
        clock="UTC" if clock_h == 0 else "local standard time",
        time=time,
        interval_s=None,
        row=block.row,
        columns=columns,
        typical=_raw.is_typical(time),
        notes=notes,
        marks=marks,
    )


def _at_500_nm(
    aod: NDArray[np.float64], alpha: NDArray[np.float64] | None
) -> tuple[NDArray[np.float64], tuple[str, ...]]:
    """Return aerosol optical depth at 500 nm from that of the file, by Angstrom's law, and words for it."""
    exponent = np.full(len(aod), _USUAL_ALPHA)
    if alpha is not None:
        usable = (alpha >= _ALPHA_RANGE[0]) & (alpha <= _ALPHA_RANGE[1])
        exponent = np.where(usable, alpha, _USUAL_ALPHA)
    whose = f"an exponent of {_USUAL_ALPHA:g}" if alpha is None else "the file's exponent"
    note = f"aerosol of the file taken for {_AOD_NM:g} nm, brought to 500 nm with {whose}"
    return aod * (500.0 / _AOD_NM) ** -exponent, (note,)


def _number(text: str | None) -> float | None:
    try:
        value = float(text or "")
    except ValueError:
        return None
    return value if np.isfinite(value) else None
