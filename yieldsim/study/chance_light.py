"""How the light of a site's year answers to each input of its air: the closing done anew, hours drawn together.

A year's hours are drawn together into some two hundred classes of alike light. For each input of the air the same
weather is closed again with that input moved to either side, and each class and band keeps how the logarithm of its
light moved: in proportion, and with the square. Many inputs moved at once then need no closing, only exponentials.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from itertools import product

import numpy as np
from numpy.typing import NDArray

from yieldsim import spectrum
from yieldsim.constants import STANDARD_CELL_TEMPERATURE, STANDARD_IRRADIANCE
from yieldsim.device.stack import Absorber
from yieldsim.sky import closing
from yieldsim.sky.closing import ClosedSky
from yieldsim.sky.column import Air, Optics
from yieldsim.study import annual, light
from yieldsim.study.chance_inputs import BY_NAME
from yieldsim.study.hourly import FacesOfYear, SiteSky, by_front, closed_on
from yieldsim.study.pairs import shared_out
from yieldsim.study.plan import LossesPlan, MountingPlan, SitePlan
from yieldsim.units import kelvin

Array = NDArray[np.float64]

SHAPES, LEVELS, WARMTHS = 6, 16, 2  # classes of colour, irradiance and warmth
_COARSE_BELOW = 0.6  # share of a year below which classes are coarser: there are others of the other months
#: Inputs that work on each other: how much haze there is, and its colour; others by less than 0.05 %.
TOGETHER = (
    ("irradiance", "angstrom_exponent"),
    ("angstrom_exponent", "haze_absorption"),
    ("water_cm", "angstrom_exponent"),
)
STEP = 1.5  # spreads to either side at which the closing is done anew: between the middle and the tails of the draws
MOST_LIT = 5500  # intervals closed anew: a year of hours whole, of finer intervals every second day, third, ...
_LEAST_DAYS = 3
_RED_NM = 700.0
_NOTHING = 1e-12  # what is left of a month under snow: it counts for nothing, and still has a mean
_DARK = 1e-6  # of a class's light: a band below it stays as it is; saturated ones move by hundreds of powers of ten
_SAME = 1e-6  # haze solved twice
_ABSORPTION_MOST = 0.95


@dataclass(frozen=True, slots=True)
class ClassLight:
    """Light of a mounting's year by classes, and how it answers to the inputs of the air.

    The last class is the standard spectrum on cells at 25 degC; it has no weight and answers to nothing.

    Parameters
    ----------
    names : inputs of the air that move the light
    together : pairs of them, by number, that work on each other
    front, rear : (n_glass, n_class, n_band) arrays [W m-2], mean light behind each kind of glass; rear None = none
    front_moves, rear_moves : (n_term, n_glass, n_class, n_band) arrays [1], of the light's logarithm per spread of
        each input, per its square, and per product of each pair; see `terms`
    cloudy : (n_class,) array [1], share of the light that came with the sun hidden
    temp_air : (n_class,) array [K]
    rise : (n_absorber, n_class) array [K], of cells above the air
    weight : (n_class,) array [1], intervals in each class, each times what the losses leave of it
    """

    names: tuple[str, ...]
    together: tuple[tuple[int, int], ...]
    front: Array
    rear: Array | None
    front_moves: Array
    rear_moves: Array | None
    cloudy: Array
    temp_air: Array
    rise: Array
    weight: Array

    def terms(self, away: Array) -> Array:
        """Return what the moves are multiplied by, (n_term,) [1], with the inputs (n_input,) so many spreads away."""
        return np.concatenate([away, away**2, [away[i] * away[j] for i, j in self.together]])


@dataclass(frozen=True, slots=True, eq=False)
class Found:
    """What the study found out about each hour's haze; draws keep it, since an hour was clear or it was not.

    Parameters
    ----------
    hourly : bool, haze is solved at all
    own : (n,) bool array, hours whose beam tells their own haze
    tells : (n,) bool array, hours that tell of their month's haze
    """

    hourly: bool
    own: NDArray[np.bool_]
    tells: NDArray[np.bool_]

    @classmethod
    def of(cls, site: SitePlan, sky: SiteSky) -> Found:
        """Look it up in a finished sky: there an hour's haze is either that of its beam or the expected one."""
        if site.atmosphere.haze != "hourly":
            never = np.zeros(len(sky.lit), dtype=bool)
            return cls(False, never, never)
        solved = _beam_haze(sky, sky.air, sky.optics, 1.0)
        own = np.abs(solved - sky.sky.aod500) <= _SAME * solved
        consecutive = np.diff(sky.weather.time[sky.lit], prepend=0) == sky.weather.interval_s
        high = sky.air.cos_zenith > closing._LEAST_COS_ZENITH  # as the closing has it
        return cls(True, own, own & sky.sky.clear & closing.steady(solved, consecutive) & high)

    def only(self, chosen: NDArray[np.intp]) -> Found:
        """Return it of the chosen hours."""
        return Found(self.hourly, self.own[chosen], self.tells[chosen])


