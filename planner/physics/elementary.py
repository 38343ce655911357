"""Logarithm, exponential and the like as formulas, for numbers and for lanes.

A call into the mathematics library stops a loop from being vectorised, and a path field takes
three of these functions for each of tens of millions of cells. They are built from multiplications
and from the bits of a number (IEEE 754-2019, table 3.5: a float64 has 52 bits of fraction and an
exponent bias of 1023, a float32 23 and 127). Tests hold them to the library's values: within 4e-11
in relative terms for float64; single lanes within 9e-7 for the logarithm of 1e-6 to 1e9, in
relative terms 1e-6 for the exponential of -80 to 80.
"""

import math
from typing import Any

from llvmlite import ir
from numba import types
from numba.extending import intrinsic, overload

from planner.physics._jit import inlined
from planner.physics._lanes import SINGLE, bits, of_bits, single, where, whole

_LN_2 = 0.6931471805599453
_LOG2_E = 1.4426950408889634
_LOG10_E = 0.4342944819032518
_TAN_PI_8 = 0.41421356237309503  # sqrt(2) - 1
_TAN_3_PI_8 = 2.414213562373095  # sqrt(2) + 1
_FRACTION_BITS, _SINGLE_FRACTION_BITS = 52, 23
_BIAS, _SINGLE_BIAS = 1023, 127
_BITS_OF_HALF_ROOT_2 = 0x3FE6A09E667F3BCD  # sqrt(1/2): mantissas are taken from there to sqrt(2)
_SINGLE_BITS_OF_HALF_ROOT_2 = 0x3F3504F3


