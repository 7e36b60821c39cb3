"""What `chance` draws: each input with its spread, whose it is, and why.

A spread is one standard deviation. Inputs whose true value nobody can know are here by their size in common practice; a
study overrides any of them, and 0 leaves an input out.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from yieldsim import spectrum
from yieldsim.device.junction import Junction
from yieldsim.device.stack import Absorber

Array = NDArray[np.float64]

Owner = Literal["site", "all", "junction", "absorber"]
FARTHEST = 4.0  # draws further out than this many spreads count as this: 1 in 16,000


@dataclass(frozen=True, slots=True)
class Input:
    """An input that is drawn.

    Parameters
    ----------
    name : str, as in ``spreads`` of a study
    spread : float, default standard deviation, in ``unit``
    highest : float, largest spread a study may give
    kind : ``factor`` = the input times exp(spread z); ``share`` = times 1 + spread z; ``step`` = plus spread z
    owner : whose it is: ``site`` = each site's own unless `correlation` ties them; ``all`` = one for sites and
        absorbers; ``junction`` and ``absorber`` = that of a device, the same at every site
    unit : str, of a spread
    words : str, what it is
    reason : str, why the spread is what it is
    """

    name: str
    spread: float
    highest: float
    kind: Literal["factor", "share", "step"]
    owner: Owner
    unit: str
    words: str
    reason: str

    def value(self, spreads: Array | float) -> Array:
        """Return what the input is multiplied by, or what is added to it, this many units of its scale away."""
        away = np.asarray(spreads, dtype=np.float64)
        if self.kind == "factor":
            return np.asarray(np.exp(away))
        return away if self.kind == "step" else np.asarray(1 + away)


LN = "ln"
INPUTS: tuple[Input, ...] = (
    Input(
        "irradiance", 0.025, 0.2, "share", "site", "1", "level of the file's beam and diffuse light, all year",
        "satellite and good ground data are 2-4 % off over a year (common practice, no source); haze is solved anew",
    ),
    Input(
        "year", 0.04, 0.2, "share", "site", "1", "one coming year against the mean year",
        "annual light scatters by 2-6 % from year to year (common practice, no source); a site with several years "
        "draws among them instead, unless a spread is given",
    ),
    Input(
        "aod500", 0.3, 1.0, "factor", "site", LN, "haze expected where the beam does not tell it",
        "monthly climatologies scatter by about a third around a site's own haze (common practice, no source); hours "
        "that tell their own haze keep it, since the file's beam already holds it",
    ),
    Input(
        "water_cm", 0.1, 0.5, "factor", "site", LN, "precipitable water, all year",
        "from humidity at the ground (Gueymard 1994) monthly means are about 10 % off (from memory)",
    ),
    Input(
        "ozone_atm_cm", 0.05, 0.3, "factor", "site", LN, "ozone column, all year",
        "van Heuklon's (1979) course is a few per cent off, single months 10 % (common practice, no source)",
    ),
    Input(
        "angstrom_exponent", 0.3, 1.0, "step", "site", "1", "colour of haze",
        "1.14 stands for every haze; sites lie between 0.3 (dust, sea salt) and 1.8 (smoke), most within 0.3 "
        "(common practice, no source); the beam's sum fixes how much haze there is, not its colour",
    ),
    Input(
        "haze_absorption", 0.5, 1.5, "factor", "site", LN, "share of light that haze absorbs",
        "scattering albedos near 500 nm run from 0.85 to 0.98 (common practice, no source)",
    ),
    Input(
        "albedo", 0.25, 1.0, "factor", "site", LN, "odds of the ground to reflect light, albedo / (1 - albedo)",
        "grass and soil lie between 0.15 and 0.3 where 0.2 is taken, snow between 0.7 and 0.85 where 0.8 is (common "
        "practice, no source)",
    ),
    Input(
        "heat_loss", 0.1, 0.5, "factor", "all", LN, "heat loss coefficients of the cell temperature",
        "coefficients fitted at different racks and winds differ by 10-15 % (common practice, no source); one heat "
        "balance serves all sites and absorbers, so its error is common to them",
    ),
    Input(
        "model_clear", 0.01, 0.05, "step", "all", "1", "error of the column of air by band, its sum kept",
        "smooth in wavelength; so large that current per light over gaps of 0.72-2.2 eV errs by 0.4 %, as the check "
        "against 6S finds over air masses 1 to 5 (0.36 %)",
    ),
    Input(
        "model_cloud", 0.015, 0.1, "step", "all", "1", "further error of the column by band under cloud, its sum kept",
        "likewise, so that both together make 0.7 %: discrete ordinates under cloud differ by 0.2-0.6 % rms, "
        "regressions of measured spectra by 0.3-1.5 %",
    ),
    Input(
        "edge_ev", 0.005, 0.05, "step", "junction", "eV", "response edge of a junction",
        "composition, thickness and trapping move edges by some 5 meV, about 5 nm at 1100 nm (common practice, no "
        "source)",
    ),
    Input(
        "response", 0.015, 0.1, "share", "junction", "1", "response level of a junction",
        "calibrated responses agree within 1-2 % (common practice, no source); it does not move energy per rated power",
    ),
    Input(
        "external_radiative_efficiency", 0.5, 3.0, "factor", "junction", LN, "external radiative efficiency",
        "a factor of 1.6, 13 mV of voltage: the scatter of good modules of one make (common practice, no source)",
    ),
    Input(
        "resistances", 0.25, 1.5, "factor", "junction", LN, "series resistance, and shunt conductance with it",
        "a few tenths of a per cent of fill factor to either side (common practice, no source)",
    ),
    Input(
        "temperature_coefficient", 0.0002, 0.003, "step", "absorber", "K-1", "temperature coefficient of power",
        "datasheets of one technology differ by 0.02-0.03 %/K (common practice, no source)",
    ),
    Input(
        "nameplate", 0.01, 0.1, "share", "absorber", "1", "power at standard conditions over that of the label",
        "flash tests are 1-2 % off, sorting classes are as wide (common practice, no source); moves energy per rated "
        "power only",
    ),
    Input(
        "degradation", 0.005, 0.1, "share", "absorber", "1", "energy left by ageing against what the study takes",
        "a quarter of a per cent a year to either side, over the first years (common practice, no source)",
    ),
)  # fmt: skip
BY_NAME: Mapping[str, Input] = {each.name: each for each in INPUTS}

#: Inputs that change the light; the closing is done anew for each of them.
OF_LIGHT = (
    "irradiance", "aod500", "water_cm", "ozone_atm_cm", "angstrom_exponent", "haze_absorption", "albedo",
)  # fmt: skip
#: Inputs that only multiply a finished energy.
OF_ENERGY = ("year", "nameplate", "degradation")
OF_JUNCTION = tuple(each.name for each in INPUTS if each.owner == "junction")
OF_ABSORBER = tuple(each.name for each in INPUTS if each.owner == "absorber")
OF_SITE = tuple(each.name for each in INPUTS if each.owner == "site")


def is_ideal(junction: Junction) -> bool:
    """Return whether a junction stands for a limit: a limit has no tolerance, and none of its inputs is drawn."""
    lossless = junction.series_resistance_ohm_cm2 == 0 and np.isinf(junction.shunt_resistance_ohm_cm2)
    return bool(lossless and junction.external_radiative_efficiency == 1.0)


def is_limit(absorber: Absorber) -> bool:
    """Return whether all junctions of an absorber are ideal."""
    return all(is_ideal(junction) for junction in absorber.junctions)


# ------------------------------------------------------------------------------------- the model's own error by band

SHAPES = 5  # smooth functions that hold 98 % of the error's variance
_REACH = 0.35  # of the error in ln(wavelength): bands a third apart err alike


@cache
def error_shapes() -> Array:
    """Return the functions of wavelength an error by band is made of, (SHAPES, n_band) [1].

    Notes
    -----
    A random function of ln(wavelength) with correlation exp(-(d/reach)^2 / 2), as its leading principal functions,
    weighted with the light of the reference spectrum; times independent normal values their sum has a mean square of 1
    over the light.
    """
    place = np.log(spectrum.band_wavelengths())
    light = spectrum.reference_bands() / spectrum.reference_bands().sum()
    root = np.sqrt(light)
    covariance = root[:, None] * np.exp(-(((place[:, None] - place) / _REACH) ** 2) / 2) * root
    values, vectors = np.linalg.eigh(covariance)
    leading = vectors[:, ::-1][:, :SHAPES] * np.sqrt(values[::-1][:SHAPES])
    shapes = (leading / root[:, None]).T
    # Signs of principal functions are the library's choice: fix them, so that a draw means the same everywhere.
    shapes = shapes * np.sign(shapes @ light)[:, None]
    return np.asarray(shapes / np.sqrt(np.sum(shapes**2 @ light)))
