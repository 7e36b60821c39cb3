"""The column of one hour, compiled: layers solved and joined for all bands, no library call in the inner loops.

Same equations as `column.transmit_plain` with `layer.four_stream`, which the tests hold this to. Rows of scratch memory
hold one value a band; each loop over bands is plain arithmetic on such rows, so that the compiler takes four bands at
once. The same memory holds the hour's values and all constants: functions pass one array on, because counting who holds
each of several arrays took a sixth of the time. Intensities are scaled by the roots of their streams' slants, which
makes every matrix of a layer symmetric.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from yieldsim.compiled import compiled, fma, inner
from yieldsim.sky.layer import RESONANCE, STREAMS

Array = NDArray[np.float64]

#: What workspaces begin with (N_CONSTANT x STRIDE,), and the depths of vapour and then of mixed gas at the nodes' paths
#: (nodes x STRIDE,).
Model = tuple[Array, Array]

_M1, _M2 = STREAMS
_S1, _S2 = math.sqrt(_M1), math.sqrt(_M2)
# Division is slow: reciprocals of the streams' slants and of their roots.
_I1, _I2, _I12, _IS1, _IS2 = 1 / _M1, 1 / _M2, 1 / (_S1 * _S2), 1 / _S1, 1 / _S2
# Legendre polynomials of order 2 and 3 at the two streams, and products of orders 1 to 3.
_A2, _B2 = (3 * _M1**2 - 1) / 2, (3 * _M2**2 - 1) / 2
_A3, _B3 = (5 * _M1**3 - 3 * _M1) / 2, (5 * _M2**3 - 3 * _M2) / 2
_AA1, _AB1, _BB1 = _M1 * _M1, _M1 * _M2, _M2 * _M2
_AA2, _AB2, _BB2 = _A2 * _A2, _A2 * _B2, _B2 * _B2
_AA3, _AB3, _BB3 = _A3 * _A3, _A3 * _B3, _B3 * _B3
_LOG2E = 1.4426950408889634
_LN2_HIGH, _LN2_LOW = 0.6931471803691238, 1.9082149292705877e-10  # ln 2 in two parts (Cody & Waite 1980)
_LOWEST = -200.0  # exp of less counts for nothing, and products of three stay clear of slow subnormal numbers
_ROUNDER = 6755399441055744.0  # 1.5 x 2**52: added to a number it leaves the nearest integer in the lowest bits
_PI = math.pi
_RESONANCE = RESONANCE
_SERIES = 0.02  # below it tanh(x)/x by its series, whose next term is 5e-16

# Distance of rows in flat scratch memory. It is a constant, so that the compiler can see that rows do not overlap.
STRIDE = 128
LANES = 4  # loops over bands run to a multiple of it; bands beyond the last are copies of it
(
    SHAPE, _HAZE, OZONE, GAS, _TAU, _W0, _W1, _W2, _W3, _P11, _P12, _P22, _N11, _N12, _N22,
    _LARGE, _SMALL, _ROOT_L, _ROOT_S, _FADE_L, _FADE_S, _PASSED, _R11, _R12, _R22, _Q11, _Q12, _Q22, _DOWN1, _DOWN2,
    _UP1, _UP2, _AT_SMALL, _RISE, _APART,
) = (STRIDE * row for row in range(35))  # fmt: skip
# What the layers joined so far do to light; the same with the top layer alone; what arrives, and rows for others.
_SUM_PATH, _SUM_DEPTH, _BEAM, _D1, _D2, _S11, _S12, _S22 = (STRIDE * row for row in range(36, 44))
_K1, _K2, _K3, _K4, _K5, _K6, _K7, _K8 = (STRIDE * row for row in range(44, 52))
GROUND, STRAIGHT, TOTAL, DEPTH, SLOPE, LOG_TOP, _WET, _EVEN, HOUR = (STRIDE * row for row in range(52, 61))
# Rows of constants: of the bands, light above the air at the mean distance (0 beyond the last band), and FIXED: shares
# of air, water and haze by layer, the column's other constants, factors in the curves of growth.
BAND_ROWS = (
    "rayleigh", "ozone", "gas_scale", "haze_shape", "haze_albedo", "haze_asymmetry", "cloud_albedo", "water",
    "mixed_gas",
)  # fmt: skip
(
    RAYLEIGH, _OZONE_K, GAS_SCALE, _HAZE_SHAPE, _HAZE_ALBEDO, _HAZE_G, _CLOUD_ALBEDO, _WATER_K, _MIXED_K, TOP, _FIXED,
) = (STRIDE * row for row in range(61, 72))  # fmt: skip
N_CONSTANT, N_SCRATCH = 11, 72
# Curves of growth are tabled over the logarithm of the path, alike for all bands, so that an hour's six weights serve
# every band: 6-point Lagrange, 8e-11 of the depth off at most.
NODE_STEP = 0.05
WATER_NODES = math.log(0.003) + NODE_STEP * np.arange(250)  # ln cm, up to 800 cm
MIXED_NODES = math.log(0.05) + NODE_STEP * np.arange(146)  # up to 74
_FIRST_WATER, _FIRST_MIXED = float(WATER_NODES[0]), float(MIXED_NODES[0])
_N_WATER, _N_MIXED = len(WATER_NODES), len(MIXED_NODES)
# Columns of an hour, in scratch memory from HOUR on; places of the column's constants there.
COLUMNS = 8
AIR_MASS, OZONE_MASS, PRESSURE, WATER, OZONE_CM, AOD, EXPONENT, CLOUD = range(HOUR, HOUR + COLUMNS)
_AIR_SHARE, _WATER_SHARE, _HAZE_SHARE = _FIXED, _FIXED + 3, _FIXED + 6
_CLOUD_G, _RAYLEIGH_MOMENT, _OPEN_SKY, _DIFFUSIVITY, _CLOUD_PATH, _WATER_LAW = range(_FIXED + 9, _FIXED + 15)
_MIXED_LAW = _WATER_LAW + 2


@compiled
def exp(x: float) -> float:
    """Return exp(x) for -200 <= x <= 700 to 1e-13 of its value; 2**k is made by setting the exponent's bits."""
    x = max(x, _LOWEST)
    shifted = fma(x, _LOG2E, _ROUNDER)
    k = shifted - _ROUNDER
    r = fma(-k, _LN2_LOW, fma(-k, _LN2_HIGH, x))
    r2 = r * r
    r4 = r2 * r2
    # exp(r) = 1 + r + r**2 q(r), q through Chebyshev points of +-ln(2)/2.
    low = fma(r2, fma(r, 0.008333333344064293, 0.04166666678634886), fma(r, 0.16666666666662833, 0.4999999999995507))
    high = fma(
        r2, fma(r, 2.761750255097688e-06, 2.4867885070502583e-05), fma(r, 0.0001984122477939008, 0.0013888839088043719)
    )
    power = (np.float64(shifted).view(np.int64) + np.int64(1023)) << np.int64(52)
    return fma(r2, fma(r4, high, low), 1.0 + r) * np.int64(power).view(np.float64)


