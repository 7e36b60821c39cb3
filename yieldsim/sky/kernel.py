"""The column's equations compiled: hours outside, bands inside, no library call in the inner loops.

Same equations as `column.transmit_plain` with `layer.four_stream`, which the tests hold this to. Loops over bands are
plain arithmetic on rows of scratch memory, so that the compiler can take several bands at once.
"""

from __future__ import annotations

import math

import numpy as np
from numba import njit
from numpy.typing import NDArray

from yieldsim.sky.layer import RESONANCE, STREAMS

Array = NDArray[np.float64]

_M1, _M2 = STREAMS
# Legendre polynomials of order 2 and 3 at the two streams.
_A2, _B2 = (3 * _M1**2 - 1) / 2, (3 * _M2**2 - 1) / 2
_A3, _B3 = (5 * _M1**3 - 3 * _M1) / 2, (5 * _M2**3 - 3 * _M2) / 2
_LOG2E = 1.4426950408889634
_LN2_HIGH, _LN2_LOW = 0.6931471803691238, 1.9082149292705877e-10  # ln 2 in two parts (Cody & Waite 1980)
_LOWEST = -700.0  # exp of less is below the smallest number that keeps all digits
_PI = math.pi
_RESONANCE = RESONANCE

# Offsets of rows in flat scratch memory, one value a band. The distance is a constant, so that the compiler can see
# that rows do not overlap and take several bands at once.
STRIDE = 128
_PATH_WATER, _PATH_MIXED, _HAZE, _BEAM, _DOWN1, _DOWN2, _R11, _R12 = (STRIDE * row for row in range(8))
_R21, _R22, _DEPTH, _OZONE, _TAU, _OMEGA, _C1, _C2, _C3 = (STRIDE * row for row in range(8, 17))
_N_SCRATCH = 17
# Offsets of rows of band constants.
BAND_ROWS = (
    "rayleigh", "ozone", "water", "mixed_gas", "gas_scale", "haze_shape", "haze_albedo", "haze_asymmetry",
    "cloud_albedo",
)  # fmt: skip
_RAYLEIGH, _OZONE_K, _WATER_K, _MIXED_K, _GAS_SCALE, _SHAPE, _HAZE_ALBEDO, _HAZE_G, _CLOUD_ALBEDO = (
    STRIDE * row for row in range(9)
)

# No fast-math flags: with them, code just compiled and code read from the cache gave other last digits, and two runs
# other bytes. The loops are vectorised all the same.


@njit(error_model="numpy", cache=True)
def _exp(x: float) -> float:
    """Return exp(x) for x <= 0 to 2e-16 of its value; 2**k is made by setting the exponent's bits."""
    x = max(x, _LOWEST)
    k = np.floor(x * _LOG2E + 0.5)
    r = (x - k * _LN2_HIGH) - k * _LN2_LOW
    p = 1.0 / 479001600.0
    p = p * r + 1.0 / 39916800.0
    p = p * r + 1.0 / 3628800.0
    p = p * r + 1.0 / 362880.0
    p = p * r + 1.0 / 40320.0
    p = p * r + 1.0 / 5040.0
    p = p * r + 1.0 / 720.0
    p = p * r + 1.0 / 120.0
    p = p * r + 1.0 / 24.0
    p = p * r + 1.0 / 6.0
    p = p * r + 0.5
    p = p * r + 1.0
    p = p * r + 1.0
    bits = (np.int64(k) + np.int64(1023)) << np.int64(52)
    return p * np.int64(bits).view(np.float64)  # type: ignore[no-any-return]


@njit(error_model="numpy", cache=True)
def _log(x: float) -> float:
    """Return ln(x) for normal x > 0, by the exponent's bits and the series of atanh."""
    bits = np.float64(x).view(np.int64)
    exponent = ((bits >> np.int64(52)) & np.int64(2047)) - np.int64(1022)
    fraction = np.int64((bits & np.int64(0x000FFFFFFFFFFFFF)) | np.int64(0x3FE0000000000000)).view(np.float64)
    below = fraction < 0.7071067811865476
    fraction = fraction * 2.0 if below else fraction
    power = np.float64(exponent) - (1.0 if below else 0.0)
    s = (fraction - 1.0) / (fraction + 1.0)
    q = s * s
    p = 1.0 / 21.0
    p = p * q + 1.0 / 19.0
    p = p * q + 1.0 / 17.0
    p = p * q + 1.0 / 15.0
    p = p * q + 1.0 / 13.0
    p = p * q + 1.0 / 11.0
    p = p * q + 1.0 / 9.0
    p = p * q + 1.0 / 7.0
    p = p * q + 1.0 / 5.0
    p = p * q + 1.0 / 3.0
    p = p * q + 1.0
    return power * _LN2_HIGH + (2.0 * s * p + power * _LN2_LOW)


