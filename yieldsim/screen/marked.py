"""Findings and flags: what every check of a weather leaves behind."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from yieldsim.weather import Finding, Flag, Weather

Mask = NDArray[np.bool_]


def noted(weather: Weather, kind: str, where: Mask, found: str, done: str) -> Weather:
    """Return the weather with a finding about the chosen intervals."""
    at = np.flatnonzero(where)
    first, last = (int(weather.time[at[0]]), int(weather.time[at[-1]])) if at.size else (0, 0)
    note = Finding(kind, int(at.size), first, last, found, done)
    return replace(weather, findings=(*weather.findings, note))


def flagged(where: Mask, flag: Flag) -> NDArray[np.uint32]:
    """Return flags for the chosen intervals, none for the others."""
    return np.where(where, np.uint32(flag), np.uint32(0))