def moved(sky: SiteSky, found: Found, away: Mapping[str, float]) -> SiteSky:
    """Return the sky of the same weather in other air.

    Parameters
    ----------
    sky : SiteSky
    found : Found, of its hours
    away : input of the air -> how far it is moved, in the units of its spread

    Notes
    -----
    Haze of hours that tell their own is solved anew for the moved beam, water, ozone and colour; that of the others is
    the expected one, moved. Cloud is solved anew for all.
    """
    by = {name: float(BY_NAME[name].value(value)) for name, value in away.items()}
    air = _moved_air(sky.air, by)
    optics = _moved_haze(sky.optics, by.get("haze_absorption", 1.0))
    level = by.get("irradiance", 1.0)
    expected = air.aod500
    if found.hourly:
        solved = _beam_haze(sky, air, optics, level)
        if sky.calendar is not None:
            day, month = sky.calendar
            expected = closing.monthly_haze(solved, expected, found.tells, day, month)[0][month]
        expected = np.where(found.own, solved, expected)
    air = air.with_aod500(expected)
    closed = closed_on(sky.weather, sky.lit, sky.sun, air, optics, None, haze_hourly=False, level=level)
    return replace(sky, air=air, optics=optics, sky=closed)


def _beam_haze(sky: SiteSky, air: Air, optics: Optics, level: float) -> Array:
    """Return the haze that lets each hour's beam through."""
    dni = sky.weather["dni"][sky.lit] * level / sky.sun.lit
    return closing.beam_haze(air, sky.sun.earth_sun, dni, optics)


def _moved_air(air: Air, by: Mapping[str, float]) -> Air:
    fields = {name: getattr(air, name) for name in Air.__slots__}
    for name in ("water_cm", "ozone_atm_cm", "aod500"):
        fields[name] = fields[name] * by.get(name, 1.0)
    fields["angstrom_exponent"] = air.angstrom_exponent + by.get("angstrom_exponent", 0.0)
    if "albedo" in by:  # the odds of reflecting: dark ground moves in proportion, snow stays below 1
        fields["albedo"] = air.albedo * by["albedo"] / (1 + air.albedo * (by["albedo"] - 1))
    return Air(**fields)


def _moved_haze(optics: Optics, factor: float) -> Optics:
    """Return optics whose haze absorbs more by a factor."""
    if factor == 1.0:
        return optics
    return optics.replace(haze_albedo=1 - np.minimum((1 - optics.haze_albedo) * factor, _ABSORPTION_MOST))


