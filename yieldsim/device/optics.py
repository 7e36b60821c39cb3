"""What a junction hands down to the junctions below it, and what those then collect."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from yieldsim.device.junction import Junction, absorptance_at, response_at
from yieldsim.device.response import Response

Array = NDArray[np.float64]

#: A share over wavelength: (n,) wavelengths [nm] and (n,) values [1], linear between, the end values beyond the ends.
Curve = tuple[Array, Array]


def handed_down(junction: Junction, temperature: float) -> Curve:
    """Return the share of the light on a junction that reaches what lies below it, over wavelength.

    Notes
    -----
    (1 - reflection)(1 - absorptance)(1 - parasitic). Never 1 - EQE: blue light that a junction absorbs without
    collecting it is lost, not passed on.
    """
    wave, absorbed = absorptance_at(junction, temperature)
    clear = (1 - junction.reflection) * (1 - junction.parasitic)
    beyond = np.array([wave[-1]])  # a step at the end: nothing is absorbed beyond the response
    return np.concatenate([wave, beyond]), clear * (1 - np.concatenate([absorbed, [0.0]]))


def in_stack(junctions: Sequence[Junction], temperature: float) -> tuple[Response, ...]:
    """Return the response of each junction where it sits in a stack, top first.

    Parameters
    ----------
    junctions : Junctions, the one that meets the light first comes first
    temperature : float [K], of all of them

    Returns
    -------
    tuple of Response, electrons per photon that falls on the stack

    Notes
    -----
    The top keeps its own response. A lower one collects its own response freed of its own front reflection, times
    what all above hand down; reflection within the stack counts as the reflection of the upper junction.
    """
    responses = [response_at(junctions[0], temperature)]
    down = handed_down(junctions[0], temperature)
    for i, junction in enumerate(junctions[1:]):
        if i > 0:
            down = product(handed_down(junctions[i], temperature), down, None)
        alone = response_at(junction, temperature)
        wave, level = product((alone.wavelength_nm, alone.quantum_efficiency / (1 - junction.reflection)), down, 0.0)
        responses.append(Response(wave, np.clip(level, 0.0, 1.0)))
    return tuple(responses)


def product(first: Curve, second: Curve, outside: float | None) -> Curve:
    """Return the product of two piecewise-linear curves, again piecewise linear, steps kept.

    Parameters
    ----------
    first, second : Curve; a repeated wavelength is a step
    outside : value of first beyond its ends; None = its end values, and the product spans both

    Notes
    -----
    Exact at the break points of both and half-way between; between those a quadratic is replaced by its chords, at
    most 1/16 of the product of both changes over a piece away.
    """
    points = np.concatenate([first[0], second[0]])
    if outside is not None:
        points = points[(points >= first[0][0]) & (points <= first[0][-1])]
    grid = np.unique(points)
    left, right = grid[:-1], grid[1:]
    a, b = _ends(first, left, right), _ends(second, left, right)
    middle = (a[0] + a[1]) * (b[0] + b[1]) / 4
    wave = np.stack([left, (left + right) / 2, right], axis=1).ravel()
    level = np.stack([a[0] * b[0], middle, a[1] * b[1]], axis=1).ravel()
    if outside is not None:
        return wave, level
    ends = first[1][0] * second[1][0], first[1][-1] * second[1][-1]  # what holds beyond, after a step at either end too
    return np.concatenate([wave[:1], wave, wave[-1:]]), np.concatenate([ends[:1], level, ends[1:]])


def _ends(curve: Curve, left: Array, right: Array) -> tuple[Array, Array]:
    """Return a curve just inside both ends of pieces that hold no break point within."""
    wave, level = curve
    middle = (left + right) / 2
    segment = np.searchsorted(wave, middle, side="right") - 1
    before, after = segment < 0, segment >= len(wave) - 1
    segment = np.clip(segment, 0, len(wave) - 2)
    width = wave[segment + 1] - wave[segment]
    rise = (level[segment + 1] - level[segment]) / np.where(width > 0, width, 1.0)
    at_left = level[segment] + rise * (left - wave[segment])
    at_right = level[segment] + rise * (right - wave[segment])
    for values in (at_left, at_right):
        values[before], values[after] = level[0], level[-1]
    return at_left, at_right
