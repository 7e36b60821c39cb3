"""From the surroundings a study names, and the files they come from, to the plan's mountings, ground and skyline."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np

from yieldsim.config.inputs import locate, sha256
from yieldsim.config.mounting_schema import AnyMounting, Ground, VerticalMounting
from yieldsim.config.tables import NumberTable, read_table
from yieldsim.errors import InputError, Problem
from yieldsim.sky.ground import surfaces
from yieldsim.sky.horizon import Horizon
from yieldsim.study.plan import GroundPlan, MountingPlan

_MICROMETRES = 20.0  # wavelengths that are all below this are micrometres


def mounting_plan(name: str, given: AnyMounting) -> MountingPlan:
    """Return a mounting of the plan."""
    fields: dict[str, Any] = given.model_dump()
    if isinstance(given, VerticalMounting):
        fields["tilt_deg"] = 90.0
    return MountingPlan(name=name, **fields)


class Surroundings:
    """Reads what lies around sites; keeps the fingerprints of the files read.

    Parameters
    ----------
    folder : Path that relative paths start from
    """

    def __init__(self, folder: Path) -> None:
        """Start with nothing read."""
        self.folder = folder
        self.inputs: dict[str, str] = {}

    def ground(self, given: str | Ground) -> GroundPlan:
        """Return a site's ground.

        Raises
        ------
        InputError
            For a file that is no spectrum of albedo.
        """
        ground = Ground(surface=given) if isinstance(given, str) else given
        if ground.surface is None or ground.surface in surfaces():
            return GroundPlan(ground.albedo, ground.surface)
        table = self._table(ground.surface)
        order = np.argsort(table.values[:, 0], kind="stable")
        wavelength, albedo = table.values[order].T
        if wavelength[-1] < _MICROMETRES:
            wavelength = wavelength * 1000
        if any("%" in cell for cell in table.head):
            albedo = albedo / 100
        _refuse(table, order, (wavelength < 100) | (wavelength > 20000), "wavelength", "100 to 20000 nm")
        _refuse(table, order, (albedo < 0) | (albedo > 1), "albedo", "0 to 1, or percent with a % in the header line")
        _refuse(table, order, np.diff(wavelength, prepend=-1.0) <= 0, "wavelength", "each wavelength once")
        spectrum = tuple(float(x) for x in wavelength), tuple(float(x) for x in albedo)
        return GroundPlan(ground.albedo, ground.surface, spectrum)

    def horizon(self, shown: str | None) -> Horizon | None:
        """Return a site's skyline.

        Raises
        ------
        InputError
            For a file that is no skyline.
        """
        if shown is None:
            return None
        table = self._table(shown, least=1)
        order = np.argsort(table.values[:, 0], kind="stable")
        azimuth, elevation = table.values[order].T
        _refuse(table, order, (azimuth < 0) | (azimuth > 360), "azimuth", "0 to 360 deg clockwise from north")
        _refuse(table, order, (elevation < -90) | (elevation > 90), "elevation", "-90 to 90 deg, below 0 taken for 0")
        if len(azimuth) > 1 and azimuth[-1] == 360:  # north given twice
            if azimuth[0] == 0:
                azimuth, elevation = azimuth[:-1], elevation[:-1]
            else:
                azimuth, elevation = np.roll(azimuth % 360, 1), np.roll(elevation, 1)
        azimuth = azimuth % 360
        _refuse(table, order, np.diff(azimuth, prepend=-1.0) <= 0, "azimuth", "each azimuth once")
        return Horizon(tuple(float(x) for x in azimuth), tuple(max(float(x), 0.0) for x in elevation))

    def _table(self, shown: str, least: int = 2) -> NumberTable:
        path = locate(shown, self.folder)
        table = read_table(path, shown, least=least)
        self.inputs[shown] = sha256(path)
        return table


def _refuse(table: NumberTable, order: np.ndarray, wrong: np.ndarray, where: str, allowed: str) -> None:
    """Raise InputError with every row, in the file's order, that is wrong."""
    column = 1 if where in ("albedo", "elevation") else 0
    rows = sorted(int(row) for row in order[: len(wrong)][wrong])
    problems: list[Problem] = [table.problem(row, where, f"{table.values[row, column]:g}", allowed) for row in rows]
    if problems:
        raise InputError(problems)