@inner
def _dot(a: float, b: float, c: float, d: float) -> float:
    """Return a b + c d."""
    return float(fma(a, b, c * d))


@inner
def start(s: Array, n: int, known_exponent: float) -> None:
    """Begin a column: haze and the depth of ozone along the beam; nothing above yet."""
    exponent, aod = s[EXPONENT], s[AOD]
    ozone = s[OZONE_CM] * s[OZONE_MASS]
    if exponent != known_exponent:
        for b in range(n):
            s[SHAPE + b] = exp(-exponent * s[_HAZE_SHAPE + b])
    for b in range(n):
        s[_HAZE + b] = aod * s[SHAPE + b]
        s[OZONE + b] = s[GAS_SCALE + b] * s[_OZONE_K + b] * ozone
        s[_SUM_PATH + b] = 0.0
        s[_SUM_DEPTH + b] = 0.0


@inner
def _grown(s: Array, n: int, node: int, x: float, table: Array, depth: int) -> None:
    """Set a row of depths from a table, x of a step beyond a node."""
    a, b, c, d, e, f = x + 2, x + 1, x, x - 1, x - 2, x - 3
    v0, v1 = -b * c * d * e * f / 120, a * c * d * e * f / 24
    v2, v3 = -a * b * d * e * f / 12, a * b * c * e * f / 12
    v4, v5 = -a * b * c * d * f / 24, a * b * c * d * e / 120
    near = table[(node - 2) * STRIDE : (node + 4) * STRIDE]
    row = s[depth : depth + STRIDE]
    for i in range(n):
        low = _dot(v0, near[i], v1, near[STRIDE + i])
        middle = _dot(v2, near[2 * STRIDE + i], v3, near[3 * STRIDE + i])
        high = _dot(v4, near[4 * STRIDE + i], v5, near[5 * STRIDE + i])
        row[i] = low + middle + high


