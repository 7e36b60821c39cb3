"""A site's weather a year at a time: files or pieces of files strung together and cut at the turn of the year."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from yieldsim.errors import InputError, Problem
from yieldsim.readers._make import before_label, clock_of, interval_of, local_h, weather_from
from yieldsim.readers._raw import Mark, Mask, Raw, Times, Wanted, chosen, joined
from yieldsim.weather import Weather

_DAY_S = 86_400
A_YEAR_S = 366 * _DAY_S  # a file of up to that is a year, wherever it starts
_MOST_OF_A_YEAR_S = 300 * _DAY_S  # files longer than that are years of their own
_GAP_S = 45 * _DAY_S  # files further apart than that do not follow each other
_STUB_S = _DAY_S  # rows of less than that beyond a turn of the year are no year


class Stretch:
    """Rows that follow each other, from one file or several, given out a year at a time.

    Notes
    -----
    Years turn at midnight of local standard time, or of the labels' own clock where the rows begin at the turn of its
    year (files in UTC, a year each). Up to a day beyond the first or last turn is left out, and told of. Never more
    than a year and a block of rows is held.
    """

    def __init__(self) -> None:
        self._raws: list[Raw] = []
        self._wanted = Wanted()
        self._to_turn_s: int | None = None  # added to a label for the clock whose years are cut
        self._given: tuple[int, Raw] | None = None  # last year given out, and its last row

    def follows(self, raw: Raw, wanted: Wanted) -> bool:
        """Return whether a file goes on where this stretch ends; True for the first.

        Raises
        ------
        InputError
            If the file lies before the last one.
        """
        if not self._raws:
            return self._given is None
        before = self._raws[-1]
        if before.typical or raw.typical or wanted != self._wanted:
            return False
        if _span_s(raw.time) > _MOST_OF_A_YEAR_S and _span_s(before.time) > _MOST_OF_A_YEAR_S:
            return False
        gap = int(raw.time.min()) - int(before.time.max())
        if -A_YEAR_S < gap < 0 and int(raw.time.min()) < int(before.time.min()):
            found = f"rows from {_day(raw.time.min())} after {before.shown} from {_day(before.time.min())}"
            raise InputError(Problem(raw.shown, int(raw.row[0]), "time", found, "a site's files in the order of time"))
        return gap < _GAP_S

    def add(self, raw: Raw, wanted: Wanted) -> Iterator[Weather]:
        """Take more rows; yield the years that are complete with them."""
        if self._raws:
            _same_kind(self._raws[0], raw)
        else:
            self._wanted = wanted
        self._raws.append(raw)
        if raw.typical:
            return
        first = min(int(each.time.min()) for each in self._raws)
        last = max(int(each.time.max()) for each in self._raws)
        if self._given is not None or last - first > A_YEAR_S:
            yield from self._complete(last)

    def rest(self) -> Iterator[Weather]:
        """Yield what is left."""
        if not self._raws:
            return
        together = joined(self._raws)
        self._raws = []
        if not together.typical and (self._given is not None or _span_s(together.time) > A_YEAR_S):
            number = self._year_of(together, together.time)
            self._refuse_going_back(together, number)
            together = _without_stub(together, number == number.max(), "after")
            if self._given is not None and _span_s(together.time) < _STUB_S:
                found = f"{len(together.time)} rows about {_day(together.time[0])}, apart from all others"
                raise InputError(Problem(together.shown, int(together.row[0]), "time", found, "rows of whole years"))
        yield weather_from(together, self._wanted)

    def _complete(self, last: int) -> Iterator[Weather]:
        """Yield the years that ended a day or more before the last row, and keep the rest."""
        together = joined(self._raws)
        number = self._year_of(together, together.time)
        self._refuse_going_back(together, number)
        stub: tuple[Mark, ...] = ()
        if self._given is None:
            first, rows = number == number.min(), len(number)
            together = _without_stub(together, first, "before")
            if len(together.time) < rows:
                stub, number = together.marks[-1:], number[~first]
        open_year = int(self._year_of(together, np.array([last - _STUB_S]))[0])
        complete = [chosen(together, number == year) for year in np.unique(number[number < open_year])]
        self._raws = [chosen(together, number >= open_year)] if (number >= open_year).any() else []
        del together  # the years cut out of it are copies
        while complete:
            piece = complete.pop(0)
            piece, stub = replace(piece, marks=(*piece.marks, *stub)), ()
            last_row = int(np.argmax(piece.time))
            self._given = int(self._year_of(piece, piece.time[last_row])), chosen(piece, np.array([last_row]))
            yield weather_from(piece, self._wanted)

    def _year_of(self, raw: Raw, labels: Times) -> Times:
        if self._to_turn_s is None:
            self._to_turn_s = _to_turn(raw, self._wanted)
        moment = labels + self._to_turn_s
        return np.asarray(moment.astype("datetime64[s]").astype("datetime64[Y]").astype(np.int64))

    def _refuse_going_back(self, raw: Raw, number: Times) -> None:
        if self._given is None or number.min() > self._given[0]:
            return
        at, last = int(np.argmax(number <= self._given[0])), self._given[1]
        where = f"row {last.row[0]}" if last.shown == raw.shown else f"row {last.row[0]} of {last.shown}"
        found = f"a row of {_day(raw.time[at])} after one of {_day(last.time[0])} in {where}"
        raise InputError(Problem(raw.shown, int(raw.row[at]), "time", found, "years in the order of time"))


def _to_turn(raw: Raw, wanted: Wanted) -> int:
    """Return what to add to a label [s] for the start of its interval, by the clock whose years are cut."""
    interval_s = raw.interval_s or interval_of(raw)
    stamp = wanted.stamp
    label = (stamp.label if stamp else None) or raw.label
    to_start = (stamp.shift_s if stamp else 0) - before_label(label, interval_s)
    to_local = to_start - clock_of(raw, wanted) + round(local_h(raw, wanted) * 3600)
    first = np.datetime64(int(raw.time.min()) + to_start, "s")
    since_turn = int((first - first.astype("datetime64[Y]").astype("datetime64[s]")).astype(np.int64))
    return to_start if since_turn < interval_s else to_local


def _without_stub(raw: Raw, outer: Mask, side: str) -> Raw:
    """Return rows without those of an outer year of less than a day beside a real one; they are told of."""
    if outer.all() or _span_s(raw.time[outer]) >= _STUB_S or _span_s(raw.time[~outer]) < _MOST_OF_A_YEAR_S:
        return raw
    gap = raw.time[outer].min() - raw.time[~outer].max() if side == "after" else 0
    if gap > _GAP_S:
        return raw
    mark = Mark(
        "beyond_year", f"less than a day {side} the year", "left out", raw.shown, raw.time[outer], raw.row[outer]
    )
    kept = chosen(raw, ~outer)
    return replace(kept, marks=(*kept.marks, mark))


_SAME = ("label", "clock_offset_s", "interval_s", "latitude_deg", "longitude_deg", "elevation_m")


def _same_kind(first: Raw, raw: Raw) -> None:
    """Raise InputError unless pieces of one stretch are of one kind."""
    problems = [
        Problem(
            raw.shown,
            0,
            name,
            f"{getattr(raw, name)} after {getattr(first, name)} in {first.shown}",
            "files of one kind for one stretch of time",
        )
        for name in _SAME
        if getattr(raw, name) != getattr(first, name)
    ]
    if problems:
        raise InputError(problems)


def _span_s(time: Times) -> int:
    return int(time.max()) - int(time.min())


def _day(seconds: int) -> str:
    return str(np.datetime64(int(seconds), "s"))[:10]
