"""The operator -div(K grad u) + b . grad u + c u, and the norm in which it is measured.

Convective form: a(u, v) = int K grad u . grad v + (b . grad u) v + c u v + int over Robin parts of
alpha u v. Conservative form: - int u b . grad v in place of the second term, plus the integral of
(b . n) u v over the boundary outside the Dirichlet parts, where the diffusive flux is prescribed.
"""

from dataclasses import dataclass
from typing import Literal, TypeAlias

import numpy as np
from numpy.typing import NDArray

from service.problem.expressions.expression import Expression
from service.problem.piecewise import Piecewise

Form = Literal["convective", "conservative"]

NormKind = Literal["h1", "seminorm", "diffusion"]

Matrix: TypeAlias = tuple[Expression, Expression, Expression, Expression]
"""A matrix row by row: k11, k12, k21, k22; a scalar k is (k, 0, 0, k)."""

Vector: TypeAlias = tuple[Expression, Expression]
"""The components along x and y."""

ZERO = Expression.constant(0)
ONE = Expression.constant(1)
UNIT_DIFFUSION: Piecewise[Matrix] = Piecewise.everywhere((ONE, ZERO, ZERO, ONE))
NO_REACTION = Piecewise.everywhere(ZERO)


@dataclass(frozen=True)
class Field:
    """A velocity that is stated by expressions.

    components : in length unit per time unit.
    solenoidal : whether the divergence vanishes inside every region, exactly; the normal component may
        jump where regions meet.
    stream : the stream function psi with components (d psi/dy, -d psi/dx), if that is what was stated;
        where psi is continuous across regions, so is the normal component.
    """

    components: Piecewise[Vector]
    solenoidal: bool
    stream: Piecewise[Expression] | None = None


@dataclass(frozen=True)
class Samples:
    """A velocity that is known at points, to be interpolated between them.

    points : (n, 2) at least three different points, not on one line, in the user's length unit.
    vectors : (n, 2) the velocities there, in length unit per time unit.
    """

    points: NDArray[np.float64]
    vectors: NDArray[np.float64]

    def __eq__(self, other: object) -> bool:
        """Whether all points and vectors are equal."""
        if not isinstance(other, Samples):
            return NotImplemented
        return np.array_equal(self.points, other.points) and np.array_equal(self.vectors, other.vectors)


Velocity: TypeAlias = Field | Samples


@dataclass(frozen=True)
class Operator:
    """The coefficients of the operator.

    diffusion : K, in length unit squared per time unit; its symmetric part is positive definite.
    velocity : b, ``None`` if there is none.
    reaction : c, per time unit; of any sign.
    form : whether the flow stands in the operator as b . grad u or as div(b u).
    """

    diffusion: Piecewise[Matrix] = UNIT_DIFFUSION
    velocity: Velocity | None = None
    reaction: Piecewise[Expression] = NO_REACTION
    form: Form = "convective"


LAPLACIAN = Operator()
"""-div grad u."""


@dataclass(frozen=True)
class Norm:
    """The norm of the space of functions.

    kind : ``"h1"``: length_scale^2 int |grad v|^2 + int v^2; ``"seminorm"``: int |grad v|^2;
        ``"diffusion"``: the gradient weighted by the symmetric part of K.
    length_scale : in the user's length unit; 1 for the kinds that have none.
    """

    kind: NormKind = "h1"
    length_scale: float = 1.0


PLAIN = Norm()
"""The norm of H1."""
