"""Expressions as polynomials on cells and facets, with what is left over bounded."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.bounds.rounding import UNIT
from service.elements.jet import simplex_dimension
from service.elements.quadrature import simplex_rule
from service.forms.modes import coefficient_modes
from service.meshing.mesh import Mesh
from service.problem.expressions.errors import DerivativeError
from service.problem.expressions.expression import Expression
from service.problem.expressions.interval import between
from service.problem.expressions.interval_algebra import IntervalAlgebra
from service.problem.expressions.taylor_algebra import TaylorAlgebra
from service.problem.expressions.taylor_model import evaluate, filled, range_bounds

Array = NDArray[np.float64]

NAMES = ("x", "y", "z")


@dataclass(frozen=True)
class Approximation:
    """A function on n simplices: polynomials by modes (n, m), and |function - polynomial| <= error (n,) there."""

    modes: Array
    error: Array

    def __add__(self, other: "Approximation") -> "Approximation":
        width = max(self.modes.shape[1], other.modes.shape[1])
        total = widened(self.modes, width) + widened(other.modes, width)
        return Approximation(total, self.error + other.error + 4 * UNIT * np.sum(np.abs(total), axis=1))

    def times(self, factor: float | Array) -> "Approximation":
        """Multiplied by a number, or by one number for each simplex."""
        scale = np.broadcast_to(np.asarray(factor, dtype=float), self.error.shape)
        modes = self.modes * scale[:, None]
        return Approximation(modes, np.abs(scale) * self.error + 4 * UNIT * np.sum(np.abs(modes), axis=1))


def widened(modes: Array, width: int) -> Array:
    """Mode array (n, m, ...) with zeros appended."""
    return np.pad(modes, [(0, 0), (0, width - modes.shape[1])] + [(0, 0)] * (modes.ndim - 2))


def user_points(mesh: Mesh, points: Array) -> Array:
    """Coordinates in the user's length unit of points in mesh units (..., d)."""
    return np.asarray(np.asarray(mesh.origin) + mesh.unit * points)


def approximate(expression: Expression, start: Array, spans: Array, degree: int) -> Approximation:
    """An expression on simplices given by a vertex and the vectors from it, in user coordinates.

    Parameters
    ----------
    expression : in x, y (and z).
    start : (n, d) first vertices.
    spans : (n, d, k) vectors to the other vertices of simplices of dimension k.
    degree : of the polynomials; constants get degree 0.

    Returns
    -------
    Approximation
        With infinite error where the expression is not proved to be defined.
    """
    count, d, k = spans.shape
    constant = expression.exact
    if constant is not None:
        value = float(constant)
        return Approximation(np.full((count, 1), value), np.full(count, abs(value) * UNIT))
    algebra = TaylorAlgebra(degree, k)
    # The unit simplex in the local variables: vertex + spans (1 + s) / 2.
    center, slopes = start + spans.sum(axis=2) / 2, spans / 2
    values = {NAMES[a]: algebra.linear(center[:, a], slopes[:, a].T) for a in range(d)}
    model = filled(expression.read(algebra, values), count, degree)
    points, weights = simplex_rule(k, 2 * degree)
    weights = weights / np.sum(weights)
    modes = coefficient_modes(k, simplex_dimension(k, degree), points)
    samples = evaluate(model, 2 * points - 1)
    found = range_bounds(model)
    size = np.maximum(np.abs(found.lower), np.abs(found.upper))
    defined = np.broadcast_to(found.defined, (count,)) & np.isfinite(size)
    error = model.radius + 2.0**-38 * (size + np.sum(np.abs(model.coefficients), axis=1))
    error = error + displaced(expression, center, slopes)
    samples = np.where(defined[:, None], samples, 0.0)
    return Approximation((samples * weights) @ modes.T, np.where(defined, error, np.inf))


def displaced(expression: Expression, center: Array, slopes: Array) -> Array:
    """What the rounding of coordinates can do to the value: a few units in the last place times the slope (n,)."""
    d = center.shape[1]
    reach = np.sum(np.abs(slopes), axis=2)
    shift = 16 * UNIT * (np.abs(center) + reach)
    algebra = IntervalAlgebra()
    low, high = center - reach - shift, center + reach + shift
    values = {NAMES[a]: between(low[:, a], high[:, a]) for a in range(d)}
    total = np.zeros(len(center))
    for a in range(d):
        if NAMES[a] not in expression.variables():
            continue
        try:
            slope = expression.derivative(NAMES[a]).read(algebra, values)
        except DerivativeError:
            # A function with jumps: all that is known is its range.
            found = expression.read(algebra, values)
            return np.broadcast_to(found.upper - found.lower, (len(center),))
        total = total + shift[:, a] * np.maximum(np.abs(slope.lower), np.abs(slope.upper))
    return np.asarray(total)
