"""Money over a plant's life: present values, annuities and the cost of energy."""

from __future__ import annotations

from typing import Any

import numpy as np


def present_worth_of_one(discount_rate: Any, life_years: Any, growth: Any = 0.0) -> Any:
    """Return today's worth of one unit at the end of each year of a life, the first one 1, then growing.

    Parameters
    ----------
    discount_rate : (...) array [1/year], above -1
    life_years : (...) array [year], whole, 1 or more
    growth : (...) array [1/year], change from year to year; -degradation for a plant's output

    Returns
    -------
    (...) array [1]

    Raises
    ------
    ValueError
        For a rate or growth of -1 or less, a life below 1.

    Notes
    -----
    sum over n = 1..N of (1 + g)^(n - 1) / (1 + r)^n = (1 - q^N) / (r - g) with q = (1 + g)/(1 + r), N/(1 + r) where
    r = g: the present worth factor of a geometric gradient; with g = 0 the uniform present worth factor.

    References
    ----------
    W. Short, D. J. Packey, T. Holt, A Manual for the Economic Evaluation of Energy Efficiency and Renewable Energy
    Technologies, NREL/TP-462-5173 (1995), section on present value (from memory).
    """
    rate, years, grown = (np.asarray(value, dtype=np.float64) for value in (discount_rate, life_years, growth))
    if np.any(rate <= -1) or np.any(grown <= -1):
        raise ValueError("a rate of -1 or less")
    if np.any(years < 1):
        raise ValueError("a life below one year")
    # ln q keeps its digits where the two rates are nearly equal; x/(e^x - 1) has no pole there.
    log_q = np.log1p(grown) - np.log1p(rate)
    with np.errstate(invalid="ignore", divide="ignore"):
        total = np.expm1(years * log_q) / np.expm1(log_q)
    return np.where(np.abs(log_q) < 1e-12, years, total)[()] / (1 + rate)


def capital_recovery(discount_rate: Any, life_years: Any) -> Any:
    """Return the level yearly payment that a unit of capital costs over its life, (...) [1/year]."""
    return 1.0 / present_worth_of_one(discount_rate, life_years)


def present_value(flows: Any, discount_rate: float) -> Any:
    """Return today's worth of what comes at the end of each year, (..., year) array [currency] -> (...) [currency]."""
    amounts = np.asarray(flows, dtype=np.float64)
    years = np.arange(1, amounts.shape[-1] + 1)
    # Not a matrix product: its order of adding, and so the last digit, depends on how many rows there are.
    return (amounts * (1.0 + discount_rate) ** -years.astype(np.float64)).sum(axis=-1)


def net_present_value(revenue: Any, yearly_cost: Any, capital: Any, costs: Any) -> Any:
    """Return revenue less cost less capital in today's money.

    Parameters
    ----------
    revenue : (...) array [currency], present value of all that is sold over the life
    yearly_cost : (...) array [currency/year], level
    capital : (...) array [currency], spent at the start
    costs : (...) array [year], present worth factor of level costs

    Returns
    -------
    (...) array [currency]
    """
    return revenue - yearly_cost * costs - capital


def cost_of_energy(energy: Any, yearly_cost: Any, capital: Any, costs: Any) -> Any:
    """Return the level price at which a life pays for itself.

    Parameters
    ----------
    energy : (...) array [kWh], discounted as money is: the present worth of a unit of currency for each kWh sold
    yearly_cost, capital, costs : as above

    Returns
    -------
    (...) array [currency/kWh]; infinite where nothing is sold

    Notes
    -----
    LCOE = TLCC / sum over n of Q_n / (1 + r)^n, TLCC = capital + yearly cost x present worth factor.

    References
    ----------
    As of `present_worth_of_one`, section on the levelized cost of energy (from memory).
    """
    with np.errstate(divide="ignore", invalid="ignore"):
        return (capital + yearly_cost * costs) / np.asarray(energy, dtype=np.float64)[()]
