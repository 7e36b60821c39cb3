"""PVGIS: typical years from satellite images and reanalysis, hourly, in the CSV and JSON forms that the service gives.

Times are UTC. Light is that of one moment, ``Irradiance Time Offset`` after the full hour, when the satellite passes;
older files do not tell it and have their moment at the hour itself. Months come from several years.
"""

from __future__ import annotations

import json
import re
from collections.abc import Iterator, Mapping
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from yieldsim.readers import _raw, _table
from yieldsim.readers._raw import Raw
from yieldsim.readers._source import Source

FORMAT = "pvgis"
_TIME = "time(UTC)"
_COLUMNS = {
    "G(h)": ("ghi", 1.0),
    "Gb(n)": ("dni", 1.0),
    "Gd(h)": ("dhi", 1.0),
    "T2m": ("temp_air", 1.0),
    "RH": ("relative_humidity", 1.0),
    "WS10m": ("wind_speed", 1.0),
    "SP": ("pressure", 1.0),
}
_HEAD_LINES = 40
_ROW = re.compile(r"\d{8}:\d{4},")
_JSON_BYTES = 32 * 2**20  # B: a typical year has 1.5 MB
_KEYS = {
    "latitude": re.compile(r"^Latitude \(decimal degrees\):\s*(-?\d{1,9}(?:\.\d*)?)\s*$"),
    "longitude": re.compile(r"^Longitude \(decimal degrees\):\s*(-?\d{1,9}(?:\.\d*)?)\s*$"),
    "elevation": re.compile(r"^Elevation \(m\):\s*(-?\d{1,9}(?:\.\d*)?)\s*$"),
    "irradiance_time_offset": re.compile(r"^Irradiance Time Offset \(h\):\s*(-?\d{1,9}(?:\.\d*)?)\s*$"),
}


def claims(source: Source) -> bool:
    """Return whether the file is of this format, in either form."""
    if source.head.lstrip()[:1] == b"{":
        return b'"tmy_hourly"' in source.head or (b'"inputs"' in source.head and b'"months_selected"' in source.head)
    return any(_names_columns(line) for line in source.lines_of_head[:_HEAD_LINES])


def _names_columns(line: str) -> bool:
    return line.startswith(_TIME) and _TIME in _table.split(line)


def read(source: Source) -> Iterator[Raw]:
    """Yield the rows of the file.

    Raises
    ------
    InputError
        For text that is not JSON, columns missing, cells that are not numbers or times.
    """
    yield _from_json(source) if source.head.lstrip()[:1] == b"{" else _from_csv(source)


def _from_csv(source: Source) -> Raw:
    about: dict[str, float] = {}
    lines = source.whole_lines()
    start = next((i for i, line in enumerate(lines[:_HEAD_LINES]) if _names_columns(line)), None)
    if start is None:
        raise source.refuse(1, "", f"no line of column names with {_TIME}", "a typical year of PVGIS")
    for line in lines[:start]:
        about |= {key: float(found[1]) for key, pattern in _KEYS.items() if (found := pattern.match(line))}
    names = _table.split(lines[start])
    body = lines[start + 1 :]
    end = next((i for i, line in enumerate(body) if not _ROW.match(line)), len(body))  # legends follow the table
    later = next((i for i in range(end, len(body)) if _ROW.match(body[i])), None)
    if later is not None:  # the table goes on behind a row that does not begin with a time
        raise source.refuse(start + 2 + end, "time", repr(body[end][:40]), "a time such as 20180101:0000")
    at = _table.positions(source, start + 1, names, (_TIME, *_COLUMNS))
    numbers = {ours: at[theirs] for theirs, (ours, _) in _COLUMNS.items() if theirs in at}
    block = _table.whole(source, body[:end], start + 2, numbers, {"time": at[_TIME]}, len(names))
    return _raw_of(source, about, block.texts["time"], block.row, block.numbers)


def _from_json(source: Source) -> Raw:
    try:
        content = json.loads(source.content(_JSON_BYTES).decode(source.encoding))
        about = content["inputs"]["location"]
        rows = content["outputs"]["tmy_hourly"]
        texts = np.array([str(row[_TIME]) for row in rows], dtype=object)
        numbers = {
            ours: np.array([_json_number(row.get(theirs)) for row in rows])
            for theirs, (ours, _) in _COLUMNS.items()
            if any(theirs in row for row in rows)
        }
        place = {key: float(about[key]) for key in _KEYS if about.get(key) is not None}
    except (ValueError, KeyError, TypeError, AttributeError, OverflowError, RecursionError) as error:
        found = f"not what PVGIS writes ({type(error).__name__}: {str(error)[:60]})"
        raise source.refuse(getattr(error, "lineno", 0), "", found, "inputs.location and outputs.tmy_hourly") from None
    return _raw_of(source, place, texts, np.arange(1, len(texts) + 1, dtype=np.int64), numbers)


def _json_number(value: Any) -> float:
    if value is None:
        return float("nan")
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise TypeError(f"{value!r} where a number should be")
    return float(value)


def _raw_of(
    source: Source,
    about: Mapping[str, float],
    texts: Any,
    rows: NDArray[np.int64],
    numbers: Mapping[str, NDArray[np.float64]],
) -> Raw:
    moments = pd.to_datetime(pd.Series(texts, dtype=object).astype(str), format="%Y%m%d:%H%M", errors="coerce")
    bad = moments.isna().to_numpy()
    if bad.any():
        i = int(np.argmax(bad))
        raise source.refuse(int(rows[i]), "time", repr(str(texts[i])[:40]), "a time such as 20180101:0000")
    offset_h = about.get("irradiance_time_offset", 0.0)
    shift_s = _raw.offset_s(source, 0, "irradiance_time_offset", offset_h)
    time = moments.to_numpy().astype("datetime64[s]").astype(np.int64)
    longitude = about.get("longitude")
    clock = f"UTC, light {offset_h:+g} h from each label" if offset_h else "UTC"
    time = time + shift_s
    return Raw(
        shown=source.shown,
        name="",
        latitude_deg=about.get("latitude"),
        longitude_deg=longitude,
        elevation_m=about.get("elevation"),
        utc_offset_h=_raw.zone_h(longitude),
        clock_offset_s=0,
        label="middle",
        clock=clock,
        time=time,
        interval_s=3600,
        row=rows,
        columns={name: values + 0.0 for name, values in numbers.items()},
        typical=_raw.is_typical(time + 1800 - shift_s),  # a label at midnight begins its day
    )
