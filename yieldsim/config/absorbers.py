"""From an absorber of a study file to the device's record, and back to plain data with every default filled in."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any, cast

from yieldsim.config import library
from yieldsim.config.absorber_schema import Absorber as Spec
from yieldsim.config.absorber_schema import Source, SweepQuality
from yieldsim.device import stack as stack_module
from yieldsim.device.junction import Junction
from yieldsim.device.response import scaled, step
from yieldsim.device.stack import Absorber


def absorber_of(spec: Spec) -> Absorber:
    """Return the absorber of a study; raises ValueError for what its records refuse."""
    module = _module_of(spec)
    if spec.stack is not None:
        return Absorber(name=spec.name, junctions=tuple(_junction_of(layer) for layer in spec.stack), **module)
    if spec.like is None:
        return Absorber(name=spec.name, junctions=(_junction_of(spec),), **module)
    entry = library.entry(spec.like).absorber
    if len(entry.junctions) == 1:
        if "terminals" in module or "coupling" in module:
            raise ValueError(f"`terminals` or `coupling` of {spec.like}, which has one junction")
        return replace(entry, name=spec.name, junctions=(_junction_of(spec),), **module)
    inside = [key for key in spec.junction_keys() if key != "like"]
    if inside:
        raise ValueError(f"{', '.join(inside)} of {spec.like}, which has several junctions; write its `stack` instead")
    return replace(entry, name=spec.name, **module)


def _module_of(spec: Spec) -> dict[str, Any]:
    """Return the given fields of a module, as `Absorber` names them."""
    module: dict[str, Any] = spec.given("terminals", "coupling", "bifaciality", "area_fraction")
    if spec.incidence_modifier is not None:
        module["incidence_modifier"] = None if spec.incidence_modifier == "none" else spec.incidence_modifier
    if spec.heat_loss is not None:
        module["heat_loss"] = (spec.heat_loss.constant_w_m2_k, spec.heat_loss.wind_w_s_m3_k)
    return module


def _junction_of(spec: Source) -> Junction:
    numbers = spec.given(*spec.QUALITY, *spec.LIGHT)
    if spec.like is None:
        gap = cast(float, spec.gap_ev)
        return Junction(gap, step(gap), **numbers)
    entry = library.entry(spec.like).absorber
    if len(entry.junctions) > 1:
        raise ValueError(f"{spec.like} as a junction: it has several; name them one by one")
    return replace(_moved(entry, spec.gap_ev).junctions[0], **numbers)


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
    content: dict[str, Any] = spec.given("like", "quality")
    if spec.quality is not None:
        return content | _finite(junction, ("gap_ev", *spec.LIGHT))
    return content | _finite(junction, library.JUNCTION_NUMBERS)


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