@intrinsic
def _bits_of(typing_context: Any, value: Any) -> Any:
    """The bits of a float64 as an int64."""

    def generate(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
        return builder.bitcast(arguments[0], ir.IntType(64))

    return types.int64(types.float64), generate


@intrinsic
def _float_of(typing_context: Any, bits: Any) -> Any:
    """The float64 that has these bits."""

    def generate(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
        return builder.bitcast(arguments[0], ir.DoubleType())

    return types.float64(types.int64), generate


_number_bits: Any = _bits_of  # called with the value alone: numba supplies the context
_from_bits: Any = _float_of


@inlined
def log10(x: Any) -> Any:
    """Decimal logarithm of a normal number above 0; NaN and infinity give themselves.

    Zero, negative and denormal numbers give no meaningful value.

    ln m = 2 artanh((m - 1) / (m + 1)), as a series in the mantissa m, plus the exponent's share.
    """
    return _log10(x)


def _log10(x: Any) -> Any:
    raise NotImplementedError  # in compiled code only


@overload(_log10, strict=False)
def _log10_of_a_kind(x: Any) -> Any:
    if x is SINGLE:
        return lambda x: _log10_of_lanes(x)
    return lambda x: _log10_of_number(x)


@inlined
def _log10_of_number(x: float) -> float:
    number_bits = _number_bits(x)
    exponent = (number_bits - _BITS_OF_HALF_ROOT_2) >> _FRACTION_BITS
    mantissa = _from_bits(number_bits - (exponent << _FRACTION_BITS))
    s = (mantissa - 1.0) / (mantissa + 1.0)
    z = s * s
    series = 1.0 / 15.0
    series = series * z + 1.0 / 13.0
    series = series * z + 1.0 / 11.0
    series = series * z + 1.0 / 9.0
    series = series * z + 1.0 / 7.0
    series = series * z + 1.0 / 5.0
    series = series * z + 1.0 / 3.0
    series = series * z + 1.0
    logarithm = (2.0 * s * series + exponent * _LN_2) * _LOG10_E
    return logarithm if x < math.inf else x


@inlined
def _log10_of_lanes(x: Any) -> Any:
    lane_bits = bits(x)
    exponent = (lane_bits - _SINGLE_BITS_OF_HALF_ROOT_2) >> _SINGLE_FRACTION_BITS
    mantissa = of_bits(lane_bits - (exponent << _SINGLE_FRACTION_BITS))
    s = (mantissa - 1.0) / (mantissa + 1.0)
    z = s * s
    series = z * (1.0 / 9.0) + 1.0 / 7.0
    series = series * z + 1.0 / 5.0
    series = series * z + 1.0 / 3.0
    series = series * z + 1.0
    logarithm = s * series * (2.0 * _LOG10_E) + single(exponent) * (_LN_2 * _LOG10_E)
    return where(x < math.inf, logarithm, x)


@inlined
def exp(x: Any) -> Any:
    """e to the power x, for -700 <= x <= 700 (lanes: -80 to 80); outside as at the nearer bound.

    NaN gives NaN. A power of two times the exponential series within half a step.
    """
    return _exp(x)


def _exp(x: Any) -> Any:
    raise NotImplementedError  # in compiled code only


@overload(_exp, strict=False)
def _exp_of_a_kind(x: Any) -> Any:
    if x is SINGLE:
        return lambda x: _exp_of_lanes(x)
    return lambda x: _exp_of_number(x)


@inlined
def _exp_of_number(x: float) -> float:
    bounded = min(max(x, -700.0), 700.0) if x == x else 0.0
    power = int(bounded * _LOG2_E + (_BIAS + 0.5)) - _BIAS  # rounded, by truncating what is above 0
    f = bounded - power * _LN_2
    series = 1.0 / 3628800.0
    series = series * f + 1.0 / 362880.0
    series = series * f + 1.0 / 40320.0
    series = series * f + 1.0 / 5040.0
    series = series * f + 1.0 / 720.0
    series = series * f + 1.0 / 120.0
    series = series * f + 1.0 / 24.0
    series = series * f + 1.0 / 6.0
    series = series * f + 0.5
    series = series * f + 1.0
    series = series * f + 1.0
    value = series * _from_bits((power + _BIAS) << _FRACTION_BITS)
    return value if x == x else x


@inlined
def _exp_of_lanes(x: Any) -> Any:
    bounded = max(min(x, 80.0), -80.0)  # NaN becomes 80 here, and NaN again at the end
    power = whole(bounded * _LOG2_E + (_SINGLE_BIAS + 0.5))
    f = bounded - single(power - _SINGLE_BIAS) * _LN_2
    series = f * (1.0 / 5040.0) + 1.0 / 720.0
    series = series * f + 1.0 / 120.0
    series = series * f + 1.0 / 24.0
    series = series * f + 1.0 / 6.0
    series = series * f + 0.5
    series = series * f + 1.0
    series = series * f + 1.0
    return where(x == x, series * of_bits(power << _SINGLE_FRACTION_BITS), x)


@inlined
def power(x: Any, exponent: float) -> Any:
    """x to the power of a number; x as for :func:`log10`, the result as for :func:`exp`."""
    return exp(log10(x) * (exponent / _LOG10_E))


@inlined
def arctangent(x: Any) -> Any:
    """Angle in radians, -pi/2 to pi/2, whose tangent is x; NaN gives NaN.

    Between tan(pi/8) and tan(3 pi/8) atan x = pi/4 + atan((x - 1) / (x + 1)), beyond it
    pi/2 - atan(1/x): the series in what is left converges fast.
    """
    size = abs(x)
    middle = size > _TAN_PI_8
    steep = size > _TAN_3_PI_8
    upper = where(steep, -1.0, where(middle, size - 1.0, size))
    lower = where(steep, size, where(middle, size + 1.0, 1.0))
    v = upper / lower
    z = v * v
    series = 1.0 / 23.0 - z * (1.0 / 25.0)
    series = 1.0 / 21.0 - series * z
    series = 1.0 / 19.0 - series * z
    series = 1.0 / 17.0 - series * z
    series = 1.0 / 15.0 - series * z
    series = 1.0 / 13.0 - series * z
    series = 1.0 / 11.0 - series * z
    series = 1.0 / 9.0 - series * z
    series = 1.0 / 7.0 - series * z
    series = 1.0 / 5.0 - series * z
    series = 1.0 / 3.0 - series * z
    series = 1.0 - series * z
    angle = v * series + where(steep, 0.5 * math.pi, where(middle, 0.25 * math.pi, 0.0))
    return where(x < 0.0, -angle, angle)


@inlined
def arcsine(x: Any) -> Any:
    """Angle in radians, -pi/2 to pi/2, whose sine is x, for -1 <= x <= 1."""
    return arctangent(x / math.sqrt((1.0 - x) * (1.0 + x)))


@inlined
def sine_of_small(angle: Any) -> Any:
    """Sine of an angle between -pi/6 and pi/6."""
    z = angle * angle
    series = 1.0 - z * (1.0 / 156.0)
    series = 1.0 - series * z * (1.0 / 110.0)
    series = 1.0 - series * z * (1.0 / 72.0)
    series = 1.0 - series * z * (1.0 / 42.0)
    series = 1.0 - series * z * (1.0 / 20.0)
    series = 1.0 - series * z * (1.0 / 6.0)
    return angle * series
