"""A mounting's year under other inputs without running it again: classes of hours, exponentials, power points."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from yieldsim.device.stack import Absorber
from yieldsim.study import store
from yieldsim.study.chance_device import Device, Offsets, device, power
from yieldsim.study.chance_inputs import BY_NAME, INPUTS, OF_JUNCTION, SHAPES, error_shapes, is_ideal, is_limit
from yieldsim.study.chance_light import ClassLight
from yieldsim.study.hourly import by_front

Array = NDArray[np.float64]

Dimension = tuple[str, str, int]  # input, owner, and which of several numbers it takes
_OF_MODEL = ("model_clear", "model_cloud")
_MOST = 2.0  # of a logarithm: no input moves a band by more than sevenfold, however far squares are led on


def junction_owner(absorber: Absorber, i: int) -> str:
    """Return what a junction's draws are told apart by: what it is made of, whatever the absorber is called."""
    return "junction " + store.fingerprint(absorber.junctions[i])


def absorber_owner(absorber: Absorber) -> str:
    """Return what an absorber's draws are told apart by: its junctions and how they are joined."""
    return "absorber " + store.fingerprint(absorber.junctions, absorber.terminals)


def owners(name: str, site: str, absorbers: Sequence[Absorber]) -> list[tuple[str, str]]:
    """Return (owner, for people) of an input at a site, each once; limits own nothing."""
    kind = BY_NAME[name].owner
    if kind == "all":
        return [("all", "all")]
    if kind == "site":
        return [(f"site {site}", site)]
    found: dict[str, str] = {}
    for absorber in absorbers:
        if kind == "absorber" and not is_limit(absorber):
            found.setdefault(absorber_owner(absorber), absorber.name)
        if kind == "junction":
            several = len(absorber.junctions) > 1
            for i, junction in enumerate(absorber.junctions):
                if not is_ideal(junction):
                    said = f"{absorber.name}, junction {i + 1}" if several else absorber.name
                    found.setdefault(junction_owner(absorber, i), said)
    return list(found.items())


def dimensions(site: str, absorbers: Sequence[Absorber]) -> list[Dimension]:
    """Return all numbers that are drawn at a site, in a fixed order."""
    return [
        (each.name, owner, number)
        for each in INPUTS
        for owner, _ in owners(each.name, site, absorbers)
        for number in range(SHAPES if each.name in _OF_MODEL else 1)
    ]


@dataclass(frozen=True, slots=True)
class Spreads:
    """Standard deviations, of a site's inputs and of each absorber's.

    Parameters
    ----------
    site : input -> spread, of all inputs that no absorber owns
    absorbers : per absorber: input -> spread, of those that absorbers own
    """

    site: Mapping[str, float]
    absorbers: tuple[Mapping[str, float], ...]


@dataclass(frozen=True, slots=True, eq=False)
class _Places:
    """Where an absorber's numbers stand among those drawn; the place after the last holds 0, for what is not drawn.

    Parameters
    ----------
    of_junctions : input -> (m,) int array
    coefficient : int, of its temperature coefficient
    """

    of_junctions: Mapping[str, NDArray[np.intp]]
    coefficient: int


