"""What a year's energy is worth: sold hour by hour, then over the plant's life, against the reference absorber."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import PchipInterpolator

from yieldsim.constants import STANDARD_IRRADIANCE
from yieldsim.device.stack import Absorber
from yieldsim.study import annual, money
from yieldsim.study.annual import Ratings
from yieldsim.study.hourly import PlaneYear, SiteSky
from yieldsim.study.plan import LossesPlan, Row, WorthPlan

Array = NDArray[np.float64]
Draws = Mapping[tuple[str, str, str], Array]  # (site, mounting, absorber) -> each draw's yield over the study's [1]

HOURS_OF_YEAR = 8760
_W_PER_KW = 1000.0
_29_FEBRUARY = 59  # days before it
_FINE = tuple(step / 20 for step in range(10, 29))  # 0.5 to 1.4

#: Shares of a plant's output at which clipped energy is kept: an old plant, or one in a poor year, is clipped less.
#: Between them it is interpolated, from 0.6 up within 0.02 % of the hours' own sum (measured at ratios of 1.1 to 3).
SHARES = (0.0, 0.2, 0.3, 0.4, *_FINE, 1.5, 1.75, 2.0)


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
    rows of ``site, mounting, absorber, hours, sold_kwh_kwp, revenue_per_kwp``, which add up over stretches of time;
    where grid power limits, also what were sold and earned if the output were each of `SHARES` of what it is

    Notes
    -----
    Power behind all losses in kW per rated kW. Where grid power limits, every absorber's plant has the same rated
    power, dc_to_grid times the grid's, and what exceeds 1/dc_to_grid in an interval is not sold: an absorber whose
    output stands high at noon is clipped more than one that gains morning and evening. Means over an hour hide what
    passing clouds would have had clipped within it. Prices are those of the interval's hour in local standard time;
    a leap day has those of the day before.
    """
    kept = annual.kept_share(losses)[sky.month]
    power = year.power * kept / ratings.terminals[:, None]
    step_h = sky.weather.interval_s / 3600.0
    price = prices_at(sky, plan.energy_price)
    shares: dict[str, float] = {"": 1.0}
    if plan.limited_by == "grid_power":
        shares |= {f"_at_{share:g}": share for share in SHARES}
    rows: list[Row] = [
        {"site": site, "mounting": year.mounting.name, "absorber": absorber.name, "hours": len(sky.weather) * step_h}
        for absorber in absorbers
    ]
    for suffix, share in shares.items():
        energy = step_h * (np.minimum(share * power, 1.0 / plan.dc_to_grid) if len(shares) > 1 else power)
        for i, row in enumerate(rows):
            row[f"sold_kwh_kwp{suffix}"] = float(energy[i].sum())
            row[f"revenue_per_kwp{suffix}"] = float(energy[i] @ price)
    return rows


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
class Sales:
    """What a rated kilowatt sells over a plant's life; each a float or an array over draws.

    Parameters
    ----------
    energy, revenue : [kWh/kW], [currency/kW], in the first year
    energy_life : [kWh/kW], over the life
    energy_present, revenue_present : [kWh/kW], [currency/kW], over the life, discounted
    """

    energy: Any
    revenue: Any
    energy_life: Any
    energy_present: Any
    revenue_present: Any


def sales_of(plan: WorthPlan, row: Row, share: Any = 1.0) -> Sales:
    """Return what is sold over a life.

    Parameters
    ----------
    plan : WorthPlan
    row : of `sold_rows`, a whole year
    share : (...) array [1], output over the study's: 1, or each draw's yield over the study's

    Notes
    -----
    Output falls by the absorber's degradation from year to year, the first year whole. Sold energy falls with it,
    but for what the grid does not take: that falls first.
    """
    rate, years, fading = plan.discount_rate, plan.life_years, plan.degradation(str(row["absorber"]))
    if plan.limited_by != "grid_power":
        energy, revenue = (share * float(row[name]) for name in ("sold_kwh_kwp", "revenue_per_kwp"))
        present = float(money.present_worth_of_one(rate, years, -fading))
        undiscounted = float(money.present_worth_of_one(0.0, years, -fading))
        return Sales(energy, revenue, energy * undiscounted, energy * present, revenue * present)
    shares = np.multiply.outer(np.asarray(share, dtype=np.float64), (1.0 - fading) ** np.arange(years))
    energies, revenues = (_at_shares(row, name, shares) for name in ("sold_kwh_kwp", "revenue_per_kwp"))
    present_energy, present_revenue = (money.present_value(flows, rate) for flows in (energies, revenues))
    return Sales(energies[..., 0], revenues[..., 0], energies.sum(axis=-1), present_energy, present_revenue)


def _at_shares(row: Row, name: str, shares: Array) -> Array:
    """Return what is sold or earned at shares of the output, between those kept by a cubic that never overshoots."""
    kept = [float(row[f"{name}_at_{share:g}"]) for share in SHARES]
    return np.asarray(PchipInterpolator(SHARES, kept)(np.clip(shares, SHARES[0], SHARES[-1])))


