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

    points : (n, 2) vertices in the user's length unit, ends of boundary selectors included.
    edges : (m, 2) indices into ``points``; the domain lies to the left of each edge. The edges of
        one loop follow one another; outer loops run counter-clockwise, holes clockwise.
    loops : (m,) number of the loop each edge belongs to; loop 0 is an outer loop.
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