@inner
def gas(s: Array, n: int, curves: Array, water_path: float, air_path: float, slant: float) -> None:
    """Set the vertical depth of gas in the next layer from its paths down to the layer's foot.

    Beyond the tables depths are those of the curves of growth themselves.
    """
    place = (math.log(water_path) - _FIRST_WATER) / NODE_STEP if water_path > 0 else -1.0
    node = math.floor(place)
    if 2 <= node <= _N_WATER - 4:
        _grown(s, n, node, place - node, curves, _WET)
    else:
        for b in range(n):
            y = s[_WATER_K + b] * water_path
            s[_WET + b] = s[_WATER_LAW] * y / (1.0 + s[_WATER_LAW + 1] * y) ** 0.45
    place = (math.log(air_path) - _FIRST_MIXED) / NODE_STEP if air_path > 0 else -1.0
    node = math.floor(place)
    if 2 <= node <= _N_MIXED - 4:
        _grown(s, n, node + _N_WATER, place - node, curves, _EVEN)
    else:
        for b in range(n):
            y = s[_MIXED_K + b] * air_path
            s[_EVEN + b] = s[_MIXED_LAW] * y / (1.0 + s[_MIXED_LAW + 1] * y) ** 0.45
    inverse = 1.0 / slant
    for b in range(n):
        path = s[_WET + b] + s[_EVEN + b]
        s[GAS + b] = (path - s[_SUM_PATH + b]) * (s[GAS_SCALE + b] * inverse)
        s[_SUM_PATH + b] = path


@inner
def _mix(s: Array, n: int, air_depth: float, haze_share: float, cloud: float) -> None:
    """Mix a layer, cut its phase function by delta-M: depth, and half the albedo times each moment."""
    cg, moment, open_sky = s[_CLOUD_G], s[_RAYLEIGH_MOMENT], s[_OPEN_SKY]
    cg2, cg3, cg4 = cg * cg, cg * cg * cg, cg * cg * cg * cg
    for b in range(n):
        air, haze = s[RAYLEIGH + b] * air_depth, s[_HAZE + b] * haze_share
        depth = air + haze + s[GAS + b] + cloud
        s[_SUM_DEPTH + b] += depth
        h, c, g = haze * s[_HAZE_ALBEDO + b], cloud * s[_CLOUD_ALBEDO + b], s[_HAZE_G + b]
        h1 = h * g
        h2 = h1 * g
        h3 = h2 * g
        peak = _dot(h3, g, c, cg4)
        tau = depth + open_sky - peak
        inverse = 0.5 / tau
        s[_TAU + b] = tau
        s[_W0 + b] = (air + h + open_sky + c - peak) * inverse
        s[_W1 + b] = 3.0 * (h1 + c * cg - peak) * inverse
        s[_W2 + b] = 5.0 * (h2 + c * cg2 + air * moment - peak) * inverse
        s[_W3 + b] = 7.0 * (h3 + c * cg3 - peak) * inverse


