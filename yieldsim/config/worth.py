"""From prices as a study gives them to the plan's: one per absorber, hours read from their file."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any, Literal, cast

from yieldsim.config.inputs import locate, sha256
from yieldsim.config.tables import read_table
from yieldsim.config.worth_schema import Worth
from yieldsim.errors import InputError, Problem
from yieldsim.study.plan import WorthPlan
from yieldsim.study.worth import HOURS_OF_YEAR

_SIZES = {"area": "area_m2", "dc_power": "dc_power_kw", "grid_power": "grid_power_kw"}


def worth_plan(worth: Worth, absorbers: Sequence[str], folder: Path, inputs: dict[str, str]) -> WorthPlan:
    """Return the plan's prices and terms.

    Parameters
    ----------
    worth : Worth of the study
    absorbers : names of all absorbers
    folder : Path that relative paths start from
    inputs : takes the fingerprint of a file of prices

    Raises
    ------
    InputError
        For a file that is no year of hourly prices.
    """
    per_w = _each(worth.module_price_per_w, absorbers)
    per_m2 = {name: price for name, price in _each(worth.module_price_per_m2, absorbers).items() if name not in per_w}
    price = worth.energy_price_per_kwh
    if isinstance(price, str):
        prices = _hours(price, folder)
        inputs[price] = sha256(locate(price, folder))
    else:
        prices = tuple(price) if isinstance(price, list) else (price,)
    same = (
        "area_cost_per_m2",
        "power_cost_per_w",
        "fixed_cost",
        "yearly_cost_per_w",
        "yearly_cost_per_m2",
        "yearly_cost",
    )
    return WorthPlan(
        currency=worth.currency,
        limited_by=cast(Literal["area", "dc_power", "grid_power"], worth.limited_by),
        size=float(getattr(worth, _SIZES[worth.limited_by])),
        energy_price=prices,
        discount_rate=worth.discount_rate,
        life_years=worth.life_years,
        per_w=per_w,
        per_m2=per_m2,
        fading=_each(worth.degradation_per_year, absorbers),
        dc_to_grid=worth.dc_to_grid if worth.limited_by == "grid_power" else 1.0,
        **{name: getattr(worth, name) for name in same},
    )


def _each(given: Any, absorbers: Sequence[str]) -> dict[str, float]:
    """Return one number per absorber from one for all or a mapping; none from nothing."""
    if given is None:
        return {}
    return dict(given) if isinstance(given, Mapping) else dict.fromkeys(absorbers, float(given))


def _hours(shown: str, folder: Path) -> tuple[float, ...]:
    table = read_table(locate(shown, folder), shown, columns=1, extra=0)
    if len(table.values) != HOURS_OF_YEAR:
        found = f"{len(table.values)} prices"
        allowed = f"{HOURS_OF_YEAR}, hour by hour from 1 January, local standard time, one a line"
        raise InputError(Problem(shown, 0, "", found, allowed))
    return tuple(float(price) for price in table.values[:, 0])