def thinned(sky: SiteSky, found: Found, most: int) -> tuple[SiteSky, Found]:
    """Return every day of a sky, or about as many as hold a number of intervals, spread evenly; three at least."""
    day = (sky.weather.time[sky.lit] + round(sky.weather.utc_offset_h * 3600)) // 86400
    days = np.unique(day)
    every = min(-(-len(sky.lit) // max(most, 1)), len(days) // _LEAST_DAYS)
    if every <= 1:
        return sky, found
    chosen = np.flatnonzero(np.isin(day, days[::every]))
    calendar = None if sky.calendar is None else (sky.calendar[0][chosen], sky.calendar[1][chosen])
    mask = np.isin(np.arange(len(sky.lit)), chosen)
    fewer = replace(
        sky,
        lit=sky.lit[chosen],
        month=sky.month[chosen],
        sun=sky.sun.only(mask),
        air=sky.air.only(chosen),
        calendar=calendar,
    )
    fewer = replace(fewer, sky=_only(sky.sky, chosen))
    return fewer, found.only(chosen)


def _only(closed: ClosedSky, chosen: NDArray[np.intp]) -> ClosedSky:
    fields = ("beam", "diffuse", "aod500", "cloud_depth", "open_share", "clear")
    return replace(closed, **{name: getattr(closed, name)[chosen] for name in fields})


def gather(
    site: SitePlan,
    sky: SiteSky,
    absorbers: Sequence[Absorber],
    losses: Sequence[LossesPlan],
    spreads: Mapping[str, float],
    share: float = 1.0,
) -> list[ClassLight]:
    """Return the light of a stretch of time on each of a site's mountings, and how it answers to its air.

    Parameters
    ----------
    site : SitePlan
    sky : SiteSky
    absorbers : sequence of Absorber
    losses : LossesPlan of each mounting
    spreads : input of the air -> standard deviation, in the units of its spread; those of 0 are left out
    share : float [1], of the year that this stretch is: a month need not be told as finely as a year
    """
    sky, found = thinned(sky, Found.of(site, sky), round(MOST_LIT * share))
    names = tuple(name for name, spread in spreads.items() if spread > 0)
    kinds = (SHAPES, LEVELS, WARMTHS) if share > _COARSE_BELOW else (SHAPES // 2, LEVELS // 2, 1)
    base = moved(sky, found, {})  # closed as for every draw
    drawn = [_Drawn.of(base, *each, absorbers, kinds) for each in zip(site.mountings, losses, strict=True)]
    together = tuple((names.index(one), names.index(two)) for one, two in TOGETHER if one in names and two in names)
    moves = [each.blank(2 * len(names) + len(together)) for each in drawn]
    for side, (number, those) in product((1, -1), enumerate([*((i,) for i in range(len(names))), *together])):
        other = moved(sky, found, {names[i]: side * STEP * spreads[names[i]] for i in those})
        for each, kept in zip(drawn, moves, strict=True):
            if len(those) == 1:
                each.enter(kept, other, {number: side / (2 * STEP), len(names) + number: 1 / (2 * STEP**2)})
            else:
                each.enter(kept, other, {len(names) + number: 1 / (2 * STEP**2)})
    for kept in moves:
        _less_squares(kept, len(names), together)
    return [each.light(names, together, kept) for each, kept in zip(drawn, moves, strict=True)]


def _less_squares(moves: Moves, count: int, together: Sequence[tuple[int, int]]) -> None:
    """Take each input's own square out of what a pair moved together."""
    for face in moves:
        for k, (i, j) in enumerate(together):
            if face is not None:
                face[2 * count + k] -= face[count + i] + face[count + j]


Moves = tuple[Array, Array | None]


@dataclass(frozen=True, slots=True, eq=False)
class _Drawn:
    """The hours of a mounting drawn together: which class each is in, and what the classes hold."""

    mounting: MountingPlan
    absorbers: tuple[Absorber, ...]
    losses: LossesPlan
    order: NDArray[np.intp]
    starts: NDArray[np.intp]
    kept: Array
    front: Array
    rear: Array | None
    cloudy: Array
    temp_air: Array
    rise: Array
    weight: Array

    @classmethod
    def of(
        cls,
        sky: SiteSky,
        mounting: MountingPlan,
        losses: LossesPlan,
        absorbers: Sequence[Absorber],
        kinds: tuple[int, int, int],
    ) -> _Drawn:
        faces = _faces(sky, mounting, absorbers, losses)
        total = faces.front.total()
        temp_air = kelvin(sky.weather["temp_air"][sky.lit])
        temperature = faces.temperatures(mounting, absorbers)
        left = np.maximum(annual.kept_share(losses), _NOTHING)[sky.month]
        lit = np.flatnonzero(total > 0)
        number = _classes(faces.front.bands()[lit], temperature[0][lit], kinds)
        order = lit[np.argsort(number, kind="stable")]
        starts = np.flatnonzero(np.diff(np.sort(number), prepend=-1))
        kept = left[order]
        brought = kept * total[order]  # warmth counts by the light it comes with

        def by_light(values: Array) -> Array:
            whole = np.add.reduceat(brought, starts)
            return np.asarray(np.add.reduceat(values[..., order] * brought, starts, axis=-1) / whole)

        weight = np.add.reduceat(kept, starts)
        fronts, rears = _behind_glass(faces, absorbers, order, starts, kept)
        return cls(
            mounting, tuple(absorbers), losses, order, starts, kept, fronts / weight[:, None],
            None if rears is None else rears / weight[:, None],
            by_light(1.0 - sky.sky.open_share), by_light(temp_air), by_light(temperature - temp_air), weight,
        )  # fmt: skip

    def blank(self, count: int) -> Moves:
        """Return room for a number of terms of how the light's logarithm moves."""
        front = np.zeros((count, *self.front.shape))
        return front, None if self.rear is None else np.zeros((count, *self.rear.shape))

    def enter(self, moves: Moves, sky: SiteSky, parts: Mapping[int, float]) -> None:
        """Enter the light of a moved sky: term -> how much of its logarithm belongs to it."""
        faces = _faces(sky, self.mounting, self.absorbers, self.losses)
        found = _behind_glass(faces, self.absorbers, self.order, self.starts, self.kept)
        for kept, base, light_there in zip(moves, (self.front, self.rear), found, strict=True):
            if kept is None or base is None or light_there is None:
                continue
            there = light_there / self.weight[:, None]
            seen = (base > _DARK * base.sum(axis=2, keepdims=True)) & (there > 0)
            logarithm = np.log(np.where(seen, there, 1.0) / np.where(seen, base, 1.0))
            for term, part in parts.items():
                kept[term] += part * logarithm

    def light(self, names: tuple[str, ...], together: tuple[tuple[int, int], ...], moves: Moves) -> ClassLight:
        """Return it all, the standard spectrum at the end."""
        bands = spectrum.reference_bands()
        standard = bands * (STANDARD_IRRADIANCE / bands.sum())
        front_moves, rear_moves = moves
        return ClassLight(
            names,
            together,
            _with_last(self.front, standard),
            None if self.rear is None else _with_last(self.rear, 0.0),
            _with_last(front_moves, 0.0),
            None if rear_moves is None else _with_last(rear_moves, 0.0),
            np.append(self.cloudy, 0.0),
            np.append(self.temp_air, STANDARD_CELL_TEMPERATURE),
            np.concatenate([self.rise, np.zeros((len(self.rise), 1))], axis=1),
            np.append(self.weight, 0.0),
        )


def joined(parts: Sequence[ClassLight]) -> ClassLight:
    """Return the classes of several stretches of time as one."""
    if len(parts) == 1:
        return parts[0]

    def along(name: str, axis: int) -> Array:
        values = [getattr(part, name) for part in parts]
        ends = [slice(None, -1)] * (len(parts) - 1) + [slice(None)]
        cut = [np.moveaxis(np.moveaxis(v, axis, 0)[end], 0, axis) for v, end in zip(values, ends, strict=True)]
        return np.concatenate(cut, axis=axis)

    first = parts[0]
    rear = None if first.rear is None else along("rear", 1)
    rear_moves = None if first.rear_moves is None else along("rear_moves", 2)
    rest = (along("cloudy", 0), along("temp_air", 0), along("rise", 1), along("weight", 0))
    front = along("front", 1), rear, along("front_moves", 2), rear_moves
    return ClassLight(first.names, first.together, *front, *rest)


def _with_last(values: Array, last: Array | float) -> Array:
    """Return class means (..., n_class, n_band) with a further class."""
    room = np.empty((*values.shape[:-2], 1, values.shape[-1]))
    room[...] = last
    return np.concatenate([values, room], axis=-2)


def _faces(sky: SiteSky, mounting: MountingPlan, absorbers: Sequence[Absorber], losses: LossesPlan) -> FacesOfYear:
    front, rear = light.plane_parts(sky, mounting), light.rear_parts(sky, mounting, absorbers)
    return FacesOfYear(sky, front, rear, light.dust_colour(sky, losses))


def _behind_glass(
    faces: FacesOfYear, absorbers: Sequence[Absorber], order: NDArray[np.intp], starts: NDArray[np.intp], kept: Array
) -> tuple[Array, Array | None]:
    """Return the light of each class behind each kind of glass, sums (n_glass, n_class, n_band) [W m-2]."""
    entered = [faces.entered(glass) for glass, _ in by_front(absorbers)]
    front = np.array([np.add.reduceat(each[order] * kept[:, None], starts, axis=0) for each, _ in entered])
    rears = [np.add.reduceat(each[order] * kept[:, None], starts, axis=0) for _, each in entered if each is not None]
    return front, np.array(rears) if rears else None


def _classes(front: Array, temperature: Array, kinds: tuple[int, int, int]) -> NDArray[np.intp]:
    """Return the class (n,) of each hour, counted without gaps."""
    total = front.sum(axis=1)
    blue = front[:, spectrum.band_wavelengths() < _RED_NM].sum(axis=1) / total
    number = np.zeros(len(total), dtype=np.intp)
    by = ((blue, total), (total, np.sqrt(total)), (temperature, total))
    for (values, share), count in zip(by, kinds, strict=True):
        number = number * count + shared_out(np.asarray(values), share, count)
    return np.asarray(np.unique(number, return_inverse=True)[1])