@inner
def _modes(s: Array, n: int, into: float) -> None:
    """Set the layer's matrices for sum (P) and difference (N) of both hemispheres, the roots of N P, what fades."""
    for b in range(n):
        w0, w1, w2, w3 = s[_W0 + b], s[_W1 + b], s[_W2 + b], s[_W3 + b]
        p11, p12, p22 = (w0 + w2 * _AA2 - 1.0) * _I1, (w0 + w2 * _AB2) * _I12, (w0 + w2 * _BB2 - 1.0) * _I2
        n11, n22 = (w1 * _AA1 + w3 * _AA3 - 1.0) * _I1, (w1 * _BB1 + w3 * _BB3 - 1.0) * _I2
        n12 = (w1 * _AB1 + w3 * _AB3) * _I12
        half = (_dot(n11, p11, n12, p12) + _dot(n12, p12, n22, p22)) * 0.5
        determinant = (n11 * n22 - n12 * n12) * (p11 * p22 - p12 * p12)
        large = half + math.sqrt(max(half * half - determinant, 1e-30))
        small = max(determinant / large, 0.0)
        s[_LARGE + b], s[_SMALL + b] = large, small
        s[_ROOT_L + b], s[_ROOT_S + b] = math.sqrt(large), math.sqrt(small)
        s[_P11 + b], s[_P12 + b], s[_P22 + b] = p11, p12, p22
        s[_N11 + b], s[_N12 + b], s[_N22 + b] = n11, n12, n22
    # Short loops on purpose: a long one leaves the processor nothing to do while it waits for a division.
    for b in range(n):
        s[_FADE_L + b] = exp(-s[_ROOT_L + b] * s[_TAU + b])
    for b in range(n):
        s[_FADE_S + b] = exp(-s[_ROOT_S + b] * s[_TAU + b])
    for b in range(n):
        s[_PASSED + b] = exp(-into * s[_TAU + b])


