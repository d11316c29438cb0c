"""The three readings of an expression in one call each: values, enclosures, Taylor models.

Coordinates are called x, y, z in the order of the rows of the arrays.
"""

import numpy as np

from service.problem.expressions.expression import Expression
from service.problem.expressions.interval import Interval, between
from service.problem.expressions.interval_algebra import IntervalAlgebra
from service.problem.expressions.numpy_algebra import NumpyAlgebra
from service.problem.expressions.rounding import Floats
from service.problem.expressions.taylor_algebra import TaylorAlgebra
from service.problem.expressions.taylor_model import TaylorModel, filled

COORDINATES = ("x", "y", "z")


def values(expression: Expression, points: Floats) -> Floats:
    """Values at points, in plain floating-point arithmetic.

    Parameters
    ----------
    points : shape (d, ...).

    Returns
    -------
    Shape (...); nan or infinite where the expression has no value.

    Raises
    ------
    KeyError : the expression has a variable beyond the first d coordinates.
    """
    found = expression.read(NumpyAlgebra(), dict(zip(COORDINATES, points, strict=False)))
    return np.array(np.broadcast_to(found, points.shape[1:]))


def enclosures(expression: Expression, lower: Floats, upper: Floats) -> Interval:
    """Enclosures of the values on boxes, (-inf, inf) unless there is a value at every point of the box.

    Parameters
    ----------
    lower, upper : corners of the boxes, shape (d, ...); finite, lower <= upper.

    Returns
    -------
    Arrays of shape (...).

    Raises
    ------
    KeyError : the expression has a variable beyond the first d coordinates.
    """
    boxes = {name: between(low, high) for name, low, high in zip(COORDINATES, lower, upper, strict=False)}
    return expression.read(IntervalAlgebra(), boxes).settled(lower.shape[1:])


def taylor_models(expression: Expression, center: Floats, slopes: Floats, degree: int) -> TaylorModel:
    """Polynomials with proved remainders on parallelograms (or boxes, or parallelepipeds).

    Parameters
    ----------
    center : centres of n cells, shape (d, n).
    slopes : derivatives of the coordinates with respect to the m local variables, shape (d, m, n): a cell
        is the set of all center + slopes s with s in [-1, 1]^m. For boxes, of shape (d, n), the half
        widths: slopes are then diagonal.
    degree : total degree of the polynomials, 0 to 8.

    Returns
    -------
    A model with all coefficients up to ``degree`` on each of the n cells; with an infinite radius unless
    the expression has a value at every point of the cell.

    Raises
    ------
    KeyError : the expression has a variable beyond the first d coordinates.
    ValueError : a degree out of range.
    """
    if slopes.ndim == 2:
        slopes = np.eye(len(slopes))[:, :, None] * slopes[:, None]
    algebra = TaylorAlgebra(degree, slopes.shape[1])
    cells = {
        name: algebra.linear(middle, slope)
        for name, middle, slope in zip(COORDINATES, center, slopes, strict=False)
    }
    return filled(expression.read(algebra, cells), center.shape[1], degree)