@njit(error_model="numpy", cache=True)
def _tanh_over(k_squared: float, tau: float) -> float:
    """Return tanh(k tau/2)/k."""
    x = math.sqrt(k_squared) * tau * 0.5
    square = x * x
    series = 1.0 - square / 3.0 * (1.0 - square * 0.4 * (1.0 - square * (17.0 / 42.0)))
    faded = _exp(-2.0 * x)
    direct = (1.0 - faded) / ((1.0 + faded) * max(x, 1e-30))
    return (direct if x > 0.02 else series) * tau * 0.5


@njit(error_model="numpy", cache=True)
def _join(scratch: Array, n_band: int, mu: float, first: bool) -> None:
    """Solve the layer whose optics stand in scratch by four streams and add it below what stands there already."""
    l1, l2, l3 = -mu, (3 * mu * mu - 1) / 2, -(5 * mu * mu * mu - 3 * mu) / 2
    into = 1.0 / mu
    square = into * into
    for b in range(n_band):
        tau, omega = scratch[_TAU + b], scratch[_OMEGA + b]
        c1, c2, c3 = scratch[_C1 + b], scratch[_C2 + b], scratch[_C3 + b]
        # Phase function between streams: even and odd orders give the sum and difference of both hemispheres.
        e11, e12, e22 = 1.0 + c2 * _A2 * _A2, 1.0 + c2 * _A2 * _B2, 1.0 + c2 * _B2 * _B2
        o11 = c1 * _M1 * _M1 + c3 * _A3 * _A3
        o12 = c1 * _M1 * _M2 + c3 * _A3 * _B3
        o22 = c1 * _M2 * _M2 + c3 * _B3 * _B3
        w = omega * 0.5
        p11, p12 = (w * e11 - 1.0) / _M1, w * e12 / _M1
        p21, p22 = w * e12 / _M2, (w * e22 - 1.0) / _M2
        m11, m12 = (w * o11 - 1.0) / _M1, w * o12 / _M1
        m21, m22 = w * o12 / _M2, (w * o22 - 1.0) / _M2
        # k^2 as (a-b)(a+b) and as (a+b)(a-b): the same eigenvalues.
        g11, g12 = m11 * p11 + m12 * p21, m11 * p12 + m12 * p22
        g21, g22 = m21 * p11 + m22 * p21, m21 * p12 + m22 * p22
        h11, h12 = p11 * m11 + p12 * m21, p11 * m12 + p12 * m22
        h21, h22 = p21 * m11 + p22 * m21, p21 * m12 + p22 * m22
        half = (g11 + g22) * 0.5
        determinant = g11 * g22 - g12 * g21
        large = half + math.sqrt(max(half * half - determinant, 1e-30))
        small = max(determinant / large, 0.0)
        at_large, at_small = _tanh_over(large, tau), _tanh_over(small, tau)
        slope = (at_large - at_small) / (large - small)
        t11, t12 = at_small + slope * (g11 - small), slope * g12
        t21, t22 = slope * g21, at_small + slope * (g22 - small)
        u11, u12 = at_small + slope * (h11 - small), slope * h12
        u21, u22 = slope * h21, at_small + slope * (h22 - small)
        x11, x12 = p11 * t11 + p12 * t21, p11 * t12 + p12 * t22
        x21, x22 = p21 * t11 + p22 * t21, p21 * t12 + p22 * t22
        y11, y12 = m11 * u11 + m12 * u21, m11 * u12 + m12 * u22
        y21, y22 = m21 * u11 + m22 * u21, m21 * u12 + m22 * u22
        # (1 + X)(1 - X)^-1 = 2 (1 - X)^-1 - 1
        d = 1.0 / ((1.0 - x11) * (1.0 - x22) - x12 * x21)
        even11, even12, even21, even22 = (1.0 - x22) * d, x12 * d, x21 * d, (1.0 - x11) * d
        d = 1.0 / ((1.0 - y11) * (1.0 - y22) - y12 * y21)
        odd11, odd12, odd21, odd22 = (1.0 - y22) * d, y12 * d, y21 * d, (1.0 - y11) * d
        r11, r12, r21, r22 = even11 - odd11, even12 - odd12, even21 - odd21, even22 - odd22
        q11, q12, q21, q22 = even11 + odd11 - 1.0, even12 + odd12, even21 + odd21, even22 + odd22 - 1.0
        # The beam's source and the particular solution that goes with it.
        strength = omega * into / (4.0 * _PI)
        even_a, odd_a = 1.0 + c2 * l2 * _A2, c1 * l1 * _M1 + c3 * l3 * _A3
        even_b, odd_b = 1.0 + c2 * l2 * _B2, c1 * l1 * _M2 + c3 * l3 * _B3
        sum_a, sum_b = 2.0 * strength * even_a / _M1, 2.0 * strength * even_b / _M2
        dif_a, dif_b = 2.0 * strength * odd_a / _M1, 2.0 * strength * odd_b / _M2
        right_a = m11 * sum_a + m12 * sum_b + dif_a * into
        right_b = m21 * sum_a + m22 * sum_b + dif_b * into
        apart_large, apart_small = square - large, square - small
        apart_large = _RESONANCE * square if abs(apart_large) < _RESONANCE * square else apart_large
        apart_small = _RESONANCE * square if abs(apart_small) < _RESONANCE * square else apart_small
        d = 1.0 / (apart_large * apart_small)
        both_a = ((square - g22) * right_a + g12 * right_b) * d
        both_b = (g21 * right_a + (square - g11) * right_b) * d
        gap_a = (p11 * both_a + p12 * both_b + sum_a) * mu
        gap_b = (p21 * both_a + p22 * both_b + sum_b) * mu
        high_a, high_b = (both_a + gap_a) * 0.5, (both_b + gap_b) * 0.5
        low_a, low_b = (both_a - gap_a) * 0.5, (both_b - gap_b) * 0.5
        passed = _exp(-tau * into)
        lit_a, lit_b = high_a * passed, high_b * passed
        v_a = low_a * passed - (q11 * low_a + q12 * low_b) - (r11 * lit_a + r12 * lit_b)
        v_b = low_b * passed - (q21 * low_a + q22 * low_b) - (r21 * lit_a + r22 * lit_b)
        if first:
            scratch[_DOWN1 + b], scratch[_DOWN2 + b], scratch[_BEAM + b] = v_a, v_b, passed
            scratch[_R11 + b], scratch[_R12 + b], scratch[_R21 + b], scratch[_R22 + b] = r11, r12, r21, r22
        else:
            up_a = high_a - (r11 * low_a + r12 * low_b) - (q11 * lit_a + q12 * lit_b)
            up_b = high_b - (r21 * low_a + r22 * low_b) - (q21 * lit_a + q22 * lit_b)
            s11, s12, s21, s22 = scratch[_R11 + b], scratch[_R12 + b], scratch[_R21 + b], scratch[_R22 + b]
            beam = scratch[_BEAM + b]
            z11, z12 = s11 * r11 + s12 * r21, s11 * r12 + s12 * r22
            z21, z22 = s21 * r11 + s22 * r21, s21 * r12 + s22 * r22
            d = 1.0 / ((1.0 - z11) * (1.0 - z22) - z12 * z21)
            n11, n12, n21, n22 = (1.0 - z22) * d, z12 * d, z21 * d, (1.0 - z11) * d
            a_in = scratch[_DOWN1 + b] + beam * (s11 * up_a + s12 * up_b)
            b_in = scratch[_DOWN2 + b] + beam * (s21 * up_a + s22 * up_b)
            a_met, b_met = n11 * a_in + n12 * b_in, n21 * a_in + n22 * b_in
            scratch[_DOWN1 + b] = q11 * a_met + q12 * b_met + beam * v_a
            scratch[_DOWN2 + b] = q21 * a_met + q22 * b_met + beam * v_b
            # R' = R + T N S T
            j11, j12 = n11 * s11 + n12 * s21, n11 * s12 + n12 * s22
            j21, j22 = n21 * s11 + n22 * s21, n21 * s12 + n22 * s22
            i11, i12 = j11 * q11 + j12 * q21, j11 * q12 + j12 * q22
            i21, i22 = j21 * q11 + j22 * q21, j21 * q12 + j22 * q22
            scratch[_R11 + b], scratch[_R12 + b] = r11 + q11 * i11 + q12 * i21, r12 + q11 * i12 + q12 * i22
            scratch[_R21 + b], scratch[_R22 + b] = r21 + q21 * i11 + q22 * i21, r22 + q21 * i12 + q22 * i22
            scratch[_BEAM + b] = beam * passed