@inner
def _solve(s: Array, n: int, mu: float) -> None:
    """Set what the layer throws back (R) and lets through (Q) of diffuse light, and makes of the beam."""
    into, square = 1.0 / mu, 1.0 / (mu * mu)
    l1, l2, l3 = -mu, (3 * mu * mu - 1) / 2, -(5 * mu * mu * mu - 3 * mu) / 2
    ka, kb, ea, eb = into / _PI * _IS1, into / _PI * _IS2, l2 * _A2, l2 * _B2
    oa1, oa3, ob1, ob3 = l1 * _M1, l3 * _A3, l1 * _M2, l3 * _B3
    least = _RESONANCE * square
    for b in range(n):
        large, small, root_l, root_s = s[_LARGE + b], s[_SMALL + b], s[_ROOT_L + b], s[_ROOT_S + b]
        fade_l, fade_s, half = s[_FADE_L + b], s[_FADE_S + b], 0.5 * s[_TAU + b]
        # tanh(k tau/2)/k at both roots; divisions are shared throughout, since they are slow.
        below_l, below_s, between = (1.0 + fade_l) * root_l, (1.0 + fade_s) * max(root_s, 1e-30), large - small
        shared = 1.0 / (below_l * below_s * between)
        inverse = shared * between
        x = root_s * half
        x = x * x
        series = (1.0 - x * (1 / 3) * (1.0 - x * 0.4 * (1.0 - x * (17.0 / 42.0)))) * half
        at_large = (1.0 - fade_l) * below_s * inverse
        at_small = (1.0 - fade_s) * below_l * inverse if x > _SERIES * _SERIES else series
        s[_AT_SMALL + b], s[_RISE + b] = at_small, (at_large - at_small) * (shared * below_l * below_s)
    for b in range(n):
        p11, p12, p22, n11, n12, n22 = s[_P11 + b], s[_P12 + b], s[_P22 + b], s[_N11 + b], s[_N12 + b], s[_N22 + b]
        large, small = s[_LARGE + b], s[_SMALL + b]
        at_small, slope = s[_AT_SMALL + b], s[_RISE + b]
        g11, g12, g21, g22 = (
            _dot(n11, p11, n12, p12),
            _dot(n11, p12, n12, p22),
            _dot(n12, p11, n22, p12),
            _dot(n12, p12, n22, p22),
        )
        t11, t12, t21, t22 = (
            at_small + slope * (g11 - small),
            slope * g12,
            slope * g21,
            at_small + slope * (g22 - small),
        )
        x11, x12, x22 = 1.0 - _dot(p11, t11, p12, t21), _dot(p11, t12, p12, t22), 1.0 - _dot(p12, t12, p22, t22)
        y11, y12, y22 = 1.0 - _dot(n11, t11, n12, t12), _dot(n11, t21, n12, t22), 1.0 - _dot(n12, t21, n22, t22)
        even, odd = x11 * x22 - x12 * x12, y11 * y22 - y12 * y12
        apart_l, apart_s = square - large, square - small
        apart_l = least if abs(apart_l) < least else apart_l
        apart_s = least if abs(apart_s) < least else apart_s
        apart, both = apart_l * apart_s, even * odd
        shared = 1.0 / (both * apart)
        apart, inverse = shared * both, shared * apart
        even, odd = inverse * odd, inverse * even
        # (1 + X)(1 - X)^-1 = 2 (1 - X)^-1 - 1
        e11, e12, e22, o11, o12, o22 = x22 * even, x12 * even, x11 * even, y22 * odd, y12 * odd, y11 * odd
        r11, r12, r22 = e11 - o11, e12 - o12, e22 - o22
        q11, q12, q22 = e11 + o11 - 1.0, e12 + o12, e22 + o22 - 1.0
        s[_R11 + b], s[_R12 + b], s[_R22 + b] = r11, r12, r22
        s[_Q11 + b], s[_Q12 + b], s[_Q22 + b] = q11, q12, q22
        s[_APART + b] = apart
    # The beam's source and the particular solution that goes with it.
    for b in range(n):
        p11, p12, p22, n11, n12, n22 = s[_P11 + b], s[_P12 + b], s[_P22 + b], s[_N11 + b], s[_N12 + b], s[_N22 + b]
        r11, r12, r22, q11, q12, q22 = s[_R11 + b], s[_R12 + b], s[_R22 + b], s[_Q11 + b], s[_Q12 + b], s[_Q22 + b]
        g11, g12, g21, g22 = (
            _dot(n11, p11, n12, p12),
            _dot(n11, p12, n12, p22),
            _dot(n12, p11, n22, p12),
            _dot(n12, p12, n22, p22),
        )
        apart = s[_APART + b]
        w0, w1, w2, w3 = s[_W0 + b], s[_W1 + b], s[_W2 + b], s[_W3 + b]
        sum_a, sum_b = ka * (w0 + w2 * ea), kb * (w0 + w2 * eb)
        right_a = _dot(n11, sum_a, n12, sum_b) + ka * _dot(w1, oa1, w3, oa3) * into
        right_b = _dot(n12, sum_a, n22, sum_b) + kb * _dot(w1, ob1, w3, ob3) * into
        both_a = ((square - g22) * right_a + g12 * right_b) * apart
        both_b = (g21 * right_a + (square - g11) * right_b) * apart
        gap_a, gap_b = (_dot(p11, both_a, p12, both_b) + sum_a) * mu, (_dot(p12, both_a, p22, both_b) + sum_b) * mu
        high_a, high_b, low_a, low_b = both_a + gap_a, both_b + gap_b, both_a - gap_a, both_b - gap_b
        high_a, high_b, low_a, low_b = high_a * 0.5, high_b * 0.5, low_a * 0.5, low_b * 0.5
        passed = s[_PASSED + b]
        lit_a, lit_b = high_a * passed, high_b * passed
        s[_DOWN1 + b] = low_a * passed - _dot(q11, low_a, q12, low_b) - _dot(r11, lit_a, r12, lit_b)
        s[_DOWN2 + b] = low_b * passed - _dot(q12, low_a, q22, low_b) - _dot(r12, lit_a, r22, lit_b)
        s[_UP1 + b] = high_a - _dot(r11, low_a, r12, low_b) - _dot(q11, lit_a, q12, lit_b)
        s[_UP2 + b] = high_b - _dot(r12, low_a, r22, low_b) - _dot(q12, lit_a, q22, lit_b)


