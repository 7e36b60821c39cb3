"""What an absorber may hold: where its response comes from, how good it is, how it sits in its module."""

from __future__ import annotations

from typing import Annotated, Any, ClassVar, get_args

from pydantic import Field, Tag, model_validator

from yieldsim.config import library
from yieldsim.config.fields import Choice, Length, Name, Number, Section, by, refusal
from yieldsim.config.inputs import InputFile
from yieldsim.device.junction import LIMITS as JUNCTION_LIMITS
from yieldsim.device.material import MATERIALS, Trapping
from yieldsim.device.stack import HEAT_LOSS_LIMITS
from yieldsim.device.stack import LIMITS as MODULE_LIMITS


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

    nonradiative_drift_per_k: Annotated[float, junction_number("nonradiative_drift_per_k", "K-1")] | None = Field(
        default=None, description="growth of non-radiative over radiative recombination with temperature"
    )

    #: The keys that say how good a junction is; the drift of the gap is the material's, also of an ideal one.
    QUALITY: ClassVar[tuple[str, ...]] = (
        "external_radiative_efficiency", "ideality", "series_resistance_ohm_cm2", "shunt_resistance_ohm_cm2",
        "recombination_v", "built_in_v", "nonradiative_drift_per_k",
    )  # fmt: skip

    def given(self, *names: str) -> dict[str, Any]:
        """Return those of the named fields that were given."""
        return {name: getattr(self, name) for name in names if getattr(self, name) is not None}


GAP = junction_number("gap_ev", "eV")
Like = Annotated[str, library.EntryName()]


class Material(Section):
    """A film or wafer by what it is made of: its response is what it absorbs, every pair collected."""

    name: Annotated[str, Choice(tuple(MATERIALS))] | None = Field(default=None, description="a material with open data")
    absorption: Annotated[str, InputFile()] | None = Field(
        default=None, description="CSV: wavelength in nm, absorption coefficient in 1/cm, refractive index if known"
    )
    thickness_um: Annotated[float, Number(0.001, 10_000, "um")]
    trapping: Annotated[str, Choice(get_args(Trapping))] = Field(
        default="single_pass",
        description="way of the light: once through, with a mirror behind, or scattered at random",
    )

    @model_validator(mode="after")
    def _complete(self) -> Material:
        if (self.name is None) == (self.absorption is None):
            raise refusal("`name` and `absorption`" if self.name else "neither `name` nor `absorption`", "one of them")
        return self


def _relative(low: float, high: float) -> Number:
    return Number(low, high, "K-1, relative: -0.35 %/K is -0.0035")


class Datasheet(Section):
    """What a datasheet says at standard conditions; quality, resistance and drift are solved to return it."""

    jsc_ma_cm2: Annotated[float, Number(0.1, 80, "mA cm-2")] | None = None
    voc_v: Annotated[float, Number(0.05, 4, "V, of one cell")] | None = None
    ff: Annotated[float, Number(0.25, 1)] | None = None
    efficiency: Annotated[float, Number(0.001, 0.5)] | None = None
    jsc_coefficient_per_k: Annotated[float, _relative(-0.01, 0.01)] | None = None
    voc_coefficient_per_k: Annotated[float, _relative(-0.02, 0.01)] | None = None
    power_coefficient_per_k: Annotated[float, _relative(-0.02, 0.01)] | None = None
    area: Annotated[str, Choice(("cell", "aperture", "module"))] = Field(
        default="cell", description="what current and efficiency are per; of the larger two, `area_fraction` collects"
    )

    def solved(self) -> tuple[str, ...]:
        """Return the fields of a junction that are solved from the sheet."""
        fields = []
        if self.voc_v is not None or self.efficiency is not None:
            fields.append("external_radiative_efficiency")
        if self.ff is not None or self.efficiency is not None:
            fields.append("series_resistance_ohm_cm2")
        if self.jsc_coefficient_per_k is not None:
            fields.append("gap_shift_ev_per_k")
        if self.voc_coefficient_per_k is not None or self.power_coefficient_per_k is not None:
            fields.append("nonradiative_drift_per_k")
        return tuple(fields)

    @model_validator(mode="after")
    def _complete(self) -> Datasheet:
        if not self.model_fields_set - {"area"}:
            raise refusal("a datasheet without figures", "jsc_ma_cm2, voc_v, ff, efficiency, coefficients")
        return self


