"""One column of air for every sky: three layers over a ground, with or without a cloud, band by band."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import numpy as np
from numpy.typing import NDArray

from yieldsim import reference, spectrum
from yieldsim.sky import growth, kernel
from yieldsim.sky.growth import mixed_gas_depth, water_depth
from yieldsim.sky.kernel_layer import BAND_ROWS, STRIDE, Model
from yieldsim.sky.layer import MOMENTS, Layer, add_layers, four_stream
from yieldsim.sky.sun import ozone_air_mass, relative_air_mass

Array = NDArray[np.float64]

# Shares of each constituent above, in and below the cloud, top first.
AIR_SHARE = np.array([0.8, 0.1, 0.1])
WATER_SHARE = np.array([0.42, 0.18, 0.40])
HAZE_SHARE = np.array([0.2, 0.1, 0.7])
DIFFUSIVITY = 1.66  # mean slant of diffuse light, Elsasser (1942)
CLOUD_PATH = 1.2  # how much longer light's way through gas is inside a cloud than across it
CLOUD_ASYMMETRY = 0.85  # water drops of 10 um in the visible, Hu & Stamnes (1993)
DROP_RADIUS_NM = 10_000.0
BIRD_PRESSURE = 101300.0  # Pa, the standard pressure of Bird & Riordan (1984)
RAYLEIGH_MOMENT = 0.1  # second Legendre moment of Rayleigh's phase function
HAZE_ALBEDO_400 = 0.945  # single-scattering albedo at 400 nm, Bird & Riordan (1984), rural aerosol
HAZE_ASYMMETRY = 0.65  # Bird & Riordan (1984), rural aerosol
DARK_SHARE = 0.1  # bands where the reference spectrum is below this share of the extraterrestrial one count as dark
FACTOR_BOUNDS = (0.5, 2.0)
REFERENCE_TILT_DEG = 37.0
_OPEN_SKY = 1e-12  # scattering and absorption below this depth change no digit that is kept


@dataclass(frozen=True, slots=True)
class Air:
    """What the column holds in each hour; every field (n,) unless said otherwise.

    Parameters
    ----------
    cos_zenith : [1], cosine of the apparent zenith of the sun, above 0
    pressure : [Pa]
    water_cm : [cm], precipitable water
    ozone_atm_cm : [atm-cm]
    aod500 : [1], aerosol optical depth at 500 nm
    angstrom_exponent : [1]
    albedo : (n,) or (n, n_band) [1], of the ground
    """

    cos_zenith: Array
    pressure: Array
    water_cm: Array
    ozone_atm_cm: Array
    aod500: Array
    angstrom_exponent: Array
    albedo: Array

    def only(self, chosen: NDArray[np.bool_] | NDArray[np.intp] | slice) -> Air:
        """Return the chosen hours."""
        return Air(**{name: getattr(self, name)[chosen] for name in self.__slots__})

    def with_aod500(self, aod500: Array) -> Air:
        """Return the same air with another haze."""
        return Air(**{name: aod500 if name == "aod500" else getattr(self, name) for name in self.__slots__})


@dataclass(frozen=True, slots=True)
class Optics:
    """Band constants of the column, each (n_band,).

    Parameters
    ----------
    extraterrestrial : [W m-2], at the mean earth-sun distance
    factor : [1], reference band energy over that of the model at the reference conditions
    gas_scale : [1], factor on gas optical depths, other than 1 in dark bands only
    rayleigh : [1], optical depth at standard pressure
    ozone : absorption coefficient of Bird & Riordan (1984)
    water, mixed_gas : absorption coefficients for their curves of growth, set on ASTM G173's direct beam
    haze_shape : [1], ln(wavelength/500 nm)
    haze_albedo : [1], single-scattering albedo of haze
    haze_asymmetry : [1]
    cloud_albedo : [1], single-scattering albedo of cloud drops
    """

    extraterrestrial: Array
    factor: Array
    gas_scale: Array
    rayleigh: Array
    ozone: Array
    water: Array
    mixed_gas: Array
    haze_shape: Array
    haze_albedo: Array
    haze_asymmetry: Array
    cloud_albedo: Array

    def replace(self, **fields: Array) -> Optics:
        """Return a copy with some band constants changed."""
        return Optics(**{name: fields.get(name, getattr(self, name)) for name in self.__slots__})


@dataclass(frozen=True, slots=True)
class Transmittance:
    """Share of the light on a horizontal plane above the air that arrives below, each (n, n_band) [1].

    Parameters
    ----------
    beam : unscattered
    total : on the horizontal ground, with what ground and air throw to and fro
    """

    beam: Array
    total: Array


def bare_optics() -> Optics:
    """Return the band constants before the reference spectrum is folded in (factor and gas_scale 1)."""
    table, gas = reference.table("bird_riordan_1984"), reference.table("gas_coefficients")
    wavelength = spectrum.band_wavelengths()
    solar = reference.table("astm_g173_03")
    um = wavelength / 1000.0
    water_k = reference.table("water_segelstein_1981")
    k = np.exp(np.interp(wavelength, water_k["wavelength_nm"], np.log(water_k["k"])))
    absorbed = (1 - np.exp(-1.7 * 4 * np.pi * k / wavelength * DROP_RADIUS_NM)) / 2
    one = np.ones_like(wavelength)
    return Optics(
        extraterrestrial=spectrum.integrate_bands(solar["wavelength_nm"], solar["extraterrestrial"]),
        factor=one,
        gas_scale=one,
        rayleigh=1.0 / (um**4 * (115.6406 - 1.3366 / um**2)),
        ozone=table["ozone"],
        water=gas["water"],
        mixed_gas=gas["mixed_gas"],
        haze_shape=np.log(wavelength / 500.0),
        haze_albedo=HAZE_ALBEDO_400 * np.exp(-0.095 * np.log(wavelength / 400.0) ** 2),
        haze_asymmetry=HAZE_ASYMMETRY * one,
        cloud_albedo=1 - absorbed,
    )


@cache
def optics() -> Optics:
    """Return the band constants with the reference spectrum folded in.

    Notes
    -----
    At the conditions of ASTM G173-03 the column times ``factor`` gives the standard's band energies. Bands that the
    standard leaves nearly dark get no factor, which would ruin dry air; there the gas optical depths are scaled
    instead, which is exact at the reference and fades as the gas does.
    """
    bare = bare_optics()
    wanted = spectrum.reference_bands()
    dark = wanted < DARK_SHARE * bare.extraterrestrial
    low, high = np.zeros_like(wanted), np.full_like(wanted, 50.0)
    for _ in range(60):  # halving: 50 / 2**60 is below rounding
        middle = (low + high) / 2
        bright = reference_plane(bare.replace(gas_scale=middle)) > wanted
        low, high = np.where(bright, middle, low), np.where(bright, high, middle)
    scaled = bare.replace(gas_scale=np.where(dark, (low + high) / 2, 1.0))
    factor = np.ones_like(wanted)
    for _ in range(20):  # the sky's share of circumsolar light makes it slightly nonlinear; each pass gains a digit
        factor = np.where(
            dark, 1.0, np.clip(factor * wanted / reference_plane(scaled.replace(factor=factor)), *FACTOR_BOUNDS)
        )
    return scaled.replace(factor=factor)


def with_haze(constants: Optics, single_scattering_albedo: float | None, asymmetry: float | None) -> Optics:
    """Return band constants with a site's own haze.

    Parameters
    ----------
    constants : Optics
    single_scattering_albedo : float or None [1], at 400 nm; its course over wavelength stays that of Bird & Riordan
    (1984)
    asymmetry : float or None [1], at all wavelengths
    """
    fields: dict[str, Array] = {}
    if single_scattering_albedo is not None:
        fields["haze_albedo"] = constants.haze_albedo * (single_scattering_albedo / HAZE_ALBEDO_400)
    if asymmetry is not None:
        fields["haze_asymmetry"] = np.full_like(constants.haze_asymmetry, asymmetry)
    return constants.replace(**fields) if fields else constants


def reference_air() -> Air:
    """Return the air of ASTM G173-03: air mass 1.5, 1.4164 cm water, 0.3438 atm-cm ozone, AOD500 0.084; one hour.

    The standard's ground is a light sandy soil; here the dry soil of the ground library stands for it.
    """
    cos_zenith = np.array([np.cos(np.radians(48.236))])  # where Kasten & Young (1989) give air mass 1.5
    return Air(
        cos_zenith=cos_zenith,
        pressure=np.array([101325.0]),
        water_cm=np.array([1.4164]),
        ozone_atm_cm=np.array([0.3438]),
        aod500=np.array([0.084]),
        angstrom_exponent=np.array([1.14]),
        albedo=reference.table("ground_albedo")["dry_soil"][None, :],
    )


def reference_plane(constants: Optics) -> Array:
    """Return band energies on the standard's plane (37 deg towards the sun) under its air, (n_band,) [W m-2]."""
    return np.asarray(facing_sun(reference_air(), np.zeros(1), REFERENCE_TILT_DEG, constants)[0])


