"""The account of a year: sums by month, and the factors that lead from light to energy."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from yieldsim.constants import STANDARD_IRRADIANCE
from yieldsim.device.bank import Standard
from yieldsim.device.stack import Absorber
from yieldsim.study.hourly import PlaneYear, bank_of
from yieldsim.study.plan import LossesPlan

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Sums:
    """Sums over the lit intervals of each month; the last axis is the month (12).

    Parameters
    ----------
    light : (12,) array [Wh m-2], H
    entered : (n_absorber, 12) array [Wh m-2], S
    charge : (n_junction, 12) array [A h m-2]
    cool, warm : (n_junction, 12) array [Wh m-2], each junction at its own power point, 25 degC and cell temperature
    terminals : (n_absorber, 12) array [Wh m-2]
    delivered : (n_absorber, 12) array [Wh m-2], after the losses behind the absorber
    hours : (12,) array [h], covered by the weather
    """

    light: Array
    entered: Array
    charge: Array
    cool: Array
    warm: Array
    terminals: Array
    delivered: Array
    hours: Array

    def year(self) -> Sums:
        """Return the sums of the whole year, the last axis of length 1."""
        return Sums(**{name: getattr(self, name).sum(axis=-1, keepdims=True) for name in self.__slots__})


def added(first: Sums, second: Sums) -> Sums:
    """Return the sums of two stretches of time together."""
    return Sums(**{name: getattr(first, name) + getattr(second, name) for name in Sums.__slots__})


def mean(years: Sequence[Sums]) -> Sums:
    """Return the mean of several years' sums, month by month."""
    if len(years) == 1:
        return years[0]
    return Sums(**{name: np.mean([getattr(year, name) for year in years], axis=0) for name in Sums.__slots__})


@dataclass(frozen=True, slots=True)
class Ratings:
    """What absorbers do under standard test conditions.

    Parameters
    ----------
    junction_of : (n_junction,) int array, the absorber each junction belongs to
    current : (n_junction,) array [A m-2]
    power : (n_junction,) array [W m-2], each junction at its own power point
    terminals : (n_absorber,) array [W m-2]
    """

    junction_of: NDArray[np.intp]
    current: Array
    power: Array
    terminals: Array

    @classmethod
    def of(cls, absorbers: Sequence[Absorber]) -> Ratings:
        """Rate absorbers with the code that computes the hours."""
        standard = cls.standard(absorbers)
        return cls(
            np.asarray(bank_of(tuple(absorbers)).absorber_of),
            standard.photocurrent,
            standard.power,
            standard.terminal_power,
        )

    def module_efficiency(self, absorbers: Sequence[Absorber]) -> Array:
        """Return the efficiency of each absorber's module at standard conditions, (n_absorber,) [1]."""
        area = np.array([absorber.area_fraction for absorber in absorbers])
        return np.asarray(self.terminals * area / STANDARD_IRRADIANCE)

    @staticmethod
    def standard(absorbers: Sequence[Absorber]) -> Standard:
        """Return the whole rating: currents, voltages, efficiencies, temperature coefficients."""
        return bank_of(tuple(absorbers)).standard()


@dataclass(frozen=True, slots=True)
class Factors:
    """Factors from light to energy, each (n_absorber, period) [1]; NaN in a period without light."""

    optical: Array
    spectral: Array
    low_light: Array
    temperature: Array
    mismatch: Array
    system: Array

    def performance_ratio(self) -> Array:
        """Return the product of all factors."""
        return np.asarray(
            self.optical * self.spectral * self.low_light * self.temperature * self.mismatch * self.system
        )


def sums(year: PlaneYear, month: NDArray[np.intp], hours: Array, interval_s: int, losses: LossesPlan) -> Sums:
    """Add up a year.

    Parameters
    ----------
    year : PlaneYear of n lit intervals
    month : (n,) int array, 0 to 11
    hours : (12,) array [h], covered by the weather in each month
    interval_s : int [s]
    losses : LossesPlan
    """
    member = (month[:, None] == np.arange(12)) * (interval_s / 3600.0)
    kept = kept_share(losses)
    terminals = year.power @ member
    return Sums(
        light=year.plane_of_array @ member,
        entered=year.entered @ member,
        charge=year.current @ member,
        cool=year.power_cool @ member,
        warm=year.power_warm @ member,
        terminals=terminals,
        delivered=terminals * kept,
        hours=hours,
    )


def kept_share(losses: LossesPlan) -> Array:
    """Return the share of energy that all losses leave in each month, (12,) [1]."""
    kept: Array = np.ones(12)
    for monthly in losses.monthly.values():
        kept = kept * (1 - np.asarray(monthly))
    return kept


def factors(total: Sums, ratings: Ratings) -> Factors:
    """Return the factors of each period.

    Parameters
    ----------
    total : Sums, of months or of the year
    ratings : Ratings of the same absorbers

    Notes
    -----
    With w_j = P_ref,j / sum P_ref,j over the junctions of an absorber:
    optical = S/H; spectral = sum w_j (charge_j/J_ref,j) / (S/1000); low light = sum P_j(25 degC) / [sum P_ref,j x
    sum w_j charge_j/J_ref,j]; temperature = sum P_j(T) / sum P_j(25 degC); mismatch = [P_terminals / sum P_j(T)] /
    [P_ref,terminals / sum P_ref,j]; system = delivered / P_terminals. Their product is the performance ratio.
    """
    of, n_absorber = ratings.junction_of, len(ratings.terminals)
    belongs = (of == np.arange(n_absorber)[:, None]).astype(np.float64)
    rated = belongs @ ratings.power
    weight = ratings.power / rated[of]
    suns = belongs @ (total.charge * (weight / ratings.current)[:, None])
    cool, warm = belongs @ total.cool, belongs @ total.warm
    return Factors(
        optical=_ratio(total.entered, np.broadcast_to(total.light, total.entered.shape)),
        spectral=_ratio(suns * STANDARD_IRRADIANCE, total.entered),
        low_light=_ratio(cool, suns * rated[:, None]),
        temperature=_ratio(warm, cool),
        mismatch=_ratio(total.terminals * rated[:, None], warm * ratings.terminals[:, None]),
        system=_ratio(total.delivered, total.terminals),
    )


def _ratio(above: Array, below: Array) -> Array:
    return np.asarray(np.divide(above, below, out=np.full(np.shape(above), np.nan), where=below > 0))
