"""How modules may stand, what may lie under them: the mountings and grounds of a study file."""

from __future__ import annotations

from dataclasses import dataclass
from math import radians, sin
from typing import Annotated, Any

from pydantic import Field, Tag, ValidationInfo, model_validator

from yieldsim.config.fields import Choice, Flag, Number, Section, by, nearest, refusal, show
from yieldsim.config.inputs import InputFile
from yieldsim.sky.ground import surfaces

KINDS = ("fixed", "tracker", "vertical", "roof")


@dataclass(frozen=True)
class MountingKind(Choice):
    """The word that tells one kind of mounting from the others; a slip is answered with all of them."""

    words: tuple[str, ...] = KINDS
    own: str = ""

    def json(self) -> dict[str, Any]:
        """Return the one word."""
        return {"const": self.own}


def _sky_model() -> Any:
    return Field(
        default="hay-davies",
        description="how much of the sky's light comes from around the sun: hay-davies, band by band; perez, "
        "whose level is that of measured planes; or radiance, fitted to computed clear skies band by band",
    )


_SkyModel = Annotated[str, Choice(("hay-davies", "perez", "radiance"))]
_Azimuth = Annotated[float, Number(0, 360, "deg clockwise from north")]


class _InRows(Section):
    """What all mountings that may stand in rows share."""

    row_pitch_m: Annotated[float, Number(0.1, 1000, "m")] | None = Field(
        default=None, description="from row to row; left out: one row alone, which nothing shades"
    )
    row_width_m: Annotated[float, Number(0.1, 50, "m")] = Field(
        default=2.0, description="of a row along the modules, square to its length"
    )
    height_m: Annotated[float, Number(0.05, 50, "m")] = Field(
        default=1.5, description="of a row's middle line, a tracker's axis, above the ground; counts for rear light"
    )
    sky_model: _SkyModel = _sky_model()

    def steepest_deg(self) -> float:
        """Return the steepest tilt across the rows [deg]."""
        raise NotImplementedError

    @model_validator(mode="after")
    def _stands(self) -> _InRows:
        """Refuse rows that overlap or reach into the ground."""
        tilt = radians(self.steepest_deg())
        if self.row_pitch_m is not None and self.row_pitch_m < self.row_width_m:
            raise refusal(f"row_pitch_m {self.row_pitch_m:g}", f"at least row_width_m, {self.row_width_m:g}")
        low = self.row_width_m / 2 * sin(tilt)
        if self.height_m < low - 1e-9:
            raise refusal(
                f"height_m {self.height_m:g}",
                f"at least {low:.3g}, so that rows {self.row_width_m:g} m wide clear the ground",
            )
        return self


class FixedMounting(_InRows):
    """A plane that does not move."""

    kind: Annotated[str, MountingKind(own="fixed")] = Field(default="fixed", description="how the modules stand")
    tilt_deg: Annotated[float, Number(0, 90, "deg from horizontal")]
    azimuth_deg: _Azimuth

    def steepest_deg(self) -> float:
        """Return the tilt."""
        return self.tilt_deg


class TrackerMounting(_InRows):
    """Rows that turn about one axis after the sun."""

    kind: Annotated[str, MountingKind(own="tracker")]
    axis_azimuth_deg: _Azimuth = Field(default=180.0, description="where the axis points; 180 or 0: north and south")
    axis_tilt_deg: Annotated[float, Number(0, 45, "deg from horizontal")] = Field(
        default=0.0, description="how far the axis falls towards its azimuth"
    )
    max_angle_deg: Annotated[float, Number(0, 90, "deg")] = Field(
        default=60.0, description="largest turn from level to either side"
    )
    backtrack: Annotated[bool, Flag()] = Field(
        default=True, description="turn back from a low sun before rows shade each other"
    )

    def steepest_deg(self) -> float:
        """Return the largest turn."""
        return self.max_angle_deg


class VerticalMounting(_InRows):
    """A wall or fence."""

    kind: Annotated[str, MountingKind(own="vertical")]
    azimuth_deg: _Azimuth = Field(description="where the front looks")

    def steepest_deg(self) -> float:
        """Return 90 deg."""
        return 90.0


class RoofMounting(Section):
    """Modules parallel to a roof: warmer, and no light from behind."""

    kind: Annotated[str, MountingKind(own="roof")]
    tilt_deg: Annotated[float, Number(0, 90, "deg from horizontal")]
    azimuth_deg: _Azimuth
    sky_model: _SkyModel = _sky_model()


AnyMounting = FixedMounting | TrackerMounting | VerticalMounting | RoofMounting


def _kind(value: Any) -> str:
    """Return the kind a mapping names; one that names none, or no such kind, is judged as a fixed one."""
    named = value.get("kind") if isinstance(value, dict) else getattr(value, "kind", None)
    return named if isinstance(named, str) and named in KINDS else "fixed"


OneMounting = Annotated[
    Annotated[FixedMounting, Tag("<fixed>")]
    | Annotated[TrackerMounting, Tag("<tracker>")]
    | Annotated[VerticalMounting, Tag("<vertical>")]
    | Annotated[RoofMounting, Tag("<roof>")],
    by(_kind),
]


@dataclass(frozen=True)
class Surface(InputFile):
    """A surface of the library, or a CSV of wavelength [nm] and albedo."""

    of: str = "a surface or a path"

    def _existing(self, value: Any, info: ValidationInfo) -> str:
        shown = self.take(value)
        if shown in surfaces():
            return shown
        if "." not in shown and "/" not in shown:
            allowed = f"{' | '.join(surfaces())}, or a CSV file of wavelength [nm] and albedo"
            raise refusal(show(value), allowed + nearest(value, surfaces()))
        return super()._existing(value, info)


class Ground(Section):
    """What lies under and around the modules; snow covers it when the weather file says so."""

    surface: Annotated[str, Surface()] | None = Field(
        default=None, description="a surface of the library, or a CSV of wavelength [nm] and albedo; left out: grey"
    )
    albedo: Annotated[float, Number(0, 1)] | None = Field(
        default=None,
        description="reflectance of all light together; left out: the weather file's own, else the surface's, else 0.2",
    )


AnyGround = Annotated[
    Annotated[str, Surface(), Tag("<word>")] | Annotated[Ground, Tag("<fields>")],
    by(lambda value: "word" if isinstance(value, str) else "fields"),
]
