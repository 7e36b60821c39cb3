"""What tells absorbers and sites apart in a picture, and where their labels stand without overlap."""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

#: Colours that stay apart for all common kinds of colour vision: Okabe, M., Ito, K. (2008), Color Universal Design,
#: values from memory; their yellow is left out, being too pale for a line on white.
COLOURS = ("#0072B2", "#D55E00", "#009E73", "#CC79A7", "#E69F00", "#56B4E9", "#333333")
DASHES: tuple[tuple[float, ...], ...] = ((), (5, 2), (1.5, 1.5), (6, 2, 1.5, 2))
_UNITS = re.compile(r"_(ev|atm_cm|cm)$")
MARKERS = ("o", "s", "^", "D", "v", "P", "X", "<", ">", "p", "h", "*")


@dataclass(frozen=True, slots=True)
class Mark:
    """How one series is drawn: colour, dash pattern (points on, points off; empty = solid) and marker."""

    colour: str
    dash: tuple[float, ...]
    marker: str


def mark(number: int) -> Mark:
    """Return the mark of the series of a number, 0 first: no two of the first 28 share colour and dash.

    The marker changes with every series, the dash too, so that prints in grey keep them apart.
    """
    turn, colour = divmod(number, len(COLOURS))
    return Mark(
        COLOURS[colour],
        DASHES[(turn + colour % 3) % len(DASHES)],
        MARKERS[number % len(MARKERS)],
    )


def called(name: object) -> str:
    """Return what an input of a chance calculation is called in words, without its unit."""
    return _UNITS.sub("", str(name)).replace("_", " ")


def shorten(name: str, length: int = 40) -> str:
    """Return a name on one line, without characters that steer the text, cut to a length with an ellipsis."""
    plain = "".join(" " if unicodedata.category(c) in ("Cc", "Zl", "Zp") else c for c in name)
    plain = "".join(c for c in plain if unicodedata.category(c) not in ("Cf", "Cs", "Co"))
    plain = " ".join(plain.split())
    return plain if len(plain) <= length else plain[: length - 1].rstrip() + "…"


def position(latitude_deg: float, longitude_deg: float, elevation_m: float) -> str:
    """Return a place on earth as people write it: ``36.10° N, 79.95° W, 273 m``."""
    parts = [f"{abs(value):.2f}° {ends[value < 0]}" for value, ends in ((latitude_deg, "NS"), (longitude_deg, "EW"))]
    return ", ".join([*parts, f"{elevation_m:.0f} m".replace("-", "−")])


def spread(wanted: Sequence[float], gap: float, low: float, high: float) -> NDArray[np.float64]:
    """Return places at least a gap apart and as close to the wanted ones as can be, in the same order.

    Parameters
    ----------
    wanted : (n,) places
    gap : least distance between neighbours; made smaller where n of them do not fit
    low, high : bounds

    Returns
    -------
    (n,) array

    Notes
    -----
    With the gaps taken off, the order must not fall: the least-squares answer is the pool of adjacent violators.
    """
    aims = np.asarray(wanted, dtype=np.float64)
    if aims.size == 0:
        return aims
    gap = min(gap, (high - low) / max(aims.size - 1, 1))
    order = np.argsort(aims, kind="stable")
    steps = gap * np.arange(aims.size)
    pools: list[list[float]] = []  # mean, count
    for aim in aims[order] - steps:
        pools.append([float(aim), 1])
        while len(pools) > 1 and pools[-2][0] > pools[-1][0]:
            mean, count = pools.pop()
            pools[-1] = [(pools[-1][0] * pools[-1][1] + mean * count) / (pools[-1][1] + count), pools[-1][1] + count]
    flat = np.concatenate([np.full(int(count), mean) for mean, count in pools])
    placed = np.clip(flat, low, high - steps[-1]) + steps
    out = np.empty_like(aims)
    out[order] = placed
    return out


def plateau(
    gap_ev: NDArray[np.float64], energy: NDArray[np.float64], within: float = 0.01
) -> tuple[float, float, float]:
    """Return the best gap and the ends of the stretch around it that stays within a share of the best [eV].

    Ends between two computed gaps are interpolated; the best gap is one of those computed.
    """
    best = int(np.argmax(energy))
    limit = energy[best] * (1 - within)
    return float(gap_ev[best]), _edge(gap_ev, energy, best, -1, limit), _edge(gap_ev, energy, best, 1, limit)


def _edge(gap_ev: NDArray[np.float64], energy: NDArray[np.float64], at: int, step: int, limit: float) -> float:
    while 0 <= at + step < len(energy) and energy[at + step] >= limit:
        at += step
    if not 0 <= at + step < len(energy):
        return float(gap_ev[at])
    share = (energy[at] - limit) / (energy[at] - energy[at + step])
    return float(gap_ev[at] + share * (gap_ev[at + step] - gap_ev[at]))
