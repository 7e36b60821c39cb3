"""What a year's energy is worth: sold hour by hour, then over the plant's life, against the reference absorber."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from yieldsim.constants import STANDARD_IRRADIANCE
from yieldsim.device.stack import Absorber
from yieldsim.study import annual, money
from yieldsim.study.annual import Ratings
from yieldsim.study.hourly import PlaneYear, SiteSky
from yieldsim.study.plan import LossesPlan, Row, WorthPlan

Array = NDArray[np.float64]
Columns = Mapping[str, Sequence[Any]]
Draws = Mapping[tuple[str, str, str], Array]  # (site, mounting, absorber) -> each draw's yield over the study's [1]

HOURS_OF_YEAR = 8760
_W_PER_KW = 1000.0
_29_FEBRUARY = 59  # days before it


def sold_rows(
    site: str,
    sky: SiteSky,
    year: PlaneYear,
    absorbers: Sequence[Absorber],
    ratings: Ratings,
    losses: LossesPlan,
    plan: WorthPlan,
) -> list[Row]:
    """Return one row per absorber: what a rated kilowatt sells in a stretch of time, and for how much.

    Parameters
    ----------
    site : str
    sky : SiteSky
    year : PlaneYear of one mounting
    absorbers : those of ``year``
    ratings : Ratings of them
    losses : LossesPlan
    plan : WorthPlan

    Returns
    -------
    rows of ``site, mounting, absorber, sold_kwh_kwp, revenue_per_kwp``, which add up over stretches of time

    Notes
    -----
    Power behind all losses in kW per rated kW; where grid power limits, what exceeds 1/dc_to_grid in an interval is not
    sold. Prices are those of the interval's hour in local standard time; a leap day has those of the day before.
    """
    kept = annual.kept_share(losses)[sky.month]
    power = year.power * kept / ratings.terminals[:, None]
    if plan.limited_by == "grid_power":
        power = np.minimum(power, 1.0 / plan.dc_to_grid)
    energy = power * (sky.weather.interval_s / 3600.0)
    price = prices_at(sky, plan.energy_price)
    return [
        {
            "site": site,
            "mounting": year.mounting.name,
            "absorber": absorber.name,
            "sold_kwh_kwp": float(energy[i].sum()),
            "revenue_per_kwp": float(energy[i] @ price),
        }
        for i, absorber in enumerate(absorbers)
    ]


def prices_at(sky: SiteSky, prices: tuple[float, ...]) -> Array:
    """Return the price in each lit interval, (n,) [currency/kWh], from 1, 12 or 8760 prices."""
    if len(prices) == 1:
        return np.full(len(sky.lit), prices[0])
    if len(prices) == 12:
        return np.asarray(np.asarray(prices, dtype=np.float64)[sky.month])
    weather = sky.weather
    local = weather.time[sky.lit] + weather.interval_s // 2 + round(weather.utc_offset_h * 3600)
    day = local.astype("datetime64[s]").astype("datetime64[D]")
    first = day.astype("datetime64[Y]")
    number = (day - first).astype(np.int64)
    leap = ((first + 1).astype("datetime64[D]") - first.astype("datetime64[D]")).astype(np.int64) == 366
    number = number - (leap & (number >= _29_FEBRUARY))
    hourly: Array = np.asarray(prices, dtype=np.float64)
    return np.asarray(hourly[number * 24 + local % 86400 // 3600])


@dataclass(frozen=True, slots=True)
class Plant:
    """A plant with one absorber, in numbers; each a float or an array over draws.

    Parameters
    ----------
    power_kw, area_m2 : [kW], [m2]
    energy : [kWh], sold in the first year
    revenue : [currency], of the first year
    capital : [currency]
    yearly_cost : [currency/year]
    output, costs : [year], present worth factors of the plant's output and of level costs
    """

    power_kw: float
    area_m2: float
    energy: Any
    revenue: Any
    capital: float
    yearly_cost: float
    output: float
    costs: float

    def value(self) -> Any:
        """Return the net present value [currency]."""
        return money.net_present_value(self.revenue, self.yearly_cost, self.capital, self.output, self.costs)

    def cost_of_energy(self) -> Any:
        """Return the cost of energy [currency/kWh]."""
        return money.cost_of_energy(self.energy, self.yearly_cost, self.capital, self.output, self.costs)


def plant_of(plan: WorthPlan, absorber: str, efficiency: float, sold: Any, revenue: Any) -> Plant:
    """Return a plant of the size that the study limits.

    Parameters
    ----------
    plan : WorthPlan
    absorber : str
    efficiency : float [1], of the module at standard conditions
    sold : [kWh/kW], in the first year, a float or an array over draws
    revenue : [currency/kW], likewise
    """
    if plan.limited_by == "area":
        area = plan.size
        power = area * efficiency
    else:
        power = plan.size * (plan.dc_to_grid if plan.limited_by == "grid_power" else 1.0)
        area = power / efficiency
    watts = power * _W_PER_KW
    module = plan.module_price_per_m2(absorber, efficiency)
    capital = area * (module + plan.area_cost_per_m2) + watts * plan.power_cost_per_w + plan.fixed_cost
    yearly = watts * plan.yearly_cost_per_w + area * plan.yearly_cost_per_m2 + plan.yearly_cost
    fading = plan.degradation(absorber)
    return Plant(
        power_kw=power,
        area_m2=area,
        energy=sold * power,
        revenue=revenue * power,
        capital=capital,
        yearly_cost=yearly,
        output=float(money.present_worth_of_one(plan.discount_rate, plan.life_years, -fading)),
        costs=float(money.present_worth_of_one(plan.discount_rate, plan.life_years)),
    )


def rows(
    plan: WorthPlan,
    absorbers: Sequence[Absorber],
    ratings: Ratings,
    reference: str,
    sold: Sequence[Row],
    draws: Draws | None = None,
) -> list[Row]:
    """Return one row per site, mounting and absorber: what the plant costs, earns, and which module price breaks even.

    Parameters
    ----------
    plan : WorthPlan
    absorbers, ratings : of the study
    reference : str, the absorber the others are set against
    sold : rows of `sold_rows`, whole years
    draws : each draw's yield over the study's, from chance, or None; with them amounts have a P90, P50 and P10

    Notes
    -----
    Net present value is linear in the module price: the price per area at which an absorber's plant is worth what the
    reference's is lies (NPV - NPV_ref)/area above its own. With draws the sold energy and its revenue follow the
    draw's yield in proportion. P90 of a price or value is exceeded with 90 % probability; so is that of a cost.
    """
    efficiency = {
        absorber.name: float(ratings.terminals[i] * absorber.area_fraction / STANDARD_IRRADIANCE)
        for i, absorber in enumerate(absorbers)
    }
    found: list[Row] = []
    by_place: dict[tuple[str, str], dict[str, Row]] = {}
    for row in sold:
        by_place.setdefault((str(row["site"]), str(row["mounting"])), {})[str(row["absorber"])] = row
    for (site, mounting), members in by_place.items():
        plants = {name: _plant(plan, name, efficiency[name], row) for name, row in members.items()}
        price = plan.module_price_per_m2(reference, efficiency[reference])
        drawn = None if draws is None else _drawn(plan, efficiency, members, draws)
        for name, plant in plants.items():
            row = {"site": site, "mounting": mounting, "absorber": name, "currency": plan.currency}
            row |= _amounts(plan, name, efficiency[name], plant, plants[reference], price)
            if drawn is not None:
                row |= _spread(plan, name, efficiency[name], drawn[name], drawn[reference], price)
            found.append(row)
    return found


def _plant(plan: WorthPlan, name: str, efficiency: float, row: Row, share: Any = 1.0) -> Plant:
    return plant_of(plan, name, efficiency, float(row["sold_kwh_kwp"]) * share, float(row["revenue_per_kwp"]) * share)


def _drawn(
    plan: WorthPlan, efficiency: Mapping[str, float], members: Mapping[str, Row], draws: Draws
) -> dict[str, Plant] | None:
    """Return each absorber's plants over the draws; None where a draw is missing."""
    plants = {}
    for name, row in members.items():
        yields = draws.get((str(row["site"]), str(row["mounting"]), name))
        if yields is None:
            return None
        plants[name] = _plant(plan, name, efficiency[name], row, yields)
    return plants


