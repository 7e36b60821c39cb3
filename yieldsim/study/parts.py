"""A year cut into stretches that fit in memory: a year of minutes holds sixty times the light of one of hours."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from yieldsim.study.hourly import local_month_and_day
from yieldsim.weather import Weather, cut

MOST = 40_000  # intervals in a part: a year of quarter hours stays whole, one of minutes goes month by month


def parts(weather: Weather, most: int = MOST) -> Iterator[Weather]:
    """Yield a year in parts of whole months, as many months in each as have room.

    Parameters
    ----------
    weather : Weather, screened
    most : int, intervals a part may hold; a month alone may hold more

    Notes
    -----
    Months, because haze is expected by the month. What lies on either side of a cut does not know of its neighbour:
    the first hour of a part is no neighbour of the last one of the part before, and snow on modules begins anew.
    """
    if len(weather) <= most:
        yield weather
        return
    month, _ = local_month_and_day(weather)
    edges = [0, *(np.flatnonzero(np.diff(month)) + 1).tolist(), len(weather)]
    start = 0
    for here, following in zip(edges[1:], [*edges[2:], None], strict=True):
        if following is None or following - start > most:
            yield cut(weather, start, here)
            start = here
