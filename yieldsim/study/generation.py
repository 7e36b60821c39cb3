"""Where in a junction made from a material the standard spectrum makes its pairs."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from yieldsim import spectrum
from yieldsim.constants import STANDARD_CELL_TEMPERATURE
from yieldsim.device import material, optics
from yieldsim.device.stack import Absorber
from yieldsim.study.plan import FilmPlan, Row

DEPTHS = 121  # from the front to the back, closer together near the front, where most pairs are made
_M_TO_UM = 1e6
_A_M3_TO_MA_CM2_UM = 1e-7  # A m-2 per m to mA cm-2 per um


def rows(absorbers: Sequence[Absorber], films: Sequence[FilmPlan]) -> list[Row]:
    """Return one row per depth of each film: charge made there, and the share of all of it that is made above.

    Parameters
    ----------
    absorbers : those of the study
    films : FilmPlan, junctions of theirs

    Returns
    -------
    rows of ``absorber, junction, depth_um, generation_ma_cm2_um, share_above``

    Notes
    -----
    The light is the standard spectrum that enters the film: less its front's reflection, and in a stack less what the
    junctions above take. Depths are spaced by their cube.
    """
    by_name = {absorber.name: absorber for absorber in absorbers}
    found: list[Row] = []
    for film in films:
        wave, light = spectrum.reference_spectrum()
        junctions = by_name[film.absorber].junctions[: film.junction]
        for above in junctions[:-1]:
            light = light * np.interp(wave, *optics.handed_down(above, STANDARD_CELL_TEMPERATURE))
        light = light * (1 - junctions[-1].reflection)
        depth = film.thickness * np.linspace(0.0, 1.0, DEPTHS) ** 3
        made = material.generation(film.material, film.thickness, film.trapping, depth, (wave, light))
        running = np.concatenate([[0.0], np.cumsum(np.diff(depth) * (made[1:] + made[:-1]) / 2)])
        found += [
            {
                "absorber": film.absorber,
                "junction": film.junction,
                "depth_um": float(z * _M_TO_UM),
                "generation_ma_cm2_um": float(rate * _A_M3_TO_MA_CM2_UM),
                "share_above": float(share),
            }
            for z, rate, share in zip(depth, made, running / running[-1], strict=True)
        ]
    return found