def _amounts(
    plan: WorthPlan, name: str, efficiency: float, plant: Plant, other: Plant, other_price: float
) -> dict[str, Any]:
    """Return the amounts of one plant set against the reference's."""
    value, base = plant.value(), other.value()
    own = plan.module_price_per_m2(name, efficiency)
    even = own + (value - base) / plant.area_m2
    return {
        "power_kw": plant.power_kw,
        "area_m2": plant.area_m2,
        "energy_sold_kwh": plant.energy,
        "energy_life_kwh": plant.energy * _years_of_output(plan, name),
        "revenue_first_year": plant.revenue,
        "capital": plant.capital,
        "yearly_cost": plant.yearly_cost,
        "cost_of_energy_per_kwh": plant.cost_of_energy(),
        "net_present_value": value,
        "net_present_value_per_kwp": value / plant.power_kw,
        "net_present_value_per_m2": value / plant.area_m2,
        "module_price_per_m2": own,
        "module_price_per_w": own / (efficiency * STANDARD_IRRADIANCE),
        "break_even_price_per_m2": even,
        "break_even_price_per_w": even / (efficiency * STANDARD_IRRADIANCE),
        "break_even_per_m2": even - other_price,
    }


_WITH_INTERVALS = ("cost_of_energy_per_kwh", "net_present_value", "break_even_price_per_m2", "break_even_per_m2")


def _spread(
    plan: WorthPlan, name: str, efficiency: float, plant: Plant, other: Plant, other_price: float
) -> dict[str, float]:
    amounts = _amounts(plan, name, efficiency, plant, other, other_price)
    row: dict[str, float] = {}
    for key in _WITH_INTERVALS:
        low, middle, high = np.quantile(np.broadcast_to(amounts[key], np.shape(plant.energy)), (0.1, 0.5, 0.9))
        row |= {f"{key}_p90": float(low), f"{key}_p50": float(middle), f"{key}_p10": float(high)}
    return row


def _years_of_output(plan: WorthPlan, name: str) -> float:
    """Return how many first years' output a life gives."""
    return float(money.present_worth_of_one(0.0, plan.life_years, -plan.degradation(name)))