@njit(error_model="numpy", cache=True)
def _mix(
    scratch: Array, n_band: int, shares: Array, water_path: float, air_path: float, slant: float, pressure_ratio: float,
    cloud: float, cloud_asymmetry: float, rayleigh_moment: float, open_sky: float, bands: Array,
) -> None:  # fmt: skip
    """Put one layer's optical depth, albedo and moments, cut by delta-M, into scratch; lengthen the gas paths."""
    cg = cloud_asymmetry
    air_share, haze_share = shares[0], shares[2]
    for b in range(n_band):
        y = bands[_WATER_K + b] * water_path
        wet = 0.2385 * y * _exp(-0.45 * _log(1.0 + 20.07 * y))
        y = bands[_MIXED_K + b] * air_path
        even = 1.41 * y * _exp(-0.45 * _log(1.0 + 118.3 * y))
        gas = (wet - scratch[_PATH_WATER + b] + even - scratch[_PATH_MIXED + b]) * bands[_GAS_SCALE + b] / slant
        scratch[_PATH_WATER + b], scratch[_PATH_MIXED + b] = wet, even
        air = bands[_RAYLEIGH + b] * pressure_ratio * air_share
        haze = scratch[_HAZE + b] * haze_share
        clear_depth = air + haze + gas + open_sky
        depth = clear_depth + cloud
        scratch[_DEPTH + b] += depth - open_sky
        hs, cs = haze * bands[_HAZE_ALBEDO + b], cloud * bands[_CLOUD_ALBEDO + b]
        scattered = air + hs + open_sky + cs
        hg = bands[_HAZE_G + b]
        n = 1.0 / scattered
        x1 = (hs * hg + cs * cg) * n
        x2 = (hs * hg * hg + cs * cg * cg + air * rayleigh_moment) * n
        x3 = (hs * hg * hg * hg + cs * cg * cg * cg) * n
        f = (hs * hg * hg * hg * hg + cs * cg * cg * cg * cg) * n
        albedo = scattered / depth
        kept = 1.0 - albedo * f
        scratch[_TAU + b] = kept * depth
        scratch[_OMEGA + b] = (1.0 - f) * albedo / kept
        n = 1.0 / (1.0 - f)
        scratch[_C1 + b] = 3.0 * (x1 - f) * n
        scratch[_C2 + b], scratch[_C3 + b] = 5.0 * (x2 - f) * n, 7.0 * (x3 - f) * n


