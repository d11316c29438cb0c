"""A plane domain with straight edges and named boundary parts: what a problem document describes."""

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

Condition = Literal["dirichlet", "neumann"]


@dataclass(frozen=True)
class BoundaryPart:
    """A named piece of the boundary and the condition that holds on it."""

    name: str
    condition: Condition


@dataclass(frozen=True)
class PlaneDomain:
    """A bounded open set whose boundary consists of straight edges.

    Edges meet at their ends only. Two loops may touch in single vertices; such a vertex is one point,
    and the edges of both loops use it.

    points : (n, 2) different vertices in the user's length unit, ends of boundary selectors included;
        vertices of the shape keep every bit, also those at straight angles.
    edges : (m, 2) indices into ``points``; the domain lies to the left of each edge. The edges of
        one loop follow one another; outer loops run counter-clockwise, holes clockwise. Every loop is
        a simple polygon.
    loops : (m,) number of the loop each edge belongs to, ascending; loop 0 is an outer loop, and the
        holes of a component follow its outer loop.
    part : (m,) index into ``parts`` for each edge.
    parts : the named boundary parts, in the order of the problem document.
    components : number of connected pieces of the open set (the numerics demand 1).
    """

    points: NDArray[np.float64]
    edges: NDArray[np.int64]
    loops: NDArray[np.int64]
    part: NDArray[np.int64]
    parts: tuple[BoundaryPart, ...]
    components: int = 1

    def __eq__(self, other: object) -> bool:
        """Whether all members are equal, arrays element by element."""
        if not isinstance(other, PlaneDomain):
            return NotImplemented
        arrays = ("points", "edges", "loops", "part")
        return (self.parts, self.components) == (other.parts, other.components) and all(
            np.array_equal(getattr(self, name), getattr(other, name)) for name in arrays
        )
