"""The library of absorbers: YAML files in which every number stands beside its source."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from importlib import resources
from types import MappingProxyType
from typing import Annotated, Any

import numpy as np
from pydantic import Field

from yieldsim.config import tree
from yieldsim.config.explain import demand
from yieldsim.config.fields import Choice, Kind, Length, Number, Section, Text
from yieldsim.device.junction import Junction
from yieldsim.device.response import Response
from yieldsim.device.stack import Absorber

SUFFIX = ".yaml"
#: Numbers of a junction and of a module that a study or an entry may give; the names of their records' fields.
JUNCTION_NUMBERS = (
    "gap_ev", "external_radiative_efficiency", "ideality", "series_resistance_ohm_cm2", "shunt_resistance_ohm_cm2",
    "recombination_v", "built_in_v", "gap_shift_ev_per_k",
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


class _File(Section):
    """What an entry's file may hold; keys are the fields of `Junction` and `Absorber`."""

    title: Annotated[str, Text(200, "a title")]
    note: Annotated[str, Text(2000, "a note")] | None = None
    gap_ev: Sourced
    eqe: SourcedCurve
    external_radiative_efficiency: Sourced | None = None
    ideality: Sourced | None = None
    series_resistance_ohm_cm2: Sourced | None = None
    shunt_resistance_ohm_cm2: Sourced | None = None
    gap_shift_ev_per_k: Sourced | None = None
    recombination_v: Sourced | None = None
    built_in_v: Sourced | None = None
    bifaciality: Sourced | None = None
    incidence_modifier: Sourced | None = None
    area_fraction: Sourced | None = None
    heat_loss: SourcedPair | None = None
    published: dict[str, Sourced] = Field(default_factory=dict)


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
    sourced = {field: value for field in type(file).model_fields if isinstance(value := getattr(file, field), Sourced)}
    numbers = {field: each.value for field, each in sourced.items()}
    points = file.eqe.value.items() if isinstance(file.eqe.value, dict) else file.eqe.value
    response = Response(*np.array([list(point) for point in points], dtype=np.float64).T)
    given: dict[str, Any] = {field: numbers[field] for field in JUNCTION_NUMBERS if field in numbers}
    only = Junction(response=response, **given)
    module: dict[str, Any] = {field: numbers[field] for field in MODULE_NUMBERS if field in numbers}
    if file.heat_loss is not None:
        module["heat_loss"] = tuple(file.heat_loss.value)
    sources = {field: each.source for field, each in sourced.items()} | {"eqe": file.eqe.source}
    if file.heat_loss is not None:
        sources["heat_loss"] = file.heat_loss.source
    absorber = Absorber(name=name, junctions=(only,), **module)
    return Entry(name, file.title, absorber, MappingProxyType(dict(file.published)), MappingProxyType(sources))


class EntryName(Kind):
    """The name of an entry of the library."""

    def take(self, value: Any) -> str:
        """Return the name; the nearest one is offered for a slip."""
        return Choice(names()).take(value)

    def json(self) -> dict[str, Any]:
        """Return the list of names."""
        return Choice(names()).json()
