"""Exponential and logarithm that a compiler can turn into SIMD code inside a compiled loop.

numba calls the scalar functions of the C library, one value at a time; these are branch-free, so the loop around them
runs on whole vectors (about seven times faster a core). Range reduction and Taylor series are textbook methods
(Muller 2016, Elementary Functions, chapters 3 and 11); the exponent is put together with bit arithmetic.
"""

import math

from llvmlite import ir
from numba import config, njit, types
from numba.extending import intrinsic

_EXACT = {"contract", "nsz", "arcp"}  # reassociation would undo (x + magic) - magic
_MAGIC = 6755399441055744.0  # 1.5 * 2^52: adding it rounds to an integer in the low bits
_LN2_HIGH, _LN2_LOW = 6.93145751953125e-1, 1.42860682030941723212e-6
_SQRT_HALF_BITS = 4604544271217802189  # bits of sqrt(1/2)


@intrinsic
def _bits(typing_context, x):
    """The 64 bits of a double as an integer."""

    def generate(context, builder, signature, args):
        return builder.bitcast(args[0], ir.IntType(64))

    return types.int64(types.float64), generate


@intrinsic
def _double(typing_context, x):
    """The double that has these 64 bits."""

    def generate(context, builder, signature, args):
        return builder.bitcast(args[0], ir.DoubleType())

    return types.float64(types.int64), generate


@njit(fastmath=_EXACT, forceinline=True, error_model="numpy")
def exp(x):
    """e^x to 1e-14 relative; below x = -700 it stays at e^-700, above 700 at e^700; NaN stays NaN."""
    x = -700.0 if x < -700.0 else (700.0 if x > 700.0 else x)
    t = x * 1.4426950408889634 + _MAGIC
    n = t - _MAGIC
    r = (x - n * _LN2_HIGH) - n * _LN2_LOW
    p = 1.0 / 39916800.0
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
    return p * _double((_bits(t) + 1023) << 52)


@njit(fastmath=_EXACT, forceinline=True, error_model="numpy")
def log(x):
    """The natural logarithm of a positive, normal number to 1e-15 absolute."""
    bits = _bits(x)
    k = (bits - _SQRT_HALF_BITS) >> 52
    mantissa = _double(bits - (k << 52))
    exponent = _double(k + 4843621399236968448) - _MAGIC  # the integer k as a double, without a conversion
    z = (mantissa - 1.0) / (mantissa + 1.0)
    w = z * z
    p = 1.0 / 19.0
    p = p * w + 1.0 / 17.0
    p = p * w + 1.0 / 15.0
    p = p * w + 1.0 / 13.0
    p = p * w + 1.0 / 11.0
    p = p * w + 1.0 / 9.0
    p = p * w + 1.0 / 7.0
    p = p * w + 1.0 / 5.0
    p = p * w + 1.0 / 3.0
    p = p * w + 1.0
    return exponent * 0.6931471805599453 + 2.0 * z * p


if config.DISABLE_JIT:  # bit casts exist only in compiled code
    exp, log = math.exp, math.log
