"""From an absorber of a study file to the device's record, and back to plain data with every default filled in."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import replace
from pathlib import Path
from typing import Any, Literal, cast

import numpy as np

from yieldsim.config import library
from yieldsim.config.absorber_schema import Absorber as Spec
from yieldsim.config.absorber_schema import Datasheet, Source, SweepQuality
from yieldsim.config.absorber_schema import Material as MaterialSpec
from yieldsim.config.inputs import locate, sha256
from yieldsim.config.tables import NumberTable, read_table
from yieldsim.device import datasheet, material, measured
from yieldsim.device import stack as stack_module
from yieldsim.device.junction import Junction
from yieldsim.device.response import scaled, step
from yieldsim.device.stack import Absorber
from yieldsim.study.plan import FilmPlan

DEFAULT_INDEX = 3.5  # of a semiconductor whose table has none; matters for scattered light only (common practice)
_A_M2_PER_MA_CM2 = 10.0


class Maker:
    """Makes the absorbers of a study; keeps what was found on the way and the fingerprints of the files read.

    Parameters
    ----------
    folder : Path that relative paths start from
    """

    def __init__(self, folder: Path) -> None:
        """Start with nothing read."""
        self.folder = folder
        self.inputs: dict[str, str] = {}
        self.findings: list[tuple[str, str]] = []
        self.films: list[FilmPlan] = []

    def absorber(self, spec: Spec) -> Absorber:
        """Return the absorber of a study; raises ValueError for what its records refuse, InputError for its files."""
        module = _module_of(spec)
        if spec.stack is not None:
            stacked = tuple(self._junction(layer, spec.name, i, 1.0) for i, layer in enumerate(spec.stack, 1))
            return Absorber(name=spec.name, junctions=stacked, **module)
        if spec.like is None:
            only = self._junction(spec, spec.name, None, module.get("area_fraction", 1.0))
            return Absorber(name=spec.name, junctions=(only,), **module)
        entry = library.entry(spec.like).absorber
        if len(entry.junctions) == 1:
            if "terminals" in module or "coupling" in module:
                raise ValueError(f"`terminals` or `coupling` of {spec.like}, which has one junction")
            only = self._junction(spec, spec.name, None, module.get("area_fraction", entry.area_fraction))
            return replace(entry, name=spec.name, junctions=(only,), **module)
        inside = [f"`{key}`" for key in spec.junction_keys() if key != "like"]
        if inside:
            raise ValueError(
                f"{', '.join(inside)} of {spec.like}, which has several junctions; write its `stack` instead"
            )
        return replace(entry, name=spec.name, **module)

    def _junction(self, spec: Source, name: str, number: int | None, area_fraction: float) -> Junction:
        """Return a junction of an absorber; number: its place in a stack, 1 for the top one."""
        called = name if number is None else f"{name}, junction {number}"
        made = None if spec.material is None else self._material(spec.material, called)
        if spec.material is not None and made is not None:
            trapping = cast(material.Trapping, spec.material.trapping)
            self.films.append(FilmPlan(name, number or 1, made, spec.material.thickness_um * 1e-6, trapping))
        junction = replace(self._base(spec, called, made), **spec.given(*spec.QUALITY, *spec.LIGHT))
        if spec.datasheet is None:
            return junction
        solved = datasheet.solve(junction, _sheet(spec.datasheet), area_fraction)
        self._tell(called, solved.findings)
        return solved.junction

    def _base(self, spec: Source, called: str, made: material.Material | None) -> Junction:
        """Return a junction with the response its origin gives, and all else as that or the record has it."""
        if spec.like is not None:
            entry = library.entry(spec.like).absorber
            if len(entry.junctions) > 1:
                raise ValueError(f"{spec.like} as a junction: it has several; name them one by one")
            return _moved(entry, spec.gap_ev).junctions[0]
        if spec.material is not None and made is not None:
            gap = {} if spec.gap_ev is None else {"gap_ev": spec.gap_ev}
            return material.junction_of(
                made,
                spec.material.thickness_um * 1e-6,
                cast(material.Trapping, spec.material.trapping),
                spec.reflection or 0.0,
                **gap,
            )
        if spec.eqe is not None:
            return self._measured(spec, spec.eqe, "eqe", called)
        if spec.response is not None:
            return self._measured(spec, spec.response, "response", called)
        gap_ev = cast(float, spec.gap_ev)
        return Junction(gap_ev, step(gap_ev))

    def _measured(self, spec: Source, shown: str, kind: measured.Kind, called: str) -> Junction:
        table = self._table(shown, called)
        try:
            curve = measured.cleaned(table.values[:, 0], table.values[:, 1], kind)
        except ValueError as error:
            raise ValueError(f"{shown}: {error}") from None
        self._tell(called, [f"{shown}: {finding}" for finding in curve.findings])
        return Junction(curve.gap_ev if spec.gap_ev is None else spec.gap_ev, curve.response)

    def _material(self, spec: MaterialSpec, called: str) -> material.Material:
        if spec.name is not None:
            return material.known(spec.name)
        shown = cast(str, spec.absorption)
        table = self._table(shown, called, extra=1)
        wave, absorption, *index = table.values[np.argsort(table.values[:, 0], kind="stable")].T
        try:
            return material.Material(wave, absorption * 100, index[0] if index else np.full(len(wave), DEFAULT_INDEX))
        except ValueError as error:
            raise ValueError(f"{shown}: {error}") from None

    def _table(self, shown: str, called: str, extra: int = 0) -> NumberTable:
        path = locate(shown, self.folder)
        table = read_table(path, shown, columns=2, extra=extra)
        self.inputs[shown] = sha256(path)
        if table.skipped:
            self._tell(called, [f"{shown}: {table.skipped} rows without a value left out"])
        return table

    def _tell(self, called: str, findings: Iterable[str]) -> None:
        self.findings.extend((called, finding) for finding in findings)


def _sheet(spec: Datasheet) -> datasheet.Sheet:
    """Return a datasheet in the units of the device."""
    return datasheet.Sheet(
        jsc_a_m2=None if spec.jsc_ma_cm2 is None else spec.jsc_ma_cm2 * _A_M2_PER_MA_CM2,
        voc_v=spec.voc_v,
        ff=spec.ff,
        efficiency=spec.efficiency,
        jsc_coefficient=spec.jsc_coefficient_per_k,
        voc_coefficient=spec.voc_coefficient_per_k,
        power_coefficient=spec.power_coefficient_per_k,
        area=cast(Literal["cell", "aperture", "module"], spec.area),
    )


def _module_of(spec: Spec) -> dict[str, Any]:
    """Return the given fields of a module, as `Absorber` names them."""
    module: dict[str, Any] = spec.given("terminals", "coupling", "bifaciality", "area_fraction")
    if spec.incidence_modifier is not None:
        module["incidence_modifier"] = None if spec.incidence_modifier == "none" else spec.incidence_modifier
    if spec.heat_loss is not None:
        module["heat_loss"] = (spec.heat_loss.constant_w_m2_k, spec.heat_loss.wind_w_s_m3_k)
    return module


def _moved(absorber: Absorber, gap_ev: float | None) -> Absorber:
    if gap_ev is None or gap_ev == absorber.junctions[0].gap_ev:
        return absorber
    return stack_module.moved_to_gap(absorber, gap_ev)


def swept(quality: SweepQuality | None, gap_ev: float) -> Absorber:
    """Return the absorber of a sweep at a gap [eV]; no quality stands for the ideal."""
    name = f"{gap_ev:.12g} eV"
    if quality is None:
        return Absorber(name=name, junctions=(Junction(gap_ev, step(gap_ev)),))
    numbers = quality.given(*quality.QUALITY, "gap_shift_ev_per_k")
    if quality.like is not None:
        base = _moved(library.entry(quality.like).absorber, gap_ev)
        return replace(base, name=name, junctions=(replace(base.junctions[0], **numbers),))
    response = step(gap_ev)
    if quality.collected is not None:
        response = scaled(response, quality.collected)
    return Absorber(name=name, junctions=(Junction(gap_ev, response, **numbers),))


# ------------------------------------------------------------------------------------------------- resolved


def resolved(spec: Spec, absorber: Absorber) -> dict[str, Any]:
    """Return an absorber with every default filled in, JSON-able; read again it gives the same record."""
    content: dict[str, Any] = {"name": spec.name}
    if spec.stack is not None:
        layers = zip(spec.stack, absorber.junctions, strict=True)
        content["stack"] = [_resolved_junction(layer, junction) for layer, junction in layers]
    elif len(absorber.junctions) == 1:
        content |= _resolved_junction(spec, absorber.junctions[0])
    else:
        content["like"] = spec.like
    return content | _resolved_module(absorber)


def _resolved_junction(spec: Source, junction: Junction) -> dict[str, Any]:
    content: dict[str, Any] = spec.given("like", "eqe", "response", "quality")
    for name in ("material", "datasheet"):
        if getattr(spec, name) is not None:
            content[name] = getattr(spec, name).model_dump(exclude_none=True)
    fields = ("gap_ev", *spec.LIGHT) if spec.quality is not None else library.JUNCTION_NUMBERS
    solved = () if spec.datasheet is None else spec.datasheet.solved()  # solved again when read again
    return content | _finite(junction, tuple(field for field in fields if field not in solved))


def _resolved_module(absorber: Absorber) -> dict[str, Any]:
    modifier = absorber.incidence_modifier
    content: dict[str, Any] = {
        **_finite(absorber, library.MODULE_NUMBERS),
        "incidence_modifier": "none" if modifier is None else modifier,
        "heat_loss": {"constant_w_m2_k": absorber.heat_loss[0], "wind_w_s_m3_k": absorber.heat_loss[1]},
    }
    if len(absorber.junctions) > 1:
        content |= {"terminals": absorber.terminals, "coupling": absorber.coupling}
    return content


def _finite(record: Junction | Absorber, fields: tuple[str, ...]) -> dict[str, float]:
    """Return numeric fields of a record; one that is infinite or absent is left out: that is its default."""
    values = {field: getattr(record, field) for field in fields}
    return {field: value for field, value in values.items() if value is not None and math.isfinite(value)}
