"""What a study may say of money and of its sites' weights; no price has a default."""

from __future__ import annotations

from typing import Annotated, Any

from pydantic import Field, Tag, model_validator

from yieldsim.config.fields import Choice, Kind, Monthly, Name, Number, Section, Text, Whole, by, refusal
from yieldsim.config.inputs import InputFile

LIMITS = ("area", "dc_power", "grid_power")
_BIG = 1e12


class Weight(Kind):
    """How much a site counts: any number from 0 up."""

    def take(self, value: Any) -> float:
        """Return the weight."""
        return Number(0, _BIG).take(value)

    def json(self) -> dict[str, Any]:
        """Return type and range."""
        return {"type": "number", "minimum": 0}


Portfolio = Annotated[dict[Name, Annotated[float, Weight()]], Field(min_length=1)]


def _form(value: Any) -> str:
    return "by_name" if isinstance(value, dict) else "one"


def _by_absorber(low: float, high: float, unit: str) -> Any:
    """Return the type of one number for all absorbers, or a number for each."""
    number = Annotated[float, Number(low, high, unit)]
    return Annotated[Annotated[number, Tag("<one>")] | Annotated[dict[Name, number], Tag("<by_name>")], by(_form)]


def _price_form(value: Any) -> str:
    return "file" if isinstance(value, str) else "numbers"


_PRICES = Annotated[
    Annotated[Annotated[float | list[float], Monthly(-10, _BIG, "currency/kWh")], Tag("<numbers>")]
    | Annotated[Annotated[str, InputFile()], Tag("<file>")],
    by(_price_form),
]


class Worth(Section):
    """Prices and terms of a plant; any currency, all prices given by the user."""

    currency: Annotated[str, Text(20, "the name of a currency")]
    module_price_per_w: _by_absorber(0, _BIG, "currency/W") | None = Field(  # type: ignore[valid-type]
        default=None, description="of rated power; one for all, or one per absorber"
    )
    module_price_per_m2: _by_absorber(0, _BIG, "currency/m2") | None = Field(  # type: ignore[valid-type]
        default=None, description="of module area; for absorbers without a price per watt"
    )
    area_cost_per_m2: Annotated[float, Number(0, _BIG, "currency/m2")] = Field(
        default=0.0, description="balance of system that grows with area: structures, land, labour"
    )
    power_cost_per_w: Annotated[float, Number(0, _BIG, "currency/W")] = Field(
        default=0.0, description="balance of system that grows with rated power: inverters, cables"
    )
    fixed_cost: Annotated[float, Number(0, _BIG, "currency")] = Field(default=0.0, description="of the whole plant")
    yearly_cost_per_w: Annotated[float, Number(0, _BIG, "currency/W")] = 0.0
    yearly_cost_per_m2: Annotated[float, Number(0, _BIG, "currency/m2")] = 0.0
    yearly_cost: Annotated[float, Number(0, _BIG, "currency")] = Field(default=0.0, description="of the whole plant")
    energy_price_per_kwh: _PRICES = Field(
        description="one number, twelve, or a CSV of hours: 8760 prices from 1 January, local standard time"
    )
    discount_rate: Annotated[float, Number(-0.5, 1, "1/year")]
    life_years: Annotated[int, Whole(1, 100)]
    degradation_per_year: _by_absorber(0, 0.2, "1/year") = Field(  # type: ignore[valid-type]
        default=0.0, description="loss of output from year to year; one for all, or one per absorber"
    )
    limited_by: Annotated[str, Choice(LIMITS)] = Field(
        default="dc_power",
        description="what every absorber has the same of: module area, rated power, power to the grid",
    )
    area_m2: Annotated[float, Number(1e-3, _BIG, "m2")] | None = Field(
        default=None, description="module area of the plant"
    )
    dc_power_kw: Annotated[float, Number(1e-3, _BIG, "kW")] | None = Field(default=None, description="rated power")
    grid_power_kw: Annotated[float, Number(1e-3, _BIG, "kW")] | None = Field(
        default=None, description="most that the grid takes; what is above in an hour is lost"
    )
    dc_to_grid: Annotated[float, Number(0.1, 10)] = Field(
        default=1.25, description="rated power over grid power, where grid power limits"
    )

    @model_validator(mode="after")
    def _whole(self) -> Worth:
        if self.module_price_per_w is None and self.module_price_per_m2 is None:
            raise refusal("no module price", "`module_price_per_w` or `module_price_per_m2`")
        size = {"area": "area_m2", "dc_power": "dc_power_kw", "grid_power": "grid_power_kw"}
        needed = size[self.limited_by]
        if getattr(self, needed) is None:
            raise refusal(f"limited_by: {self.limited_by} without `{needed}`", f"`{needed}`")
        other = [name for name in size.values() if name != needed and getattr(self, name) is not None]
        if other:
            raise refusal(f"`{other[0]}` beside limited_by: {self.limited_by}", f"`{needed}` alone")
        return self


__all__ = ["LIMITS", "Portfolio", "Worth"]