def facing_sun(air: Air, cloud_depth: Array, tilt_deg: float, constants: Optics | None = None) -> Array:
    """Return band energies on a plane tilted towards the sun, its ground that of the air.

    Parameters
    ----------
    air : Air of n hours
    cloud_depth : (n,) array [1]
    tilt_deg : float [deg]
    constants : Optics, those with the reference folded in unless given; ``factor`` is applied

    Returns
    -------
    (n, n_band) array [W m-2], at the mean earth-sun distance
    """
    from yieldsim.sky.plane import isotropic_parts, sky_light

    constants = optics() if constants is None else constants
    passed = transmit(air, cloud_depth, constants)
    cos_zenith = air.cos_zenith[:, None]
    normal = constants.extraterrestrial * passed.beam * constants.factor
    horizontal = constants.extraterrestrial * passed.total * constants.factor * cos_zenith
    around = passed.beam * constants.factor * forward_share(air, constants)
    light = sky_light(normal, horizontal - normal * cos_zenith, around, air.cos_zenith)
    cos_aoi = np.maximum(np.cos(np.arccos(cos_zenith) - np.radians(tilt_deg)), 0.0)
    sky_view, ground_view = isotropic_parts(tilt_deg)
    albedo = air.albedo if air.albedo.ndim == 2 else air.albedo[:, None]
    return np.asarray(light.direct * cos_aoi + light.uniform * sky_view + horizontal * albedo * ground_view)