@njit(error_model="numpy", cache=True)
def transmit(
    hours: Array, albedo: Array, slants: Array, shares: Array, bands: Array, n_band: int,
    cloud_asymmetry: float, rayleigh_moment: float, open_sky: float, beam: Array, total: Array,
) -> None:  # fmt: skip
    """Fill the transmittances of each hour.

    Parameters
    ----------
    hours : (n, 7) array, air mass, ozone air mass, pressure ratio, water [cm], ozone [atm-cm], AOD at 500 nm,
        Angstrom exponent
    albedo : (n, n_band) or (n, 1) array [1]
    slants : (n, 4) array [1], slant of gas paths above, in and below the cloud, and cloud depth
    shares : (3, 3) array [1], per layer of air, water and haze
    bands : (9 x STRIDE,) array, the `BAND_ROWS` one after the other, each padded to STRIDE
    n_band : int, at most STRIDE
    beam, total : (n, n_band) arrays to fill [1]
    """
    scratch = np.zeros(_N_SCRATCH * STRIDE)
    for h in range(hours.shape[0]):
        air_mass, ozone_mass, pressure_ratio = hours[h, 0], hours[h, 1], hours[h, 2]
        water, ozone, aod, exponent = hours[h, 3], hours[h, 4], hours[h, 5], hours[h, 6]
        cloud = slants[h, 3]
        for b in range(n_band):
            # _exp takes no positive argument: short waves by the reciprocal.
            x = exponent * bands[_SHAPE + b]
            scratch[_HAZE + b] = aod * (_exp(-abs(x)) if x >= 0 else 1.0 / _exp(-abs(x)))
            scratch[_OZONE + b] = _exp(-bands[_GAS_SCALE + b] * bands[_OZONE_K + b] * ozone * ozone_mass)
            scratch[_PATH_WATER + b] = 0.0
            scratch[_PATH_MIXED + b] = 0.0
            scratch[_DEPTH + b] = 0.0
        water_path, air_path = 0.0, 0.0
        mu = 1.0 / air_mass
        for i in range(3):
            slant = slants[h, i]
            water_path += water * shares[i, 1] * slant
            air_path += pressure_ratio * shares[i, 0] * slant
            _mix(
                scratch, n_band, shares[i], water_path, air_path, slant, pressure_ratio,
                cloud if i == 1 else 0.0, cloud_asymmetry, rayleigh_moment, open_sky, bands,
            )  # fmt: skip
            _join(scratch, n_band, mu, i == 0)
        wide = albedo.shape[1] > 1
        for b in range(n_band):
            back = _M1 * (scratch[_R11 + b] + scratch[_R12 + b]) + _M2 * (scratch[_R21 + b] + scratch[_R22 + b])
            down = scratch[_BEAM + b] + _PI * (_M1 * scratch[_DOWN1 + b] + _M2 * scratch[_DOWN2 + b])
            ground = albedo[h, b] if wide else albedo[h, 0]
            straight = _exp(-scratch[_DEPTH + b] * air_mass) * scratch[_OZONE + b]
            beam[h, b] = straight
            total[h, b] = max(down / (1.0 - ground * back) * scratch[_OZONE + b], straight)