@dataclass(frozen=True, slots=True, eq=False)
class Shortcut:
    """A mounting's year, ready to be told under other inputs; made by `Shortcut.of`.

    Parameters
    ----------
    light : ClassLight
    absorbers : tuple of Absorber
    devices : Device of each
    glass : (n_absorber,) int array, which glass of the light each has
    spreads : Spreads
    places : of each absorber's numbers among those drawn
    air : (n_input,) int array, places of the inputs of the air
    model : (2, SHAPES) int array, places of the errors by band
    heat : int, place of the heat loss
    """

    light: ClassLight
    absorbers: tuple[Absorber, ...]
    devices: tuple[Device, ...]
    glass: NDArray[np.intp]
    spreads: Spreads
    places: tuple[_Places, ...]
    air: NDArray[np.intp]
    model: NDArray[np.intp]
    heat: int

    @classmethod
    def of(
        cls, light: ClassLight, absorbers: Sequence[Absorber], spreads: Spreads, drawn: Sequence[Dimension]
    ) -> Shortcut:
        """Fold the absorbers and look up where each of their numbers will stand.

        Parameters
        ----------
        light : ClassLight of the same absorbers
        absorbers : sequence of Absorber
        spreads : Spreads
        drawn : what the numbers of a draw are, from `dimensions`
        """
        absorbers = tuple(absorbers)
        devices = tuple(
            device(each, tuple(0.0 if is_ideal(j) else own["edge_ev"] for j in each.junctions))
            for each, own in zip(absorbers, spreads.absorbers, strict=True)
        )
        glass = np.empty(len(absorbers), dtype=np.intp)
        for number, (_, members) in enumerate(by_front(absorbers)):
            glass[members] = number
        column = {dimension: place for place, dimension in enumerate(drawn)}
        by_name = {name: place for (name, _, number), place in column.items() if number == 0}
        air = np.array([by_name[name] for name in light.names], dtype=np.intp)
        model = np.array([[column[name, "all", number] for number in range(SHAPES)] for name in _OF_MODEL])
        places = tuple(_places(absorber, column) for absorber in absorbers)
        return cls(light, absorbers, devices, glass, spreads, places, air, model, by_name["heat_loss"])

    def energies(self, drawn: Array) -> tuple[Array, Array]:
        """Return what each absorber gives in each draw.

        Parameters
        ----------
        drawn : (n, n_dimension) array [1], in spreads; zeros for the middle

        Returns
        -------
        (n, n_absorber) arrays: power summed over the intervals [W m-2], power at standard conditions [W m-2]
        """
        drawn = np.concatenate([drawn, np.zeros((len(drawn), 1))], axis=1)
        before = self.light.front.sum(axis=2), None if self.light.rear is None else self.light.rear.sum(axis=2)
        shed = BY_NAME["heat_loss"].value(self.spreads.site["heat_loss"] * drawn[:, self.heat])
        offsets = [self._offsets(a, drawn) for a in range(len(self.absorbers))]
        energy, rating = np.empty((2, len(drawn), len(self.absorbers)))
        for k, numbers in enumerate(drawn):
            front, rear = self._light(numbers)
            now = front.sum(axis=2), None if rear is None else rear.sum(axis=2)
            for a, device_of in enumerate(self.devices):
                g = self.glass[a]
                temperature = self.light.temp_air + self.light.rise[a] * self._warmth(a, now, before) / shed[k]
                behind = None if rear is None else rear[g]
                gives = power(device_of, offsets[a].of(k), front[g], behind, temperature)
                energy[k, a], rating[k, a] = self.light.weight @ gives, gives[-1]
        return energy, rating

    def _warmth(self, a: int, now: tuple[Array, Array | None], before: tuple[Array, Array | None]) -> Array:
        """Return the light that warms an absorber over that in the middle, (n_class,) [1]; sums by glass and class."""
        g, gain = self.glass[a], self.absorbers[a].bifaciality
        if now[1] is None or before[1] is None or gain == 0:
            return np.asarray(now[0][g] / before[0][g])
        return np.asarray((now[0][g] + gain * now[1][g]) / (before[0][g] + gain * before[1][g]))

    def _light(self, drawn: Array) -> tuple[Array, Array | None]:
        """Return the light of each class behind each glass in one draw."""
        coefficients = self.light.terms(drawn[self.air])
        clear, cloud = (
            self.spreads.site[name] * (drawn[place] @ error_shapes())
            for name, place in zip(_OF_MODEL, self.model, strict=True)
        )
        error = clear + self.light.cloudy[:, None] * cloud
        front = _shifted(self.light.front, self.light.front_moves, coefficients, error)
        if self.light.rear is None or self.light.rear_moves is None:
            return front, None
        return front, _shifted(self.light.rear, self.light.rear_moves, coefficients, error)

    def _offsets(self, a: int, drawn: Array) -> Offsets:
        spread, places = self.spreads.absorbers[a], self.places[a]
        response, radiative, resistance = (
            BY_NAME[name].value(spread[name] * drawn[:, places.of_junctions[name]])
            for name in ("response", "external_radiative_efficiency", "resistances")
        )
        coefficient = spread["temperature_coefficient"] * drawn[:, places.coefficient]
        return Offsets(drawn[:, places.of_junctions["edge_ev"]], response, radiative, resistance, coefficient)


def _places(absorber: Absorber, column: Mapping[Dimension, int]) -> _Places:
    nowhere = len(column)
    own = [junction_owner(absorber, i) for i in range(len(absorber.junctions))]
    return _Places(
        {name: np.array([column.get((name, one, 0), nowhere) for one in own]) for name in OF_JUNCTION},
        column.get(("temperature_coefficient", absorber_owner(absorber), 0), nowhere),
    )


def _shifted(base: Array, moves: Array, coefficients: Array, error: Array) -> Array:
    """Return base times exp(moves), and times exp(error) with each class's sum kept; the standard spectrum as it is.

    Parameters
    ----------
    base : (n_glass, n_class, n_band) array [W m-2]
    moves : (n_term, n_glass, n_class, n_band) array [1]
    coefficients : (n_term,) array [1]
    error : (n_class, n_band) array [1]
    """
    out = base
    if len(coefficients):
        logarithm = (coefficients @ moves.reshape(len(coefficients), -1)).reshape(base.shape)
        out = base * np.exp(np.minimum(np.maximum(logarithm, -_MOST), _MOST))
    wrong = out * np.exp(error)
    total = out.sum(axis=2)
    kept = np.divide(total, wrong.sum(axis=2), out=np.zeros_like(total), where=total > 0)
    found = np.asarray(wrong * kept[:, :, None])
    found[:, -1] = base[:, -1]
    return found