def transmit(air: Air, cloud_depth: Array, constants: Optics | None = None) -> Transmittance:
    """Send sunlight through the column.

    Parameters
    ----------
    air : Air of n hours
    cloud_depth : (n,) array [1], optical depth of the cloud layer in the visible; 0 = no cloud
    constants : Optics, those with the reference folded in unless given; ``factor`` is *not* applied here

    Returns
    -------
    Transmittance

    Notes
    -----
    Ozone is a pure absorber on top. Below it three layers hold air, vapour, mixed gas and haze in the shares above,
    the middle one also the cloud. Slant paths are those of a curved atmosphere: the beam meets each layer under
    mu = 1/m(z) with the air mass of Kasten & Young (1989). Gas absorption follows the curves of growth of Bird &
    Riordan (1984) as increments down the column: along the slant of the beam where the beam reaches, along 1.66
    (1.2 times that inside the cloud) where a cloud has scattered it.
    """
    constants = optics() if constants is None else constants
    hours, albedo = kernel_hours(air, np.asarray(cloud_depth, dtype=np.float64))
    shape = (len(hours), len(constants.factor))
    beam, total = np.empty(shape), np.empty(shape)
    kernel.transmit(hours, albedo, kernel_model(constants), beam, total)
    return Transmittance(beam, total)


def kernel_hours(air: Air, cloud_depth: Array) -> tuple[Array, Array]:
    """Return hours and ground as the kernel takes them."""
    masses = (relative_air_mass(air.cos_zenith), ozone_air_mass(air.cos_zenith))
    content = (air.pressure / BIRD_PRESSURE, air.water_cm, air.ozone_atm_cm, air.aod500, air.angstrom_exponent)
    albedo = air.albedo[:, None] if air.albedo.ndim == 1 else air.albedo
    return np.stack([*masses, *content, cloud_depth], axis=1), np.require(albedo, requirements=("C", "W"))


def kernel_model(constants: Optics) -> Model:
    """Return the column's constants as the kernel takes them."""
    light, fixed = np.zeros(STRIDE), np.zeros(STRIDE)
    light[: len(constants.factor)] = constants.extraterrestrial * constants.factor
    shares = (*AIR_SHARE, *WATER_SHARE, *HAZE_SHARE)
    others = (CLOUD_ASYMMETRY, RAYLEIGH_MOMENT, _OPEN_SKY, DIFFUSIVITY, CLOUD_PATH)
    known = (*shares, *others, *growth.WATER_LAW, *growth.MIXED_LAW)
    fixed[: len(known)] = known
    bands = [growth.padded(getattr(constants, name)) for name in BAND_ROWS]
    return np.concatenate([*bands, light, fixed]), growth.tables(constants.water, constants.mixed_gas)


