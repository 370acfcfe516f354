"""Exponential and logarithm of a vector, as polynomials (relative error below 1e-14); a rough power for the step control."""

from sweep.kernel.vector import compiled, exponent, mantissa, scaled, where

_SHIFT = 6755399441055744.0  # 1.5 * 2**52: adding it rounds to a whole number, kept in the low bits
_LOG2_E = 1.4426950408889634
_LN2_HIGH = 6.93147180369123816490e-01  # Cody and Waite's split: the high part times a whole number is exact
_LN2_LOW = 1.90821492927058770002e-10


@compiled
def exp(x):  # type: ignore[no-untyped-def]
    """Return e**x, lane by lane; x is held between -700 and 700, NaN passes through.

    Taylor series to r^12/12! after reduction by ln 2, so that |r| < 0.35; summed in pieces, which shortens the chain of operations.
    """
    x = where(x < -700.0, -700.0, x)
    x = where(x > 700.0, 700.0, x)
    shifted = x * _LOG2_E + _SHIFT
    n = shifted - _SHIFT
    r = (x - n * _LN2_HIGH) - n * _LN2_LOW
    r2 = r * r
    r4 = r2 * r2
    low = (r * (1.0 / 6.0) + 0.5) * r2 + (r + 1.0)
    middle = (r * (1.0 / 5040.0) + 1.0 / 720.0) * r2 + (r * (1.0 / 120.0) + 1.0 / 24.0)
    high = (r * (1.0 / 39916800.0) + 1.0 / 3628800.0) * r2 + (r * (1.0 / 362880.0) + 1.0 / 40320.0)
    p = (high + r4 * (1.0 / 479001600.0)) * r4 + middle
    p = p * r4 + low
    return scaled(p, shifted)


@compiled
def log(x):  # type: ignore[no-untyped-def]
    """Return ln x, lane by lane, for positive normal x: 2 artanh((m - 1)/(m + 1)) of the mantissa near 1."""
    e = exponent(x)
    m = mantissa(x)
    high = m > 1.4142135623730951
    m = where(high, m * 0.5, m)
    e = where(high, e + 1.0, e)
    s = (m - 1.0) / (m + 1.0)
    q = s * s
    p = q * (1.0 / 23.0) + 1.0 / 21.0
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
    return e * _LN2_HIGH + (2.0 * s * p + e * _LN2_LOW)


@compiled
def rough_power(x, power):  # type: ignore[no-untyped-def]
    """Return x**power to 2e-4, lane by lane, for positive normal x and |power log2 x| below 1000: no division, no root.

    log2 of the mantissa and 2**r for |r| <= 1/2 are polynomials through Chebyshev points.
    """
    m = mantissa(x)
    y = power * (exponent(x) + (-2.49835315 + m * (4.02921139 + m * (-2.07833517 + m * (0.62603218 - 0.07844068 * m)))))
    shifted = y + _SHIFT
    r = y - (shifted - _SHIFT)
    return scaled(0.99992456 + r * (0.69313673 + r * (0.24263948 + r * 0.05583828)), shifted)
