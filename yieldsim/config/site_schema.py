"""What a site may hold: its weather, air, ground, and how the modules stand there."""

from __future__ import annotations

from typing import Annotated, Any

from pydantic import Field, Tag

from yieldsim.config.fields import (
    Choice,
    Flag,
    Kind,
    Length,
    Monthly,
    Name,
    Number,
    Section,
    Text,
    Whole,
    by,
    one_or_list,
    refusal,
    show,
)
from yieldsim.config.inputs import InputFile
from yieldsim.config.mounting_schema import AnyGround, Ground, OneMounting
from yieldsim.weather import STAMP_FORM, parse_stamp

FORMATS = (
    "tmy3",
    "epw",
    "tmy2",
    "bsrn",
    "surfrad",
    "pvgis",
    "psm",
    "netcdf",
    "plain",
)  # the readers' names; a test holds them to yieldsim.readers
MAX_YEARS = 50


def _mounting_form(value: Any) -> str:
    """Tell one mounting from several named ones and from names of mountings given elsewhere."""
    if isinstance(value, str | list):
        return "names"
    several = isinstance(value, dict) and value and "kind" not in value
    return "several" if several and all(isinstance(each, dict) for each in value.values()) else "one"


MAX_MOUNTINGS = 20  # of a site: each is computed whole
Several = Annotated[dict[Name, OneMounting], Field(max_length=MAX_MOUNTINGS), Tag("<several>")]
Mounting = Annotated[Annotated[OneMounting, Tag("<one>")] | Several, by(_mounting_form)]
_Names = Annotated[
    Annotated[Name, Tag("<one>")] | Annotated[list[Name], Length(1, MAX_MOUNTINGS, "names"), Tag("<list>")],
    by(one_or_list),
]
SiteMounting = Annotated[
    Annotated[OneMounting, Tag("<one>")] | Several | Annotated[_Names, Tag("<names>")], by(_mounting_form)
]


class Atmosphere(Section):
    """What is known about the air: one number or twelve, January first; what is left out is derived."""

    aod500: Annotated[float | list[float], Monthly(0, 5)] | None = Field(
        default=None, description="aerosol optical depth at 500 nm"
    )
    angstrom_exponent: Annotated[float | list[float], Monthly(-0.5, 3)] | None = Field(
        default=None, description="how aerosol fades with wavelength"
    )
    water_cm: Annotated[float | list[float], Monthly(0, 12, "cm")] | None = Field(
        default=None, description="precipitable water"
    )
    ozone_atm_cm: Annotated[float | list[float], Monthly(0.05, 0.7, "atm cm")] | None = Field(
        default=None, description="ozone column"
    )
    single_scattering_albedo: Annotated[float, Number(0.5, 1)] | None = Field(
        default=None, description="of haze at 400 nm: share of its extinction that scatters; 0.945 if left out"
    )
    asymmetry: Annotated[float, Number(0, 0.95)] | None = Field(
        default=None, description="mean cosine of the angle haze scatters by; 0.65 if left out"
    )
    haze: Annotated[str, Choice(("hourly", "fixed"))] = Field(
        default="hourly", description="hourly: solve the haze of clear hours from their beam; fixed: keep the given one"
    )


_Weather = Annotated[str, InputFile(shipped=True)]


class Stamp(Kind):
    """Where a file's time labels sit."""

    def take(self, value: Any) -> str:
        """Return the text if `weather.parse_stamp` reads it."""
        try:
            parse_stamp(value)
        except (ValueError, TypeError, AttributeError):
            raise refusal(show(value), STAMP_FORM) from None
        return str(value)

    def json(self) -> dict[str, Any]:
        """Return the type."""
        return {"type": "string"}


class ColumnUnit(Section):
    """A column whose unit is not ours."""

    column: Annotated[str, Text(200, "the name of a column")]
    unit: Annotated[str, Text(20, "a unit")]


_Column = Annotated[
    Annotated[Annotated[str, Text(200, "the name of a column")], Tag("<one>")]
    | Annotated[ColumnUnit, Tag("<with_unit>")],
    by(lambda value: "with_unit" if isinstance(value, dict) else "one"),
]
_TimeColumns = Annotated[
    Annotated[Annotated[str, Text(200, "the name of a column")], Tag("<one>")]
    | Annotated[list[Annotated[str, Text(200, "the name of a column")]], Length(1, 6, "names"), Tag("<list>")],
    by(one_or_list),
]


_Codes = Annotated[
    Annotated[Annotated[float, Number(-1e9, 1e9)], Tag("<one>")]
    | Annotated[list[Annotated[float, Number(-1e9, 1e9)]], Length(1, 20, "numbers"), Tag("<list>")],
    by(one_or_list),
]


class Columns(Section):
    """Which columns of a table are what; each in our unit unless it says otherwise."""

    time: _TimeColumns = Field(description="column of the time, or several that are joined by a blank")
    time_format: Annotated[str, Text(60, "a form such as %d.%m.%Y %H:%M")] | None = Field(
        default=None, description="how the time is written, as strptime has it; ISO 8601 if left out"
    )
    missing: _Codes | None = Field(default=None, description="number or numbers that stand for a missing value")
    ghi: _Column | None = None
    dni: _Column | None = None
    dhi: _Column | None = None
    temp_air: _Column | None = None
    relative_humidity: _Column | None = None
    temp_dew: _Column | None = None
    wind_speed: _Column | None = None
    pressure: _Column | None = None
    precipitable_water: _Column | None = None
    aod500: _Column | None = None
    aod_broadband: _Column | None = None
    albedo: _Column | None = None
    snow_depth: _Column | None = None
    rain: _Column | None = None


class Site(Section):
    """One place with its weather."""

    name: Name
    weather: Annotated[
        Annotated[_Weather, Tag("<one>")]
        | Annotated[list[_Weather], Length(1, MAX_YEARS, "weather files"), Tag("<list>")],
        by(one_or_list),
    ] = Field(description="weather file, relative to the study file; a list for several years; pvlib:NAME")
    format: Annotated[str, Choice(FORMATS)] | None = Field(default=None, description="over what the content tells")
    timestamps: Annotated[str, Stamp()] | None = Field(
        default=None, description="where the file's time labels sit in their interval, over what the file says"
    )
    columns: Columns | None = Field(
        default=None,
        description="names of the columns of any other table: {time: Date, ghi: G, temp_air: {column: T, unit: K}}",
    )
    cell: Annotated[list[Annotated[int, Whole(0, 1_000_000)]], Length(2, 2, "numbers: row and column")] | None = Field(
        default=None, description="row and column in a grid of weather, latitude first, from 0"
    )
    allow_gaps: Annotated[bool, Flag()] = Field(default=False, description="accept fewer than 8760 hours")
    latitude_deg: Annotated[float, Number(-90, 90, "deg north")] | None = None
    longitude_deg: Annotated[float, Number(-180, 180, "deg east")] | None = None
    elevation_m: Annotated[float, Number(-450, 9000, "m")] | None = None
    mounting: SiteMounting | None = Field(
        default=None, description="over the study's: one, several named, or their names"
    )
    atmosphere: Atmosphere = Field(default_factory=Atmosphere)
    ground: AnyGround = Field(
        default_factory=Ground,
        description="a surface of the library, a CSV of wavelength [nm] and albedo, or both keys",
    )
    horizon: Annotated[str, InputFile()] | None = Field(
        default=None, description="CSV of azimuth [deg clockwise from north] and elevation [deg] of the skyline"
    )
