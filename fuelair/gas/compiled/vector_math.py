"""Exponential and logarithm that the compiler turns into vector instructions.

The usual reduction: exp x = 2^k exp r with |r| <= ln 2 / 2, a Taylor polynomial for exp r; ln x = e ln 2 + ln m with
m in [0.7, 1.42), the series of the inverse hyperbolic tangent for ln m. Bits are moved as integers of the same
width, so no conversion breaks the vector. Errors below 1e-15 relative (exp) and 4e-16 absolute beside |ln x| (ln).
"""

from __future__ import annotations

from typing import Any

from llvmlite import ir
from numba import types
from numba.extending import intrinsic

from fuelair.gas import polynomials
from fuelair.gas.compiled.jit import vectorised
from fuelair.gas.polynomials import T_BREAK

LANES = 16
"""States side by side. With eight, the compiler unrolls the loops before it looks for vectors, and finds none."""
thermal = vectorised(polynomials.thermal)
"""cp/R, h/(R T), s/R from nine coefficients, T, 1/T and ln T."""

LOG2_E = 1.4426950408889634
LN2_HIGH = 0.693147180369123816490  # the leading 33 bits of ln 2
LN2_LOW = 1.90821492927058770002e-10
ROUND = 6755399441055744.0
"""1.5 * 2^52: adding it rounds to a whole number, whose bits then stand in the low end of the mantissa."""
LARGEST = 700.0
"""Arguments of the exponential are held between plus and minus this."""
SQRT2 = 1.4142135623730951
MANTISSA, ONE, BIAS, ROUND_BITS = 0x000FFFFFFFFFFFFF, 0x3FF0000000000000, 1023, 0x4330000000000000
WHOLE = 4503599627370496.0
"""2^52: what `ROUND_BITS` are as a number."""


@intrinsic
def _bits(typing_context: Any, x: Any = None) -> Any:
    """The 64 bits of a float as an integer."""

    def generate(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        return builder.bitcast(args[0], ir.IntType(64))

    return types.int64(types.float64), generate


@intrinsic
def _float(typing_context: Any, x: Any = None) -> Any:
    """The float with the 64 bits of an integer."""

    def generate(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        return builder.bitcast(args[0], ir.DoubleType())

    return types.float64(types.int64), generate


@vectorised
def exp(x: float) -> float:
    """Exponential of ``x``, which is held within +-700."""
    x = min(max(x, -LARGEST), LARGEST)
    shifted = x * LOG2_E + ROUND
    k = shifted - ROUND
    r = (x - k * LN2_HIGH) - k * LN2_LOW
    p = 1.0 / 6227020800.0
    p = p * r + 1.0 / 479001600.0
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
    return _float(_bits(p) + (_bits(shifted) << 52))


@vectorised
def log(x: float) -> float:
    """Natural logarithm of a positive normal ``x``."""
    bits: int = _bits(x)
    m = _float((bits & MANTISSA) | ONE)
    e = _float((bits >> 52) | ROUND_BITS) - WHOLE - BIAS
    big = m > SQRT2
    m = 0.5 * m if big else m
    e = e + 1.0 if big else e
    f = (m - 1.0) / (m + 1.0)
    q = f * f
    p = 2.0 / 23.0
    p = p * q + 2.0 / 21.0
    p = p * q + 2.0 / 19.0
    p = p * q + 2.0 / 17.0
    p = p * q + 2.0 / 15.0
    p = p * q + 2.0 / 13.0
    p = p * q + 2.0 / 11.0
    p = p * q + 2.0 / 9.0
    p = p * q + 2.0 / 7.0
    p = p * q + 2.0 / 5.0
    p = p * q + 2.0 / 3.0
    return e * LN2_HIGH + (f * (p * q + 2.0) + e * LN2_LOW)


@vectorised
def ranged(
    a0: float, a1: float, a2: float, a3: float, a4: float, a5: float, a6: float, a7: float, a8: float,
    b0: float, b1: float, b2: float, b3: float, b4: float, b5: float, b6: float, b7: float, b8: float,
    t: float, log_t: float,
) -> tuple[float, float, float]:  # fmt: skip
    """cp/R, h/(R T) and s/R from the coefficients below (a) and above (b) the break, at ``t`` [K]."""
    cold = t < T_BREAK
    return thermal(
        a0 if cold else b0,
        a1 if cold else b1,
        a2 if cold else b2,
        a3 if cold else b3,
        a4 if cold else b4,
        a5 if cold else b5,
        a6 if cold else b6,
        a7 if cold else b7,
        a8 if cold else b8,
        t,
        1.0 / t,
        log_t,
    )