class Source(Quality):
    """One junction: where its response comes from, and how good it is."""

    like: Like | None = Field(default=None, description="entry of the library; any other field overrides it")
    gap_ev: Annotated[float, GAP] | None = Field(
        default=None,
        description="gap; alone a step response, with `like` that entry's response moved to it, with a measured "
        "response or a material in place of its steepest edge",
    )
    eqe: Annotated[str, InputFile()] | None = Field(
        default=None, description="CSV of a measured quantum efficiency: wavelength in nm or um, 0-1 or %"
    )
    response: Annotated[str, InputFile()] | None = Field(
        default=None, description="CSV of a measured response: wavelength in nm or um, A/W or mA/W"
    )
    material: Material | None = None
    datasheet: Datasheet | None = None
    quality: Annotated[str, Choice(("ideal",))] | None = Field(
        default=None, description="ideal: radiative limit, no resistance"
    )
    reflection: Annotated[float, junction_number("reflection")] | None = Field(
        default=None,
        description="light it throws back: lost to a measured response already, taken from a material's; "
        "matters in a stack",
    )
    parasitic: Annotated[float, junction_number("parasitic")] | None = Field(
        default=None, description="of the light it lets through, the share lost on the way to the next one down"
    )
    transmits: Annotated[float, junction_number("transmits")] | None = Field(
        default=None, description="share of the light above its edge that a thinned junction lets through"
    )

    #: Keys that say where the response comes from, of which one is needed; `gap_ev` alone is one too.
    ORIGIN: ClassVar[tuple[str, ...]] = ("like", "eqe", "response", "material")
    #: Numbers of the junction besides its gap and quality.
    LIGHT: ClassVar[tuple[str, ...]] = ("gap_shift_ev_per_k", "reflection", "parasitic", "transmits")

    def junction_keys(self) -> list[str]:
        """Return the keys given that describe a junction."""
        return list(self.given(*self.ORIGIN, "gap_ev", "quality", "datasheet", *self.QUALITY, *self.LIGHT))

    def check_origin(self) -> None:
        """Refuse a junction that says too little or contradicts itself."""
        origins = [f"`{key}`" for key in self.given(*self.ORIGIN)]
        if len(origins) > 1:
            raise refusal(" and ".join(origins), "one of them")
        if not origins and self.gap_ev is None:
            raise refusal(
                "no " + ", ".join(f"`{key}`" for key in (*self.ORIGIN, "gap_ev")),
                "one of them: where the response comes from",
            )
        if self.quality == "ideal":
            self._check_ideal()
        elif self.datasheet is not None:
            self._check_sheet(self.datasheet)
        if self._quality_is_open():
            raise refusal(
                f"{origins[0] if origins else 'a gap'} without its quality",
                "`quality: ideal`, `external_radiative_efficiency`, or a `datasheet` with its voltage",
            )

    def _check_ideal(self) -> None:
        beside = [f"`{key}`" for key in self.given("like", "datasheet", *self.QUALITY)]
        if beside:
            raise refusal(f"`quality: ideal` beside {', '.join(beside)}", "one of them")

    def _check_sheet(self, sheet: Datasheet) -> None:
        beside = [f"`{key}`" for key in self.given(*sheet.solved())]
        if beside:
            raise refusal(f"{', '.join(beside)} beside a datasheet that it is solved from", "one of them")

    def _quality_is_open(self) -> bool:
        if self.like is not None or self.quality is not None or self.external_radiative_efficiency is not None:
            return False
        return self.datasheet is None or "external_radiative_efficiency" not in self.datasheet.solved()


class Layer(Source):
    """One junction of a stack; a datasheet is that of the junction alone, per its own area."""

    @model_validator(mode="after")
    def _complete(self) -> Layer:
        self.check_origin()
        if self.datasheet is not None and self.datasheet.area != "cell":
            raise refusal(f"a datasheet per {self.datasheet.area} area in a stack", "area: cell")
        return self


MAX_LAYERS = 6


class Absorber(Source):
    """One light absorber: an entry of the library, a gap with its quality, or a stack of junctions; and its module."""

    name: Name
    stack: Annotated[list[Layer], Length(2, MAX_LAYERS, "junctions, top first")] | None = Field(
        default=None, description="junctions over each other, the one that meets the light first comes first"
    )
    terminals: Annotated[int, Choice((2, 4))] | None = Field(
        default=None, description="of a stack: 2 = in series, 4 = each junction at its own power point"
    )
    coupling: Annotated[float, module_number("coupling")] | None = Field(
        default=None, description="of a stack: share of the light a junction emits that the next one down collects"
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
        if self.stack is None:
            self.check_origin()
            if self.like is None and (self.terminals is not None or self.coupling is not None):
                raise refusal("`terminals` or `coupling` of one junction", "these beside `stack`")
        elif self.junction_keys():
            raise refusal(f"`stack` beside {', '.join(self.junction_keys())}", "these in the junctions of the stack")
        return self


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
