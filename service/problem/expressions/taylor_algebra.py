"""Taylor models: polynomial approximations of expressions on cells, with proved remainders.

Reference: K. Makino and M. Berz, Taylor models and other validated functional inclusion methods,
Int. J. Pure Appl. Math. 4 (2003) 379-456.

Sums and products are truncated polynomial arithmetic. A function of one variable is its Taylor series
about the model's constant term, with Lagrange's remainder bounded over the range. Beside each
polynomial goes an interval enclosure; wherever that is tighter than the polynomial's own remainder (a
kink, a coarse cell), a constant with the enclosure as its remainder takes the polynomial's place. So a
model is never worse than interval arithmetic, and where that finds no bound the radius is infinite.
"""

from collections.abc import Callable
from fractions import Fraction

import numpy as np

from service.problem.expressions import series, truncated
from service.problem.expressions.interval import Interval, between, point
from service.problem.expressions.interval_algebra import IntervalAlgebra
from service.problem.expressions.rounding import QUIETLY, Floats, sum_above, sum_below
from service.problem.expressions.taylor_model import TaylorModel, range_bounds
from service.problem.expressions.truncated import ABOVE, UNDERFLOW, Truncated

HIGHEST_DEGREE = 8

HALF = Fraction(1, 2)

Series = Callable[[Interval, int], list[Interval]]


