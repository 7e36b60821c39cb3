"""What a study file may hold: every key with its unit, range, default and meaning, in this one place.

A later section gets a model of its own here and a field in `Study`.
"""

from __future__ import annotations

import unicodedata
from typing import Annotated, Any, ClassVar

from pydantic import Field, Tag, model_validator

from yieldsim.config import grid, library
from yieldsim.config.fields import (
    Choice,
    Flag,
    Kind,
    Length,
    Monthly,
    Number,
    Section,
    Text,
    by,
    one_or_list,
    refusal,
    show,
)
from yieldsim.config.inputs import InputFile
from yieldsim.device.junction import LIMITS as JUNCTION_LIMITS
from yieldsim.device.stack import HEAT_LOSS_LIMITS
from yieldsim.device.stack import LIMITS as MODULE_LIMITS
from yieldsim.weather import STAMP_FORM, parse_stamp

FORMATS = ("tmy3", "plain")  # the readers' names; a test holds them to yieldsim.readers
PARTS = ("annual", "monthly", "hourly", "spectra", "plots")
MAX_SITES = 1000
MAX_ABSORBERS = 100
MAX_YEARS = 50

#: Keys that a later version will take: named in the message, so that nobody looks for a slip of typing.
NOT_YET = (
    "gap_pairs", "chance", "portfolio", "worth", "eqe", "response", "datasheet", "material", "stack", "terminals",
    "climate", "horizon", "table", "grid",
)  # fmt: skip

Name = Annotated[str, Text(200, "a name")]
# The study's name is a folder: what every file system can hold, and nothing that leads elsewhere.
FolderName = Annotated[
    str,
    Text(
        100,
        "a name",
        r"[^\W_](?:[\w \-.,()+']*[\w)+'])?",
        "letters, digits, blanks and any of -_.,()+' inside, starting with a letter or digit",
    ),
]
LOST = (0.0, 0.95)  # a share of energy lost: above this a year is no year


def folded(name: str) -> str:
    """Return a name as names are told apart: without case and without forms that look alike."""
    return unicodedata.normalize("NFKC", unicodedata.normalize("NFKC", name).casefold())


# ---------------------------------------------------------------------------------------------------- sites


class FixedMounting(Section):
    """A plane that does not move."""

    kind: Annotated[str, Choice(("fixed",))] = Field(default="fixed", description="how the modules stand")
    tilt_deg: Annotated[float, Number(0, 90, "deg from horizontal")]
    azimuth_deg: Annotated[float, Number(0, 360, "deg clockwise from north")]


def _mounting_form(value: Any) -> str:
    """Tell one mounting from several named ones and from names of mountings given elsewhere."""
    if isinstance(value, str | list):
        return "names"
    several = isinstance(value, dict) and value and "kind" not in value
    return "several" if several and all(isinstance(each, dict) for each in value.values()) else "one"