@inner
def _add(s: Array, n: int) -> None:
    """Add the layer below those joined so far."""
    for b in range(n):
        r11, r12, r22, q11, q12, q22 = s[_R11 + b], s[_R12 + b], s[_R22 + b], s[_Q11 + b], s[_Q12 + b], s[_Q22 + b]
        s11, s12, s22, beam = s[_S11 + b], s[_S12 + b], s[_S22 + b], s[_BEAM + b]
        up_a, up_b = s[_UP1 + b], s[_UP2 + b]
        z11, z12, z21, z22 = (
            _dot(s11, r11, s12, r12),
            _dot(s11, r12, s12, r22),
            _dot(s12, r11, s22, r12),
            _dot(s12, r12, s22, r22),
        )
        d = 1.0 / ((1.0 - z11) * (1.0 - z22) - z12 * z21)
        n11, n12, n21, n22 = (1.0 - z22) * d, z12 * d, z21 * d, (1.0 - z11) * d
        in_a = s[_D1 + b] + beam * _dot(s11, up_a, s12, up_b)
        in_b = s[_D2 + b] + beam * _dot(s12, up_a, s22, up_b)
        met_a, met_b = _dot(n11, in_a, n12, in_b), _dot(n21, in_a, n22, in_b)
        s[_D1 + b] = _dot(q11, met_a, q12, met_b) + beam * s[_DOWN1 + b]
        s[_D2 + b] = _dot(q12, met_a, q22, met_b) + beam * s[_DOWN2 + b]
        # R' = R + Q (1 - S R)^-1 S Q
        j11, j12, j22 = _dot(n11, s11, n12, s12), _dot(n11, s12, n12, s22), _dot(n21, s12, n22, s22)
        i11, i12, i21, i22 = (
            _dot(j11, q11, j12, q12),
            _dot(j11, q12, j12, q22),
            _dot(j12, q11, j22, q12),
            _dot(j12, q12, j22, q22),
        )
        s[_S11 + b], s[_S12 + b] = r11 + q11 * i11 + q12 * i21, r12 + q11 * i12 + q12 * i22
        s[_S22 + b] = r22 + q12 * i12 + q22 * i22
        s[_BEAM + b] = beam * s[_PASSED + b]


@inner
def on_ground(s: Array, n: int) -> None:
    """Set the transmittance of all light and of the beam, the ground's throw to and fro in it."""
    air_mass = s[AIR_MASS]
    for b in range(n):
        s[STRAIGHT + b] = exp(-(s[_SUM_DEPTH + b] * air_mass + s[OZONE + b]))
    for b in range(n):
        back = _M1 * s[_S11 + b] + 2.0 * _S1 * _S2 * s[_S12 + b] + _M2 * s[_S22 + b]
        down = s[_BEAM + b] + _PI * (_S1 * s[_D1 + b] + _S2 * s[_D2 + b])
        s[TOTAL + b] = max(down * exp(-s[OZONE + b]) / (1.0 - s[GROUND + b] * back), s[STRAIGHT + b])


@inner
def _layer(
    s: Array, n: int, curves: Array, paths: tuple[float, float], slant: float, air: float, haze_share: float,
    cloud: float,
) -> None:  # fmt: skip
    """Set what one layer does to light, from the paths of vapour and of other gas down to its foot."""
    gas(s, n, curves, paths[0], paths[1], slant)
    _mix(s, n, air, haze_share, cloud)
    _modes(s, n, s[AIR_MASS])
    _solve(s, n, 1.0 / s[AIR_MASS])