@dataclass(frozen=True, slots=True)
class Plant:
    """A plant with one absorber, in numbers.

    Parameters
    ----------
    power_kw, area_m2 : [kW], [m2]
    sales : Sales of a rated kilowatt
    capital : [currency]
    yearly_cost : [currency/year]
    costs : [year], present worth factor of level costs
    """

    power_kw: float
    area_m2: float
    sales: Sales
    capital: float
    yearly_cost: float
    costs: float

    def value(self) -> Any:
        """Return the net present value [currency]."""
        revenue = self.sales.revenue_present * self.power_kw
        return money.net_present_value(revenue, self.yearly_cost, self.capital, self.costs)

    def cost_of_energy(self) -> Any:
        """Return the cost of energy [currency/kWh]."""
        energy = self.sales.energy_present * self.power_kw
        return money.cost_of_energy(energy, self.yearly_cost, self.capital, self.costs)


def plant_of(plan: WorthPlan, absorber: str, efficiency: float, sales: Sales) -> Plant:
    """Return a plant of the size that the study limits.

    Parameters
    ----------
    plan : WorthPlan
    absorber : str
    efficiency : float [1], of the module at standard conditions
    sales : Sales of a rated kilowatt
    """
    if plan.limited_by == "area":
        area = plan.size
        power = area * efficiency
    else:
        power = plan.size * (plan.dc_to_grid if plan.limited_by == "grid_power" else 1.0)
        area = power / efficiency
    watts = power * _W_PER_KW
    module = plan.module_price_per_m2(absorber, efficiency)
    return Plant(
        power_kw=power,
        area_m2=area,
        sales=sales,
        capital=area * (module + plan.area_cost_per_m2) + watts * plan.power_cost_per_w + plan.fixed_cost,
        yearly_cost=watts * plan.yearly_cost_per_w + area * plan.yearly_cost_per_m2 + plan.yearly_cost,
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
    reference's is lies (NPV - NPV_ref)/area above its own; below zero, no price is low enough. With draws the output
    of every hour follows the draw's yield in proportion; prices, costs and lives are not drawn. P90 of a price or
    value is exceeded with 90 % probability; so is that of a cost. ``hours`` are those of the weather: amounts of a
    part of a year are of that part alone.
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
        plants = {name: plant_of(plan, name, efficiency[name], sales_of(plan, row)) for name, row in members.items()}
        price = plan.module_price_per_m2(reference, efficiency[reference])
        other = (price, price / (efficiency[reference] * STANDARD_IRRADIANCE))
        drawn = None if draws is None else _drawn(plan, efficiency, members, draws)
        for name, plant in plants.items():
            row = {"site": site, "mounting": mounting, "absorber": name, "currency": plan.currency}
            row["hours"] = members[name]["hours"]
            row |= _amounts(plan, name, efficiency[name], plant, plants[reference], other)
            if drawn is not None:
                row |= _spread(
                    _amounts(plan, name, efficiency[name], drawn[name], drawn[reference], other), drawn[name]
                )
            found.append(row)
    return found


def _drawn(
    plan: WorthPlan, efficiency: Mapping[str, float], members: Mapping[str, Row], draws: Draws
) -> dict[str, Plant] | None:
    """Return each absorber's plants over the draws; None where a draw is missing."""
    plants = {}
    for name, row in members.items():
        yields = draws.get((str(row["site"]), str(row["mounting"]), name))
        if yields is None:
            return None
        plants[name] = plant_of(plan, name, efficiency[name], sales_of(plan, row, yields))
    return plants


def _amounts(
    plan: WorthPlan, name: str, efficiency: float, plant: Plant, other: Plant, other_price: tuple[float, float]
) -> dict[str, Any]:
    """Return the amounts of one plant set against the reference's, whose module price is per area and per watt."""
    value, base = plant.value(), other.value()
    watts_per_m2 = efficiency * STANDARD_IRRADIANCE
    own = plan.module_price_per_m2(name, efficiency)
    even = own + (value - base) / plant.area_m2
    return {
        "power_kw": plant.power_kw,
        "area_m2": plant.area_m2,
        "energy_sold_kwh": plant.sales.energy * plant.power_kw,
        "energy_life_kwh": plant.sales.energy_life * plant.power_kw,
        "energy_life_discounted_kwh": plant.sales.energy_present * plant.power_kw,
        "revenue_first_year": plant.sales.revenue * plant.power_kw,
        "capital": plant.capital,
        "yearly_cost": plant.yearly_cost,
        "cost_of_energy_per_kwh": plant.cost_of_energy(),
        "net_present_value": value,
        "net_present_value_per_kwp": value / plant.power_kw,
        "net_present_value_per_m2": value / plant.area_m2,
        "module_price_per_m2": own,
        "module_price_per_w": own / watts_per_m2,
        "break_even_price_per_m2": even,
        "break_even_price_per_w": even / watts_per_m2,
        "break_even_per_m2": even - other_price[0],
        "break_even_per_w": even / watts_per_m2 - other_price[1],
    }


_WITH_INTERVALS = (
    "energy_sold_kwh",
    "cost_of_energy_per_kwh",
    "net_present_value",
    "net_present_value_per_kwp",
    "net_present_value_per_m2",
    "break_even_price_per_m2",
    "break_even_price_per_w",
    "break_even_per_m2",
    "break_even_per_w",
)


def _spread(amounts: Mapping[str, Any], plant: Plant) -> dict[str, float]:
    """Return P90, P50 and P10 of amounts over the draws."""
    row: dict[str, float] = {}
    for key in _WITH_INTERVALS:
        low, middle, high = np.quantile(np.broadcast_to(amounts[key], np.shape(plant.sales.energy)), (0.1, 0.5, 0.9))
        row |= {f"{key}_p90": float(low), f"{key}_p50": float(middle), f"{key}_p10": float(high)}
    return row