Several = Annotated[dict[Name, FixedMounting], Tag("<several>")]
Mounting = Annotated[Annotated[FixedMounting, Tag("<one>")] | Several, by(_mounting_form)]
_Names = Annotated[
    Annotated[Name, Tag("<one>")] | Annotated[list[Name], Length(1, 20, "names"), Tag("<list>")], by(one_or_list)
]
SiteMounting = Annotated[
    Annotated[FixedMounting, Tag("<one>")] | Several | Annotated[_Names, Tag("<names>")], by(_mounting_form)
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
    haze: Annotated[str, Choice(("hourly", "fixed"))] = Field(
        default="hourly", description="hourly: solve the haze of clear hours from their beam; fixed: keep the given one"
    )


class Ground(Section):
    """What lies under and around the modules."""

    albedo: Annotated[float, Number(0, 1)] | None = Field(
        default=None, description="reflectance at every wavelength; left out: the weather file's own, else 0.2"
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
    allow_gaps: Annotated[bool, Flag()] = Field(default=False, description="accept fewer than 8760 hours")
    latitude_deg: Annotated[float, Number(-90, 90, "deg north")] | None = None
    longitude_deg: Annotated[float, Number(-180, 180, "deg east")] | None = None
    elevation_m: Annotated[float, Number(-450, 9000, "m")] | None = None
    mounting: SiteMounting | None = Field(
        default=None, description="over the study's: one, several named, or their names"
    )
    atmosphere: Atmosphere = Field(default_factory=Atmosphere)
    ground: Ground = Field(default_factory=Ground)


# ------------------------------------------------------------------------------------------------ absorbers


class HeatLoss(Section):
    """How a module sheds heat (Faiman 2008): cell = air + light / (constant + wind x wind speed)."""

    constant_w_m2_k: Annotated[float, Number(*HEAT_LOSS_LIMITS[0], "W m-2 K-1")]
    wind_w_s_m3_k: Annotated[float, Number(*HEAT_LOSS_LIMITS[1], "W s m-3 K-1")]


def junction_number(field: str, unit: str = "") -> Number:
    """Return the kind of a number of a junction; its range is the device's own."""
    return Number(*JUNCTION_LIMITS[field], unit)


def module_number(field: str) -> Number:
    """Return the kind of a number of a module; its range is the device's own."""
    return Number(*MODULE_LIMITS[field])


class Quality(Section):
    """What makes a junction real; left out: as for an ideal one, or as the library entry has it."""

    external_radiative_efficiency: Annotated[float, junction_number("external_radiative_efficiency")] | None = Field(
        default=None, description="share of recombination that leaves as light, at the standard photocurrent"
    )
    ideality: Annotated[float, junction_number("ideality")] | None = None
    series_resistance_ohm_cm2: Annotated[float, junction_number("series_resistance_ohm_cm2", "ohm cm2")] | None = None
    shunt_resistance_ohm_cm2: Annotated[float, junction_number("shunt_resistance_ohm_cm2", "ohm cm2")] | None = None
    recombination_v: Annotated[float, junction_number("recombination_v", "V")] | None = Field(
        default=None, description="loss of generated carriers in an i-layer as its field falls (Merten et al. 1998)"
    )
    built_in_v: Annotated[float, junction_number("built_in_v", "V")] | None = Field(
        default=None, description="built-in voltage of that i-layer"
    )
    gap_shift_ev_per_k: Annotated[float, junction_number("gap_shift_ev_per_k", "eV K-1")] | None = Field(
        default=None, description="change of the gap with temperature; negative narrows when hot"
    )

    #: The keys that say how good a junction is; the drift of the gap is the material's, also of an ideal one.
    QUALITY: ClassVar[tuple[str, ...]] = (
        "external_radiative_efficiency", "ideality", "series_resistance_ohm_cm2", "shunt_resistance_ohm_cm2",
        "recombination_v", "built_in_v",
    )  # fmt: skip

    def given(self, *names: str) -> dict[str, Any]:
        """Return those of the named fields that were given."""
        return {name: getattr(self, name) for name in names if getattr(self, name) is not None}


GAP = junction_number("gap_ev", "eV")
Like = Annotated[str, library.EntryName()]


class Absorber(Quality):
    """One light absorber: an entry of the library, or a gap with its quality."""

    name: Name
    like: Like | None = Field(default=None, description="entry of the library; any other field overrides it")
    gap_ev: Annotated[float, GAP] | None = Field(
        default=None, description="gap; alone a step response, with `like` that entry's response moved to it"
    )
    quality: Annotated[str, Choice(("ideal",))] | None = Field(
        default=None, description="ideal: step response, radiative limit, no resistance"
    )
    bifaciality: Annotated[float, module_number("bifaciality")] | None = Field(
        default=None, description="rear over front efficiency"
    )
    incidence_modifier: (
        Annotated[
            Annotated[float, module_number("incidence_modifier"), Tag("<number>")]
            | Annotated[str, Choice(("none",)), Tag("<word>")],
            by(lambda value: "word" if isinstance(value, str) else "number"),
        ]
        | None
    ) = Field(default=None, description="angular loss coefficient of the front (Martin & Ruiz 2001), or none")
    area_fraction: Annotated[float, module_number("area_fraction")] | None = Field(
        default=None, description="active over module area"
    )
    heat_loss: HeatLoss | None = None

    @model_validator(mode="after")
    def _complete(self) -> Absorber:
        """Refuse an absorber that says too little or contradicts itself."""
        given = ", ".join(self.given(*self.QUALITY))
        if self.like is None and self.gap_ev is None:
            raise refusal("neither `like` nor `gap_ev`", "an entry of the library, or a gap with its quality")
        if self.quality == "ideal" and (self.like is not None or given):
            raise refusal(f"`quality: ideal` beside {'`like`' if self.like is not None else given}", "one of them")
        if self.like is None and self.quality is None and self.external_radiative_efficiency is None:
            raise refusal("a gap without its quality", "`quality: ideal` or `external_radiative_efficiency`")
        return self


# -------------------------------------------------------------------------------------------------- studies


class SweepQuality(Quality):
    """The quality of every absorber of a sweep: like an entry of the library, or by numbers."""

    name: Name | None = Field(default=None, description="what to call it in gap_sweep.csv")
    like: Like | None = Field(default=None, description="that entry's response and quality, moved to each gap")
    collected: Annotated[float, Number(0.01, 1)] | None = Field(
        default=None, description="share of photons above the gap that become current; 1 if left out"
    )

    @model_validator(mode="after")
    def _complete(self) -> SweepQuality:
        if self.like is None and self.external_radiative_efficiency is None:
            raise refusal(
                "a quality without numbers", "`like`, or `external_radiative_efficiency` and what goes with it"
            )
        if self.like is not None and self.collected is not None:
            raise refusal("`collected` beside `like`", "one of them")
        return self


def _quality_form(value: Any) -> str:
    return "fields" if isinstance(value, dict) else "word"


OneQuality = Annotated[
    Annotated[str, Choice(("ideal",)), Tag("<word>")] | Annotated[SweepQuality, Tag("<fields>")], by(_quality_form)
]

#: Beside the ideal: what a good thin film reaches today. Representative, from memory; the same at every gap, so that
#: a curve over gaps shows the gap and nothing else.
REALISTIC = {
    "name": "realistic",
    "external_radiative_efficiency": 1e-3,
    "ideality": 1.0,
    "series_resistance_ohm_cm2": 1.0,
    "shunt_resistance_ohm_cm2": 5000.0,
    "collected": 0.93,
}


def _default_qualities() -> list[str | SweepQuality]:
    return ["ideal", SweepQuality.model_validate(REALISTIC)]


class GapSweep(Section):
    """Absorbers that differ in their gap alone."""

    from_ev: Annotated[float, GAP]
    to_ev: Annotated[float, GAP]
    step_ev: Annotated[float, Number(0.001, 1, "eV")]
    quality: Annotated[
        Annotated[OneQuality, Tag("<one>")] | Annotated[list[OneQuality], Length(1, 10, "qualities"), Tag("<list>")],
        by(one_or_list),
    ] = Field(
        default_factory=_default_qualities,
        description="ideal | {like: NAME} | numbers, one or a list; left out: ideal and a realistic one",
    )

    @model_validator(mode="after")
    def _countable(self) -> GapSweep:
        if self.to_ev < self.from_ev:
            raise refusal(f"to_ev {self.to_ev:g} below from_ev {self.from_ev:g}", "a range that rises")
        count = len(grid.decimal_grid(self.from_ev, self.to_ev, self.step_ev))
        if count > grid.MAX_POINTS:
            raise refusal(f"{count} gaps", f"at most {grid.MAX_POINTS}")
        return self


class Losses(Section):
    """Shares of energy lost, besides what the absorbers do: one number or twelve, January first."""

    soiling: Annotated[float | list[float], Monthly(*LOST)] | None = Field(
        default=None, description="dust on the modules"
    )
    snow: Annotated[float | list[float], Monthly(*LOST)] | None = Field(
        default=None, description="snow lying on the modules"
    )
    wiring: Annotated[float | list[float], Monthly(*LOST)] | None = Field(
        default=None, description="heat in the cables"
    )
    inverter: Annotated[float | list[float], Monthly(*LOST)] | None = Field(
        default=None, description="conversion to alternating current"
    )
    availability: Annotated[float | list[float], Monthly(*LOST)] | None = Field(
        default=None, description="time out of order"
    )
    degradation: Annotated[float | list[float], Monthly(*LOST)] | None = Field(
        default=None, description="ageing, as a mean over the years looked at"
    )


class Study(Section):
    """A study: sites, absorbers, and what to find out about them."""

    study: FolderName = Field(description="name of the study, also of its output folder")
    mounting: Mounting | None = Field(
        default=None, description="one plane, or several by name, computed for every site"
    )
    sites: Annotated[list[Site], Length(1, MAX_SITES, "sites")]
    absorbers: Annotated[list[Absorber], Length(1, MAX_ABSORBERS, "absorbers")]
    reference: Name | None = Field(
        default=None, description="absorber the others are set against; the first if left out"
    )
    losses: Losses = Field(default_factory=Losses)
    gap_sweep: GapSweep | None = None
    keep: Annotated[list[Annotated[str, Choice(PARTS)]], Length(1, len(PARTS), "parts of the result")] = Field(
        default_factory=lambda: list(PARTS), description="parts of the result to write"
    )


def json_schema() -> dict[str, Any]:
    """Return the JSON Schema (draft 2020-12) of the study file."""
    schema = Study.model_json_schema(mode="validation")
    return {"$schema": "https://json-schema.org/draft/2020-12/schema", "title": "yieldsim study", **schema}