def transmit_plain(air: Air, cloud_depth: Array, constants: Optics | None = None) -> Transmittance:
    """Send sunlight through the column in plain numpy: the form `transmit` is held to.

    Parameters and result as for `transmit`.
    """
    constants = optics() if constants is None else constants
    air_mass = relative_air_mass(air.cos_zenith)[:, None]
    mu = 1.0 / air_mass
    pressure_ratio = air.pressure[:, None] / BIRD_PRESSURE
    cloud = np.asarray(cloud_depth, dtype=np.float64)[:, None]
    haze = air.aod500[:, None] * np.exp(-air.angstrom_exponent[:, None] * constants.haze_shape)
    rayleigh = pressure_ratio * constants.rayleigh
    slants = _slants(air_mass, cloud)
    gas = _gas_depths(air.water_cm[:, None], pressure_ratio, slants, constants)

    layers: list[Layer] = []
    depth = np.zeros_like(haze)
    for i, gas_depth in enumerate(gas):
        cloud_part = cloud if i == 1 else None
        layers.append(_layer(rayleigh * AIR_SHARE[i], haze * HAZE_SHARE[i], gas_depth, cloud_part, mu, constants))
        depth = depth + rayleigh * AIR_SHARE[i] + haze * HAZE_SHARE[i] + gas_depth
    ozone = np.exp(
        -constants.gas_scale * constants.ozone * air.ozone_atm_cm[:, None] * ozone_air_mass(air.cos_zenith)[:, None]
    )
    albedo = air.albedo[:, None] if air.albedo.ndim == 1 else air.albedo
    total = add_layers(layers, albedo) * ozone
    beam = np.exp(-(depth + cloud) * air_mass) * ozone
    return Transmittance(beam, np.maximum(total, beam))


def forward_share(air: Air, constants: Optics | None = None) -> Array:
    """Return haze's share of all scattering by clear air, (n, n_band) [1]: the part that keeps near the sun."""
    constants = optics() if constants is None else constants
    exponents, of_hour = np.unique(air.angstrom_exponent, return_inverse=True)  # few: most often one for all hours
    shape = np.exp(-exponents[:, None] * constants.haze_shape) * (constants.haze_albedo / constants.rayleigh)
    # haze/(haze + air) as 1 - 1/(1 + haze/air)
    share = shape[of_hour]
    share *= (air.aod500 * BIRD_PRESSURE / air.pressure)[:, None]
    share += 1.0
    np.divide(-1.0, share, out=share)
    share += 1.0
    return share


def _slants(air_mass: Array, cloud: Array) -> tuple[Array, Array, Array]:
    """Return the slant of light's way through gas above, in and below the cloud, each (n, 1) [1].

    Where the cloud is thin, light still goes the beam's way: the two slants are mixed by the share of light that the
    cloud has not turned aside, exp(-(1 - g^2) tau m), the delta-scaled beam.
    """
    straight = np.exp(-(1 - CLOUD_ASYMMETRY**2) * cloud * air_mass)
    below = straight * air_mass + (1 - straight) * DIFFUSIVITY
    inside = straight * air_mass + (1 - straight) * DIFFUSIVITY * CLOUD_PATH
    return air_mass, inside, below


def _gas_depths(
    water_cm: Array, pressure_ratio: Array, slants: tuple[Array, Array, Array], constants: Optics
) -> list[Array]:
    """Return the vertical optical depth of absorbing gas in each layer, three (n, n_band) arrays."""
    wet, mixed = constants.water > 0, constants.mixed_gas > 0
    water_path, air_path = np.zeros_like(water_cm), np.zeros_like(pressure_ratio)
    n = np.broadcast_shapes(water_cm.shape, pressure_ratio.shape, slants[1].shape)[0]
    before_water, before_mixed = np.zeros((n, int(wet.sum()))), np.zeros((n, int(mixed.sum())))
    depths = []
    for i, slant in enumerate(slants):
        water_path = water_path + water_cm * WATER_SHARE[i] * slant
        air_path = air_path + pressure_ratio * AIR_SHARE[i] * slant
        after_water = water_depth(constants.water[wet], water_path)
        after_mixed = mixed_gas_depth(constants.mixed_gas[mixed], air_path)
        depth = np.zeros((n, len(constants.water)))
        depth[:, wet] = (after_water - before_water) * (constants.gas_scale[wet] / slant)
        depth[:, mixed] += (after_mixed - before_mixed) * (constants.gas_scale[mixed] / slant)
        depths.append(depth)
        before_water, before_mixed = after_water, after_mixed
    return depths


def _layer(rayleigh: Array, haze: Array, gas: Array, cloud: Array | None, mu: Array, constants: Optics) -> Layer:
    """Mix the constituents of one layer and solve it."""
    haze_scattered = haze * constants.haze_albedo
    depth = rayleigh + haze + gas + _OPEN_SKY
    scattered = rayleigh + haze_scattered + _OPEN_SKY
    turned = haze_scattered
    moments = [scattered]
    for order in range(1, MOMENTS):
        turned = turned * constants.haze_asymmetry
        moments.append(turned + (rayleigh * RAYLEIGH_MOMENT if order == 2 else 0.0))
    if cloud is not None:
        cloud_scattered = cloud * constants.cloud_albedo
        depth = depth + cloud
        moments = [moment + cloud_scattered * CLOUD_ASYMMETRY**order for order, moment in enumerate(moments)]
        scattered = moments[0]
    return four_stream(depth, scattered / depth, [moment / scattered for moment in moments], mu)
