"""What a study file may hold: every key with its unit, range, default and meaning, in this one place.

A later section gets a model of its own here and a field in `Study`.
"""

from __future__ import annotations

from typing import Annotated, Any

from pydantic import Field, GetJsonSchemaHandler, Tag, model_validator
from pydantic_core import CoreSchema

from yieldsim.config import grid, many
from yieldsim.config.absorber_schema import GAP, Absorber, SweepQuality
from yieldsim.config.chance_schema import Chance
from yieldsim.config.fields import Choice, Length, Monthly, Name, Number, Section, Text, by, one_or_list, refusal
from yieldsim.config.site_schema import Mounting, Site
from yieldsim.config.worth_schema import Portfolio, Worth

PARTS = ("annual", "monthly", "hourly", "spectra", "plots")
MAX_ABSORBERS = 100

#: Keys that a later version will take: named in the message, so that nobody looks for a slip of typing.
NOT_YET = ("climate",)

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


_Range = Annotated[list[Annotated[float, Number(0.001, 5, "eV")]], Length(3, 3, "numbers: from, to, step [eV]")]
_Terminals = Annotated[int, Choice((2, 4))]


class GapPairs(Section):
    """Two junctions over each other that differ from pair to pair in their gaps alone."""

    top_ev: Annotated[_Range, Field(description="gaps on top: from, to, step")]
    bottom_ev: Annotated[_Range, Field(description="gaps below: from, to, step")]
    terminals: Annotated[
        Annotated[_Terminals, Tag("<one>")] | Annotated[list[_Terminals], Length(1, 2, "numbers"), Tag("<list>")],
        by(one_or_list),
    ] = Field(default_factory=lambda: [2, 4], description="2, 4, or a list of both")
    quality: Annotated[
        Annotated[OneQuality, Tag("<one>")] | Annotated[list[OneQuality], Length(1, 10, "qualities"), Tag("<list>")],
        by(one_or_list),
    ] = Field(
        default_factory=_default_qualities,
        description="ideal | {like: NAME} | numbers, one or a list; left out: ideal and a realistic one",
    )

    @model_validator(mode="after")
    def _countable(self) -> GapPairs:
        for low, high, _ in (self.top_ev, self.bottom_ev):
            if high < low:
                raise refusal(f"a range from {low:g} to {high:g}", "a range that rises")
        if self.top_ev[0] <= self.bottom_ev[1]:
            raise refusal(
                f"top gaps from {self.top_ev[0]:g} with bottom gaps to {self.bottom_ev[1]:g}",
                "every top gap the wider one",
            )
        count = len(grid.decimal_grid(*self.top_ev)) * len(grid.decimal_grid(*self.bottom_ev))
        if count > grid.MAX_PAIRS:
            raise refusal(f"{count} pairs", f"at most {grid.MAX_PAIRS}")
        return self


class Losses(Section):
    """Shares of energy lost, besides what the absorbers do: one number or twelve, January first."""

    soiling: Annotated[float | list[float], Monthly(*LOST)] | None = Field(
        default=None, description="dust on the modules"
    )
    soiling_exponent: Annotated[float, Number(-4, 4)] = Field(
        default=0.0, description="colour of the dust: it takes (wavelength)^-exponent; 0 = grey, above 0 more blue"
    )
    snow: Annotated[float | list[float], Monthly(*LOST)] | None = Field(
        default=None, description="snow lying on the modules; left out: worked out where the weather has snow_depth"
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


class SitesOf(Length):
    """A list of sites, or in its place a table or a grid that `many.written_out` has written out before."""

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> dict[str, Any]:
        """Offer the list, a table and a grid."""
        one_by_one = super().__get_pydantic_json_schema__(schema, handler)
        files = {
            "table": {"type": "string", "description": f"CSV with a row a site; columns: {', '.join(many.COLUMNS)}"},
            "grid": {"type": "string", "description": "weather as NetCDF or Zarr, time x latitude x longitude"},
        }
        shared: dict[str, Any] = {
            name: {"description": "for all that say nothing of their own"} for name in many.SHARED
        }
        either = [{"required": [name]} for name in files]
        by_the_hundred = {
            "type": "object",
            "properties": files | shared,
            "additionalProperties": False,
            "anyOf": either,
        }
        return {"anyOf": [one_by_one, by_the_hundred]}


class Study(Section):
    """A study: sites, absorbers, and what to find out about them."""

    study: FolderName = Field(description="name of the study, also of its output folder")
    mounting: Mounting | None = Field(
        default=None, description="one plane, or several by name, computed for every site"
    )
    sites: Annotated[list[Site], SitesOf(1, many.MAX_SITES, "sites")]
    absorbers: Annotated[list[Absorber], Length(1, MAX_ABSORBERS, "absorbers")]
    reference: Name | None = Field(
        default=None, description="absorber the others are set against; the first if left out"
    )
    losses: Losses = Field(default_factory=Losses)
    gap_sweep: GapSweep | None = None
    gap_pairs: GapPairs | None = None
    chance: Chance | None = None
    portfolio: Portfolio | None = Field(
        default=None, description="weight of each site where several are served by one choice; left out: all alike"
    )
    worth: Worth | None = None
    keep: Annotated[list[Annotated[str, Choice(PARTS)]], Length(1, len(PARTS), "parts of the result")] = Field(
        default_factory=lambda: list(PARTS), description="parts of the result to write"
    )


def json_schema() -> dict[str, Any]:
    """Return the JSON Schema (draft 2020-12) of the study file."""
    schema = Study.model_json_schema(mode="validation")
    return {"$schema": "https://json-schema.org/draft/2020-12/schema", "title": "yieldsim study", **schema}
