"""Endless parallel rows on level ground, seen in their cross-section: what they see of sky and ground, and its shade.

Lengths are of the cross-section; x runs across the rows, a row's front faces ``(sin rotation, cos rotation)``. Rows
reflect nothing.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

CELLS = 200  # of ground per pitch: a shadow's edge is placed within a hundredth of usual widths
NEIGHBOURS = 20  # rows to each side: what lies further off hides less than 0.1 % of the ground's sky
_ALONE = 40.0  # a row alone is a row whose neighbours are this many times its width and height away


@dataclass(frozen=True, slots=True)
class Rows:
    """Size and spacing of rows.

    Parameters
    ----------
    width_m : float [m], of a row, square to its length, along the plane
    height_m : float [m], of its middle line above the ground
    pitch_m : float or None [m], from middle line to middle line; None = one row alone

    Raises
    ------
    ValueError
        For lengths that are not positive or rows wider than their pitch.
    """

    width_m: float
    height_m: float
    pitch_m: float | None = None

    def __post_init__(self) -> None:
        """Refuse what cannot stand."""
        if not (self.width_m > 0 and self.height_m > 0):
            raise ValueError(f"a row {self.width_m:g} m wide at {self.height_m:g} m height; both must be above 0")
        if self.pitch_m is not None and not self.pitch_m >= self.width_m:
            raise ValueError(f"rows {self.width_m:g} m wide at a pitch of {self.pitch_m:g} m; they must not overlap")

    @property
    def coverage(self) -> float:
        """Row width over pitch [1]; 0 for one row alone."""
        return 0.0 if self.pitch_m is None else self.width_m / self.pitch_m


def sky_view(cos_rotation: Array, coverage: float) -> Array:
    """Return the share of a uniform sky that a row sees between its neighbours, mean over its width.

    Parameters
    ----------
    cos_rotation : (...) array [1], cosine between the face's normal and straight up; negative for a face looking down
    coverage : float [1], row width over pitch; 0 = alone

    Returns
    -------
    (...) array [1]

    Notes
    -----
    Crossed strings between a row and the gap to its neighbour: F = (1 + a - sqrt(a^2 - 2 a c + 1))/2 with a = pitch
    over width, written so that it stays exact as a grows. The same with -c is the share of ground seen between the
    lower edges. Front, rear and ground share the sky: width (F(c) + F(-c)) + pitch G = pitch.

    References
    ----------
    H. C. Hottel, A. F. Sarofim, Radiative transfer (1967), crossed strings.
    """
    cosine = np.asarray(cos_rotation, dtype=np.float64)
    span = np.sqrt(np.maximum(1 - 2 * coverage * cosine + coverage**2, 0.0))
    return np.asarray(np.clip((1 + (2 * cosine - coverage) / (1 + span)) / 2, 0.0, 1.0))


def shaded_cosine(cos_incidence: Array, cos_above: Array, coverage: float) -> Array:
    """Return the cosine of incidence times the share of the row that is not in its neighbour's shadow.

    Parameters
    ----------
    cos_incidence : (...) array [1], of the sun on the face, 0 behind it
    cos_above : (...) array [1], of the sun on the plane through the rows' middle lines
    coverage : float [1], row width over pitch

    Returns
    -------
    (...) array [1]

    Notes
    -----
    A row takes what falls on its own width or, where shadows reach the next row, what falls on one pitch of ground:
    min(cos aoi, cos z / coverage). Exact for endless rows.
    """
    if coverage == 0:
        return cos_incidence
    return np.minimum(cos_incidence, np.maximum(cos_above, 0.0) / coverage)


@dataclass(frozen=True, slots=True)
class GroundPattern:
    """Which ground a row's faces see and how much of it lies under the rows, at some rotations.

    Parameters
    ----------
    rotation : (m,) array [rad], rising
    reach : float [m], length of ground after which the pattern repeats
    seen : (2, m, CELLS + 1) array [1], front and rear: view factor of the ground from -reach/2 up to each cell's edge
    sky_lost : (2, m) array [1], view factor of the ground weighted with the share of sky hidden from it
    """

    rotation: Array
    reach: float
    seen: Array
    sky_lost: Array


@lru_cache(maxsize=32)
def ground_pattern(rows: Rows, rotations: tuple[float, ...]) -> GroundPattern:
    """Return the pattern of ground under rows at rotations [rad], rising.

    Notes
    -----
    From each cell of ground the rows are looked at one by one; a nearer one hides what is behind it. By reciprocity the
    sum over all rows seen from one pitch of ground is what one row sees of all the ground.
    """
    rotation = np.array(rotations)[:, None, None]
    if rows.pitch_m is None:
        reach, count, cells = _ALONE * max(rows.width_m, rows.height_m), 1, 5 * CELLS
    else:
        reach, count, cells = rows.pitch_m, NEIGHBOURS, CELLS
    edges = np.linspace(-reach / 2, reach / 2, cells + 1)
    ground = ((edges[1:] + edges[:-1]) / 2)[None, :, None]
    middle = (np.arange(-count, count + 1) * reach)[None, None, :]
    half = rows.width_m / 2
    reach_x, reach_z = half * np.cos(rotation), half * np.sin(rotation)
    first = _sine(middle - reach_x - ground, rows.height_m + reach_z)
    second = _sine(middle + reach_x - ground, rows.height_m - reach_z)
    low, high = np.minimum(first, second), np.maximum(first, second)
    # To the right of a point nearer rows are further left, and the other way round.
    before = np.concatenate([np.full_like(high[..., :1], -1.0), high[..., :-1]], axis=-1)
    after = np.concatenate([low[..., 1:], np.full_like(low[..., :1], 1.0)], axis=-1)
    right = np.maximum(high - np.maximum(np.maximum(low, before), 0.0), 0.0)
    left = np.maximum(np.minimum(np.minimum(high, after), 0.0) - low, 0.0)
    hidden = (right + left) / 2
    front = (ground - middle) * np.sin(rotation) - rows.height_m * np.cos(rotation) > 0
    by_face = np.stack([np.where(front, hidden, 0.0).sum(axis=-1), np.where(front, 0.0, hidden).sum(axis=-1)])
    density = by_face * (reach / cells / rows.width_m)
    seen = np.concatenate([np.zeros((*density.shape[:-1], 1)), np.cumsum(density, axis=-1)], axis=-1)
    return GroundPattern(rotation[:, 0, 0], reach, seen, (density * hidden.sum(axis=-1)).sum(axis=-1))


def _sine(x: Array, z: Array) -> Array:
    """Return the sine of the angle from straight up to a point (x, z) seen from the origin."""
    return np.asarray(x / np.hypot(x, np.maximum(z, 1e-9)))


def ground_lost(
    pattern: GroundPattern, face: int, rows: Rows, rotation: Array, slope: Array, cos_ratio: Array, whole: Array
) -> Array:
    """Return the view factor of the ground that lies in the rows' shadow.

    Parameters
    ----------
    pattern : GroundPattern of the rows
    face : int, 0 = front, 1 = rear
    rows : Rows
    rotation : (...) array [rad]
    slope : (...) array [1], how far the sun's light goes across the rows for each length down
    cos_ratio : (...) array [1], absolute cosine of incidence over that on the ground: shadow length over row width
    whole : (...) array [1], view factor of all the ground

    Returns
    -------
    (...) array [1]
    """
    centre = -rows.height_m * slope
    half = np.minimum(rows.width_m * cos_ratio, pattern.reach) / 2
    lost = _seen_up_to(pattern, face, rotation, centre + half) - _seen_up_to(pattern, face, rotation, centre - half)
    if rows.pitch_m is None:
        return np.clip(lost, 0.0, whole)
    return np.where(2 * half >= pattern.reach, whole, np.clip(lost, 0.0, whole))


def _seen_up_to(pattern: GroundPattern, face: int, rotation: Array, x: Array) -> Array:
    """Return the view factor of the ground up to x, by straight lines between the pattern's cells and rotations."""
    table = pattern.seen[face]
    cells = table.shape[1] - 1
    turns, place = np.divmod(np.asarray(x) / pattern.reach + 0.5, 1.0)
    place = place * cells
    at = np.minimum(place.astype(np.intp), cells - 1)
    part = place - at
    if len(pattern.rotation) == 1:
        row, total = table[0], table[0, -1]
        return np.asarray(row[at] + part * (row[at + 1] - row[at]) + turns * total)
    step = pattern.rotation[1] - pattern.rotation[0]
    along = np.clip((rotation - pattern.rotation[0]) / step, 0.0, len(pattern.rotation) - 1.0)
    node = np.minimum(along.astype(np.intp), len(pattern.rotation) - 2)
    weight = along - node
    found = 0.0
    for row, share in ((node, 1 - weight), (node + 1, weight)):
        here = table[row, at]
        found = found + share * (here + part * (table[row, at + 1] - here) + turns * table[row, -1])
    return np.asarray(found)
