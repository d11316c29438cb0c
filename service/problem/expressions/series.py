"""Taylor coefficients f^(k)(a)/k! of the elementary functions, enclosed for every a in an interval.

At a point they are the coefficients of the series; over a range the last one bounds Lagrange's
remainder: f(c + t) = sum_{k<=q} f^(k)(c)/k! t^k + f^(q+1)(a)/(q+1)! t^(q+1) with a between c and c + t.
Each function takes (a, order) and returns the coefficients 0..order.
"""

from fractions import Fraction
from math import factorial

from service.problem.expressions.interval import Interval
from service.problem.expressions.interval_algebra import IntervalAlgebra

INTERVALS = IntervalAlgebra()


def exponential(a: Interval, order: int) -> list[Interval]:
    """exp(a)/k!."""
    value = INTERVALS.exp(a)
    return [scaled(Fraction(1, factorial(k)), value) for k in range(order + 1)]


def sine(a: Interval, order: int) -> list[Interval]:
    """sin, cos, -sin, -cos, ..., each over k!."""
    return _rotated(INTERVALS.sin(a), INTERVALS.cos(a), order)


def cosine(a: Interval, order: int) -> list[Interval]:
    """cos, -sin, -cos, sin, ..., each over k!."""
    return _rotated(INTERVALS.cos(a), INTERVALS.negate(INTERVALS.sin(a)), order)


def _rotated(value: Interval, slope: Interval, order: int) -> list[Interval]:
    """value, slope, -value, -slope, ..., each over k!."""
    signs = (1, 1, -1, -1)
    return [
        scaled(Fraction(signs[k % 4], factorial(k)), slope if k % 2 else value) for k in range(order + 1)
    ]


def tangent(a: Interval, order: int) -> list[Interval]:
    """From y' = 1 + y^2."""
    return _riccati(INTERVALS.tan(a), 1, order)


def hyperbolic_tangent(a: Interval, order: int) -> list[Interval]:
    """From y' = 1 - y^2."""
    return _riccati(INTERVALS.tanh(a), -1, order)


def _riccati(value: Interval, sign: int, order: int) -> list[Interval]:
    """The series of y' = 1 + sign y^2: (k+1) y_(k+1) = [k = 0] + sign sum_i y_i y_(k-i)."""
    found = [value]
    for k in range(order):
        square = INTERVALS.constant(Fraction(sign if k == 0 else 0))
        for i in range((k + 1) // 2):
            square = INTERVALS.add(square, scaled(Fraction(2), INTERVALS.multiply(found[i], found[k - i])))
        if k % 2 == 0:
            square = INTERVALS.add(square, INTERVALS.integer_power(found[k // 2], 2))
        found.append(scaled(Fraction(sign, k + 1), square))
    return found


def logarithm(a: Interval, order: int) -> list[Interval]:
    """log(a), then -(-1)^k / (k a^k)."""
    rest = [
        scaled(Fraction(-((-1) ** k), k), INTERVALS.integer_power(a, -k)) for k in range(1, order + 1)
    ]
    return [INTERVALS.log(a), *rest]


def root(a: Interval, order: int) -> list[Interval]:
    """binomial(1/2, k) sqrt(a)^(1 - 2k)."""
    value, binomial = INTERVALS.sqrt(a), Fraction(1)
    found = [value]
    for k in range(1, order + 1):
        binomial *= (Fraction(1, 2) - (k - 1)) / k
        found.append(scaled(binomial, INTERVALS.integer_power(value, 1 - 2 * k)))
    return found


def reciprocal(a: Interval, order: int) -> list[Interval]:
    """(-1)^k a^(-k-1)."""
    return [scaled(Fraction((-1) ** k), INTERVALS.integer_power(a, -k - 1)) for k in range(order + 1)]


def scaled(factor: Fraction, a: Interval) -> Interval:
    """A rational multiple; 1 and -1 cost no rounding."""
    if abs(factor) == 1:
        return a if factor == 1 else INTERVALS.negate(a)
    return INTERVALS.multiply(INTERVALS.constant(factor), a)