class TaylorAlgebra:
    """Reads an expression as polynomials in local variables s in [-1, 1]^d, on n cells at once.

    Parameters
    ----------
    degree : total degree at which polynomials are cut, 0 to HIGHEST_DEGREE.
    dimension : number d of local variables.

    Raises
    ------
    ValueError : a degree or dimension beyond these.
    """

    def __init__(self, degree: int, dimension: int = 2) -> None:
        if not 0 <= degree <= HIGHEST_DEGREE or dimension < 1:
            raise ValueError(f"degree 0 to {HIGHEST_DEGREE} in one or more variables")
        self.degree = degree
        self.dimension = dimension
        self.intervals = IntervalAlgebra()

    def variable(self, axis: int, center: Floats, half_width: Floats) -> TaylorModel:
        """The coordinate center + half_width s_axis on cells; both of shape (n,), half_width >= 0."""
        slopes = np.zeros((self.dimension, *np.shape(center)))
        slopes[axis] = half_width
        return self.linear(center, slopes)

    def linear(self, center: Floats, slopes: Floats) -> TaylorModel:
        """The coordinate center + slopes . s, exactly.

        Parameters
        ----------
        center : shape (n,).
        slopes : derivatives with respect to the local variables, shape (d, n).
        """
        reach = ABOVE * np.sum(np.abs(slopes), axis=0)
        bounds = between(sum_below(center, -reach), sum_above(center, reach))
        if self.degree == 0:
            return self.flat(bounds)
        rows = np.concatenate([center[None], slopes])
        return TaylorModel(Truncated(rows, np.zeros(len(center)), self.dimension, 1), bounds)

    def constant(self, value: Fraction) -> TaylorModel:
        return self.flat(self.intervals.constant(value))

    def pi(self) -> TaylorModel:
        return self.flat(self.intervals.pi())

    def flat(self, bounds: Interval) -> TaylorModel:
        """The middle of an enclosure, with all of it as the remainder."""
        return TaylorModel(self.flat_polynomial(bounds), bounds)

    def flat_polynomial(self, bounds: Interval) -> Truncated:
        """A polynomial of degree 0 and its remainder from an enclosure."""
        middle = np.atleast_1d(bounds.middle)
        return Truncated(middle[None], np.atleast_1d(bounds.distance(middle)), self.dimension, 0)

    def model(self, polynomial: Truncated, bounds: Interval) -> TaylorModel:
        """The polynomial, but the flat one on cells where that has the smaller remainder."""
        flat = self.flat_polynomial(bounds)
        better = flat.radius < polynomial.radius
        if better.any():
            polynomial = truncated.select(better, flat, polynomial)
        return TaylorModel(polynomial, bounds)

    def add(self, a: TaylorModel, b: TaylorModel) -> TaylorModel:
        return self.model(truncated.add(a.polynomial, b.polynomial), self.intervals.add(a.bounds, b.bounds))

    def subtract(self, a: TaylorModel, b: TaylorModel) -> TaylorModel:
        return self.add(a, self.negate(b))

    def negate(self, a: TaylorModel) -> TaylorModel:
        return TaylorModel(truncated.negated(a.polynomial), self.intervals.negate(a.bounds))

    def multiply(self, a: TaylorModel, b: TaylorModel) -> TaylorModel:
        bounds = self.intervals.multiply(a.bounds, b.bounds)
        return self.model(truncated.multiply(a.polynomial, b.polynomial, self.degree), bounds)

    def divide(self, a: TaylorModel, b: TaylorModel) -> TaylorModel:
        inverse = self.composed(b, series.reciprocal, self.inverse)
        bounds = self.intervals.divide(a.bounds, range_bounds(b))
        return self.model(truncated.multiply(a.polynomial, inverse.polynomial, self.degree), bounds)

    def inverse(self, a: Interval) -> Interval:
        """One over an interval."""
        return self.intervals.divide(self.intervals.constant(Fraction(1)), a)

    def integer_power(self, a: TaylorModel, exponent: int) -> TaylorModel:
        """By squaring, of the reciprocal where the exponent is negative."""
        bounds = self.intervals.integer_power(range_bounds(a), exponent)
        base = self.composed(a, series.reciprocal, self.inverse) if exponent < 0 else a
        power, square, left = self.constant(Fraction(1)).polynomial, base.polynomial, abs(exponent)
        while left:
            if left & 1:
                power = truncated.multiply(power, square, self.degree)
            left >>= 1
            if left:
                square = truncated.multiply(square, square, self.degree)
        return self.model(power, bounds)

    def sin(self, a: TaylorModel) -> TaylorModel:
        return self.composed(a, series.sine, self.intervals.sin)

    def cos(self, a: TaylorModel) -> TaylorModel:
        return self.composed(a, series.cosine, self.intervals.cos)

    def tan(self, a: TaylorModel) -> TaylorModel:
        return self.composed(a, series.tangent, self.intervals.tan)

    def exp(self, a: TaylorModel) -> TaylorModel:
        return self.composed(a, series.exponential, self.intervals.exp)

    def log(self, a: TaylorModel) -> TaylorModel:
        return self.composed(a, series.logarithm, self.intervals.log)

    def sqrt(self, a: TaylorModel) -> TaylorModel:
        return self.composed(a, series.root, self.intervals.sqrt)

    def tanh(self, a: TaylorModel) -> TaylorModel:
        return self.composed(a, series.hyperbolic_tangent, self.intervals.tanh)

    @QUIETLY
    def composed(
        self, a: TaylorModel, expansion: Series, whole: Callable[[Interval], Interval]
    ) -> TaylorModel:
        """A function of one variable, from the enclosures of its Taylor coefficients and of its values.

        The series about the constant term, by Horner's rule; what is multiplied by the deviation k more
        times needs no degree above degree - k.
        """
        range_, deviation = range_bounds(a), a.polynomial.deviation()
        center = point(a.polynomial.coefficients[0])
        span = range_.hull(center)
        terms = [self.flat_polynomial(term) for term in expansion(center, self.degree)]
        result = terms[-1]
        for k in range(self.degree - 1, -1, -1):
            result = truncated.multiply(result, deviation, self.degree - k)
            result = truncated.add(result, terms[k])
        slope = expansion(span, self.degree + 1)[-1].size
        remainder = ABOVE * slope * span.distance(center.lower) ** (self.degree + 1) + UNDERFLOW
        result = truncated.widened(result, np.atleast_1d(remainder))
        return self.model(result, whole(range_))

    @QUIETLY
    def absolute(self, a: TaylorModel) -> TaylorModel:
        """+-a where the sign is decided, elsewhere slope a + c with |a| - slope a in [0, 2 c]."""
        range_ = range_bounds(a)
        positive, negative = range_.lower >= 0, range_.upper <= 0
        slope = np.clip((range_.upper + range_.lower) / (range_.upper - range_.lower), -1.0, 1.0)
        slope = np.where(np.isfinite(slope), slope, 0.0)
        rise = ABOVE * np.maximum((1 - slope) * range_.upper, -(1 + slope) * range_.lower)
        line = truncated.multiply(self.flat_polynomial(point(slope)), a.polynomial, self.degree)
        offset = self.flat_polynomial(between(np.zeros_like(rise), np.maximum(rise, 0.0)))
        result = truncated.add(line, offset)
        result = truncated.select(positive, a.polynomial, result)
        result = truncated.select(negative, truncated.negated(a.polynomial), result)
        return self.model(result, self.intervals.absolute(range_))

    def minimum(self, a: TaylorModel, b: TaylorModel) -> TaylorModel:
        """The lower one where that is decided, (a + b - |a - b|) / 2 elsewhere."""
        difference = self.subtract(a, b)
        lead = range_bounds(difference)
        twice = self.subtract(self.add(a, b), self.absolute(difference))
        result = truncated.multiply(self.constant(HALF).polynomial, twice.polynomial, self.degree)
        result = truncated.select(lead.upper <= 0, a.polynomial, result)
        result = truncated.select(lead.lower >= 0, b.polynomial, result)
        return self.model(result, self.intervals.minimum(a.bounds, b.bounds))

    def maximum(self, a: TaylorModel, b: TaylorModel) -> TaylorModel:
        return self.negate(self.minimum(self.negate(a), self.negate(b)))

    def sign(self, a: TaylorModel) -> TaylorModel:
        return self.flat(self.intervals.sign(range_bounds(a)))

    def choose(
        self, condition: TaylorModel, positive: TaylorModel, negative: TaylorModel
    ) -> TaylorModel:
        """The chosen branch where it is decided, elsewhere the mean of both with half their distance."""
        lead = range_bounds(condition)
        half = self.constant(HALF).polynomial
        both = truncated.add(positive.polynomial, negative.polynomial)
        apart = truncated.add(positive.polynomial, truncated.negated(negative.polynomial))
        spread = truncated.multiply(half, apart, self.degree)
        result = truncated.multiply(half, both, self.degree)
        result = truncated.widened(result, spread.size + spread.radius)
        result = truncated.select(lead.lower > 0, positive.polynomial, result)
        result = truncated.select(lead.upper < 0, negative.polynomial, result)
        return self.model(result, self.intervals.choose(lead, positive.bounds, negative.bounds))