@inner
def top(s: Array, n: int, curves: Array) -> None:
    """Set and keep what the top layer does to light; no cloud lies in it."""
    air_mass = s[AIR_MASS]
    air = s[PRESSURE] * s[_AIR_SHARE]
    paths = (s[WATER] * s[_WATER_SHARE] * air_mass, air * air_mass)
    _layer(s, n, curves, paths, air_mass, air, s[_HAZE_SHARE], 0.0)
    for b in range(n):
        s[_K1 + b], s[_K2 + b], s[_K3 + b] = s[_SUM_PATH + b], s[_SUM_DEPTH + b], s[_PASSED + b]
        s[_K4 + b], s[_K5 + b] = s[_DOWN1 + b], s[_DOWN2 + b]
        s[_K6 + b], s[_K7 + b], s[_K8 + b] = s[_R11 + b], s[_R12 + b], s[_R22 + b]


@inner
def below(s: Array, n: int, curves: Array, cloud: float) -> None:
    """Join the layers below to the top one as it was kept, a cloud in the first of them."""
    for b in range(n):
        s[_SUM_PATH + b], s[_SUM_DEPTH + b], s[_BEAM + b], s[_D1 + b] = s[_K1 + b], s[_K2 + b], s[_K3 + b], s[_K4 + b]
        s[_D2 + b], s[_S11 + b], s[_S12 + b], s[_S22 + b] = s[_K5 + b], s[_K6 + b], s[_K7 + b], s[_K8 + b]
    air_mass = s[AIR_MASS]
    # `column._slants`
    straight = math.exp(-(1.0 - s[_CLOUD_G] * s[_CLOUD_G]) * cloud * air_mass)
    turned = (1.0 - straight) * s[_DIFFUSIVITY]
    water_path = s[WATER] * s[_WATER_SHARE] * air_mass
    air_path = s[PRESSURE] * s[_AIR_SHARE] * air_mass
    for i in range(1, 3):
        slant = straight * air_mass + (turned * s[_CLOUD_PATH] if i == 1 else turned)
        air = s[PRESSURE] * s[_AIR_SHARE + i]
        water_path += s[WATER] * s[_WATER_SHARE + i] * slant
        air_path += air * slant
        drops = cloud if i == 1 else 0.0
        _layer(s, n, curves, (water_path, air_path), slant, air, s[_HAZE_SHARE + i], drops)
        _add(s, n)


@inner
def top_of_few(s: Array, few: Array, chosen: NDArray[np.intp]) -> None:
    """Copy the top layer and what the air holds from all bands to a few."""
    for i, b in enumerate(chosen):
        few[SHAPE + i], few[_HAZE + i], few[OZONE + i] = s[SHAPE + b], s[_HAZE + b], s[OZONE + b]
        few[_K1 + i], few[_K2 + i], few[_K3 + i], few[_K4 + i] = s[_K1 + b], s[_K2 + b], s[_K3 + b], s[_K4 + b]
        few[_K5 + i], few[_K6 + i], few[_K7 + i], few[_K8 + i] = s[_K5 + b], s[_K6 + b], s[_K7 + b], s[_K8 + b]
        few[TOTAL + i] = s[TOTAL + b]


@inner
def workspace(model: Model) -> Array:
    """Return scratch memory with a model's constants in it."""
    s, constants = np.zeros(N_SCRATCH * STRIDE), model[0]
    for i in range(len(constants)):
        s[RAYLEIGH + i] = constants[i]
    return s


@inner
def take(s: Array, hours: Array, h: int) -> None:
    """Put an hour's values into scratch memory."""
    for i in range(COLUMNS):
        s[HOUR + i] = hours[h, i]


@inner
def take_ground(s: Array, n: int, albedo: Array, h: int) -> None:
    """Put the albedo of an hour's ground into scratch memory."""
    n_given = albedo.shape[1]
    for b in range(n):
        s[GROUND + b] = albedo[h, min(b, n_given - 1)]


@inner
def summed(s: Array, row: int, n: int) -> float:
    """Return the light below of a row of transmittances, four at a time."""
    a, b, c, d, passed = 0.0, 0.0, 0.0, 0.0, s[row : row + STRIDE]
    for i in range(0, n, 4):
        a += passed[i] * s[TOP + i]
        b += passed[i + 1] * s[TOP + i + 1]
        c += passed[i + 2] * s[TOP + i + 2]
        d += passed[i + 3] * s[TOP + i + 3]
    return (a + b) + (c + d)
