"""What a face of a mounting sees of sun, sky and ground: factors on light, means over the lit part of an interval."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from yieldsim.sky import rows as rows_module
from yieldsim.sky.horizon import Horizon
from yieldsim.sky.mounting import Stance
from yieldsim.sky.rows import Rows
from yieldsim.sky.sun import SunCourse

Array = NDArray[np.float64]

FRONT, REAR = 0, 1
_LEAST_ABOVE = 1e-6  # cosine: shadows longer than a million heights are as long as all the ground
_NODE_STEP = np.radians(2.0)  # between rotations at which a tracker's ground and skyline are worked out


@dataclass(frozen=True, slots=True)
class Sight:
    """Factors on light, for one face.

    Parameters
    ----------
    cos_aoi : (n, step) array [1], cosine of incidence of the sun; 0 behind the face, with the sun down or hidden
    reached : (n, step) array [1], the same times the share of the face that no neighbour shades
    sky_step, ground_step : (n, step) or (1, 1) array [1], view factors of sky and ground
    cos_tilt : (n, step) or (1, 1) array [1], of the face; negative for one that looks down
    beam : (n,) array [1], on light of the sun's direction
    sky : (n,) array [1], on a uniform sky's light on the horizontal
    rim : (n,) array [1], on light from the rim of the sky; 0 between rows, which hide it
    ground_beam : (n,) array [1], on light of the sun's direction, by way of the ground
    ground_sky : (n,) array [1], on a uniform sky's light, by way of the ground
    """

    cos_aoi: Array
    reached: Array
    sky_step: Array
    ground_step: Array
    cos_tilt: Array
    beam: Array
    sky: Array
    rim: Array
    ground_beam: Array
    ground_sky: Array

    def only(self, chosen: slice) -> Sight:
        """Return the chosen intervals."""
        every = {name: getattr(self, name) for name in Sight.__slots__}
        return Sight(**{name: value if value.shape == (1, 1) else value[chosen] for name, value in every.items()})


def lit_mean(values: Array, up: NDArray[np.bool_]) -> Array:
    """Return the mean over lit sub-steps of values (n, step) or (1, 1), (n,); 0 where none is lit."""
    count = up.sum(axis=1)
    summed = np.where(up, values, 0.0).sum(axis=1)
    return np.asarray(np.divide(summed, count, out=np.zeros(len(summed)), where=count > 0))


def of_face(
    face: int,
    stance: Stance,
    sun: SunCourse,
    rows: Rows | None = None,
    horizon: Horizon | None = None,
) -> Sight:
    """Return what a face sees.

    Parameters
    ----------
    face : `FRONT` or `REAR`
    stance : Stance of the plane at the sub-steps of ``sun``
    sun : SunCourse of n intervals
    rows : Rows it stands in; None = alone over ground in full light
    horizon : Horizon or None

    Returns
    -------
    Sight

    Notes
    -----
    Rows are endless; on a tilted axis the ground between them is taken to run along the axis, and what the face sees
    of sky and ground shifts by the axis's tilt. Where rows and skyline both hide the low sky, the share the skyline
    leaves of the open view is applied to what the rows leave.
    """
    side = 1.0 if face == FRONT else -1.0
    shown = sun.up if horizon is None else sun.up & horizon.shows(sun.direction)
    signed = side * stance.cos_incidence(sun.direction)
    cos_aoi = np.where(shown, np.maximum(signed, 0.0), 0.0)
    above = sun.direction @ stance.upright
    coverage = 0.0 if rows is None else rows.coverage
    reached = rows_module.shaded_cosine(cos_aoi, above, coverage)

    cos_rotation, cos_tilt = side * np.cos(stance.rotation), side * stance.cos_tilt()
    shift = (cos_tilt - cos_rotation) / 2
    sky = np.clip(rows_module.sky_view(cos_rotation, coverage) + shift, 0.0, 1.0)
    ground = np.clip(rows_module.sky_view(-cos_rotation, coverage) - shift, 0.0, 1.0)
    level = 1.0
    if horizon is not None:
        level = 1.0 - float(horizon.hidden_sky(np.array([[0.0, 0.0, 1.0]]))[0])
        open_view = (1 + cos_tilt) / 2
        kept = 1.0 - _hidden_sky(side, stance, horizon) / np.maximum(open_view, 1e-9)
        sky = sky * np.clip(kept, 0.0, 1.0)
    lit_beam, lit_sky = ground, ground
    if rows is not None:
        lit_beam, lit_sky = _lit_ground(face, stance, signed, above, sun.direction, rows, ground)
    open_rim = np.sqrt(np.maximum(1 - cos_tilt**2, 0.0)) if coverage == 0 else np.zeros_like(cos_tilt)
    on_ground = np.where(shown, np.maximum(sun.direction[..., 2], 0.0), 0.0)
    return Sight(
        cos_aoi,
        reached,
        sky,
        ground,
        cos_tilt,
        beam=lit_mean(reached, sun.up),
        sky=lit_mean(sky, sun.up),
        rim=lit_mean(open_rim, sun.up),
        ground_beam=lit_mean(on_ground * lit_beam, sun.up),
        ground_sky=lit_mean(lit_sky * level, sun.up),
    )


def _nodes(stance: Stance) -> Array:
    """Return rotations (m,) [rad] at which to work out what depends on nothing else, rising."""
    low, high = float(stance.rotation.min(initial=np.inf)), float(stance.rotation.max(initial=-np.inf))
    if high < low:  # no interval is lit
        return np.zeros(1)
    if high - low < 1e-9:
        return np.array([low])
    # Symmetric and not drawn from the data, so that all trackers of one kind share their tables.
    most = np.ceil(max(abs(low), abs(high)) / _NODE_STEP) * _NODE_STEP
    return np.linspace(-most, most, 2 * round(most / _NODE_STEP) + 1)


def _hidden_sky(side: float, stance: Stance, horizon: Horizon) -> Array:
    nodes = _nodes(stance)
    hidden = horizon.hidden_sky(side * stance.normals(nodes))
    return np.interp(stance.rotation, nodes, hidden)


def _lit_ground(
    face: int, stance: Stance, signed: Array, above: Array, direction: Array, rows: Rows, whole: Array
) -> tuple[Array, Array]:
    """Return the view factors of ground in the sun and of ground weighted with the sky it sees."""
    nodes = _nodes(stance)
    pattern = rows_module.ground_pattern(rows, tuple(float(each) for each in nodes))
    down = np.maximum(above, _LEAST_ABOVE)
    slope, ratio = (direction @ stance.across) / down, np.abs(signed) / down
    shade = rows_module.ground_lost(pattern, face, rows, stance.rotation, slope, ratio, whole)
    sky_lost = np.interp(stance.rotation, nodes, pattern.sky_lost[face])
    return np.maximum(whole - shade, 0.0), np.maximum(whole - sky_lost, 0.0)
