"""What the Taylor reading of an expression returns: a polynomial on each cell, and proved bounds."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.problem.expressions.interval import Interval
from service.problem.expressions.monomials import exponents
from service.problem.expressions.rounding import Floats
from service.problem.expressions.truncated import Truncated


@dataclass(frozen=True)
class TaylorModel:
    """An expression f on n cells, each described by local variables s in [-1, 1]^d: |f - P(s)| <= radius.

    polynomial : P and the radius.
    bounds : enclosures of f on the cells by interval arithmetic, and where f is defined.
    """

    polynomial: Truncated
    bounds: Interval

    @property
    def exponents(self) -> NDArray[np.int64]:
        """Exponents of the monomials, shape (nmonomials, d)."""
        return exponents(self.polynomial.dimension, self.polynomial.degree)

    @property
    def coefficients(self) -> Floats:
        """Coefficients of the monomials, shape (n, nmonomials); 0 where nothing is known."""
        return self.polynomial.coefficients.T

    @property
    def radius(self) -> Floats:
        """Bounds of the remainder, shape (n,); infinite where nothing is known."""
        return self.polynomial.radius


def range_bounds(model: TaylorModel) -> Interval:
    """Enclosures of the expression on the cells: the better of the polynomial's and interval arithmetic's.

    Ends have shape (n,).
    """
    return model.bounds.within(*model.polynomial.ends())


def evaluate(model: TaylorModel, local: Floats) -> Floats:
    """Values of the polynomials at local points.

    Parameters
    ----------
    model : the polynomials on n cells.
    local : points in [-1, 1]^d, shape (d, m) for the same points on every cell, or (d, n, m).

    Returns
    -------
    Values, shape (n, m). Their rounding is not part of the radius; it is below 2^-40 times
    ``model.polynomial.size`` on each cell.
    """
    powers = np.ones((model.polynomial.degree + 1, *local.shape))
    for k in range(1, len(powers)):
        powers[k] = powers[k - 1] * local
    monomials = np.ones((len(model.exponents), *local.shape[1:]))
    for axis, exponent in enumerate(model.exponents.T):
        monomials *= powers[exponent, axis]
    shape = "kj" if local.ndim == 2 else "kij"
    return np.asarray(np.einsum(f"ik,{shape}->ij", model.coefficients, monomials))


def filled(model: TaylorModel, cells: int, degree: int) -> TaylorModel:
    """The same with an own column for each cell, and nothing known where a value is not proved to exist."""
    old, bounds = model.polynomial, model.bounds.settled((cells,))
    rows = np.where(bounds.defined, old.padded(degree), 0.0)
    radius = np.where(bounds.defined, old.radius, np.inf)
    return TaylorModel(Truncated(rows, radius, old.dimension, degree), bounds)
