"""The library of absorbers: YAML files in which every number stands beside its source."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from functools import cache
from importlib import resources
from types import MappingProxyType
from typing import Annotated, Any

import numpy as np
from pydantic import Field, model_validator

from yieldsim.config import tree
from yieldsim.config.explain import demand
from yieldsim.config.fields import Choice, Kind, Length, Number, Section, Text, refusal
from yieldsim.device.junction import Junction, moved_to_gap
from yieldsim.device.response import Response
from yieldsim.device.stack import Absorber

SUFFIX = ".yaml"
#: Numbers of a junction and of a module that a study or an entry may give; the names of their records' fields.
JUNCTION_NUMBERS = (
    "gap_ev", "external_radiative_efficiency", "ideality", "series_resistance_ohm_cm2", "shunt_resistance_ohm_cm2",
    "recombination_v", "built_in_v", "gap_shift_ev_per_k", "nonradiative_drift_per_k",
    "reflection", "parasitic", "transmits",
)  # fmt: skip
MODULE_NUMBERS = ("bifaciality", "incidence_modifier", "area_fraction")

_Source = Annotated[str, Text(1000, "where the value comes from")]


class Sourced(Section):
    """A number and where it comes from."""

    value: Annotated[float, Number(-1e12, 1e12)]
    source: _Source


class SourcedPair(Section):
    """Two numbers and where they come from."""

    value: Annotated[list[Annotated[float, Number(0, 1000)]], Length(2, 2, "numbers")]
    source: _Source


_Point = Annotated[list[Annotated[float, Number(0, 1e4)]], Length(2, 2, "numbers: nm, quantum efficiency")]


class SourcedCurve(Section):
    """Quantum efficiency over wavelength [nm] and where it comes from."""

    value: dict[float, Annotated[float, Number(0, 1)]] | list[_Point]
    source: _Source


class _Junction(Section):
    """What describes a junction; keys are the fields of `Junction`."""

    gap_ev: Sourced | None = None
    eqe: SourcedCurve | None = None
    external_radiative_efficiency: Sourced | None = None
    ideality: Sourced | None = None
    series_resistance_ohm_cm2: Sourced | None = None
    shunt_resistance_ohm_cm2: Sourced | None = None
    gap_shift_ev_per_k: Sourced | None = None
    nonradiative_drift_per_k: Sourced | None = None
    recombination_v: Sourced | None = None
    built_in_v: Sourced | None = None
    reflection: Sourced | None = None
    parasitic: Sourced | None = None
    transmits: Sourced | None = None


class _Layer(_Junction):
    """A junction of a stack: another entry with some values of its own, or described in full."""

    like: Annotated[str, Text(100, "the name of another entry")] | None = None

    @model_validator(mode="after")
    def _complete(self) -> _Layer:
        if self.like is None and (self.gap_ev is None or self.eqe is None):
            raise refusal("a junction without `gap_ev` and `eqe`", "these, or `like`")
        if self.like is not None and self.eqe is not None:
            raise refusal("`eqe` beside `like`", "one of them")
        return self


class _File(_Junction):
    """What an entry's file may hold; keys are the fields of `Junction` and `Absorber`."""

    title: Annotated[str, Text(200, "a title")]
    note: Annotated[str, Text(2000, "a note")] | None = None
    stack: Annotated[list[_Layer], Length(2, 6, "junctions, top first")] | None = None
    terminals: Sourced | None = None
    coupling: Sourced | None = None
    bifaciality: Sourced | None = None
    incidence_modifier: Sourced | None = None
    area_fraction: Sourced | None = None
    heat_loss: SourcedPair | None = None
    published: dict[str, Sourced] = Field(default_factory=dict)

    @model_validator(mode="after")
    def _complete(self) -> _File:
        own = [name for name in ("eqe", *JUNCTION_NUMBERS) if getattr(self, name) is not None]
        if self.stack is None and not {"gap_ev", "eqe"} <= set(own):
            raise refusal("an entry without `gap_ev` and `eqe`", "these, or `stack`")
        if self.stack is not None and own:
            raise refusal(f"`stack` beside {', '.join(own)}", "these in the junctions of the stack")
        return self


@dataclass(frozen=True, slots=True)
class Entry:
    """One entry of the library.

    Parameters
    ----------
    name : str
    title : str, in words
    absorber : Absorber, named as the entry
    published : what good devices of its kind reach: name -> Sourced
    sources : field -> source of its value
    """

    name: str
    title: str
    absorber: Absorber
    published: Mapping[str, Sourced]
    sources: Mapping[str, str]


@cache
def names() -> tuple[str, ...]:
    """Return the names of all entries, sorted."""
    folder = resources.files("yieldsim.device") / "library"
    return tuple(sorted(file.name.removesuffix(SUFFIX) for file in folder.iterdir() if file.name.endswith(SUFFIX)))


@cache
def entry(name: str) -> Entry:
    """Return an entry of the library.

    Raises
    ------
    KeyError
        If there is no such entry.
    InputError
        If its file is not as it should be.
    """
    if name not in names():
        raise KeyError(name)
    shown = f"library/{name}{SUFFIX}"
    text = (resources.files("yieldsim.device") / "library" / f"{name}{SUFFIX}").read_text(encoding="utf-8")
    return _entry(name, demand(_File, tree.parse(text, shown)))


def _entry(name: str, file: _File) -> Entry:
    if file.stack is None:
        junctions: tuple[Junction, ...] = (_junction(file),)
        sources = _sources(file)
    else:
        junctions = tuple(_junction(layer) for layer in file.stack)
        sources = {
            f"stack[{i}].{field}": source
            for i, layer in enumerate(file.stack)
            for field, source in _sources(layer).items()
        }
    module: dict[str, Any] = _numbers(file, (*MODULE_NUMBERS, "coupling"))
    if file.terminals is not None:
        module["terminals"] = int(file.terminals.value)
    if file.heat_loss is not None:
        module["heat_loss"] = tuple(file.heat_loss.value)
    sources |= {field: source for field, source in _sources(file).items() if field not in sources}
    absorber = Absorber(name=name, junctions=junctions, **module)
    return Entry(name, file.title, absorber, MappingProxyType(dict(file.published)), MappingProxyType(sources))


def _junction(file: _Junction) -> Junction:
    numbers = _numbers(file, JUNCTION_NUMBERS)
    like = getattr(file, "like", None)
    if like is not None:
        (base,) = entry(like).absorber.junctions
        gap = numbers.pop("gap_ev", base.gap_ev)
        return replace(base if gap == base.gap_ev else moved_to_gap(base, gap), **numbers)
    assert file.eqe is not None  # the file was checked for it
    points = file.eqe.value.items() if isinstance(file.eqe.value, dict) else file.eqe.value
    response = Response(*np.array([list(point) for point in points], dtype=np.float64).T)
    return Junction(response=response, **numbers)


def _numbers(file: Section, fields: tuple[str, ...]) -> dict[str, Any]:
    return {field: value.value for field in fields if (value := getattr(file, field)) is not None}


def _sources(file: Section) -> dict[str, str]:
    """Return the source of each value that stands in a file itself, not in its stack."""
    values = {field: getattr(file, field) for field in type(file).model_fields}
    kinds = (Sourced, SourcedPair, SourcedCurve)
    return {field: value.source for field, value in values.items() if isinstance(value, kinds)}


class EntryName(Kind):
    """The name of an entry of the library."""

    def take(self, value: Any) -> str:
        """Return the name; the nearest one is offered for a slip."""
        return str(Choice(names()).take(value))

    def json(self) -> dict[str, Any]:
        """Return the list of names."""
        return Choice(names()).json()
