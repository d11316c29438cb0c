"""A plane domain with straight edges and named boundary parts: what a problem document describes."""

from dataclasses import dataclass, field
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from service.problem.expressions.expression import Expression
from service.problem.piecewise import Piecewise

Condition = Literal["dirichlet", "neumann", "robin"]


@dataclass(frozen=True)
class BoundaryPart:
    """A named piece of the boundary and the condition that holds on it.

    dirichlet: functions vanish there; neumann: they are free, and the diffusive flux is prescribed;
    robin: so is the flux plus ``exchange`` times the function.

    exchange : of a Robin part alpha, in length unit per time unit, of any sign; ``None`` for the others.
    """

    name: str
    condition: Condition
    exchange: Piecewise[Expression] | None = None


@dataclass(frozen=True)
class Region:
    """A named piece of the plane, in which coefficients differ from those elsewhere.

    name : as in the problem document.
    rings : outer ring and holes, (k, 2) vertices each in the user's length unit, not closed, counter-clockwise
        outside and clockwise inside; the region may reach beyond the domain. The rings pass every point of
        the domain that lies on them, so that the interfaces are parts of them bit by bit.
    """

    name: str
    rings: tuple[NDArray[np.float64], ...]

    def __eq__(self, other: object) -> bool:
        """Whether name and rings are equal, arrays element by element."""
        if not isinstance(other, Region):
            return NotImplemented
        return (self.name, len(self.rings)) == (other.name, len(other.rings)) and all(
            np.array_equal(mine, theirs) for mine, theirs in zip(self.rings, other.rings, strict=True)
        )


def _no_interfaces() -> NDArray[np.int64]:
    return np.empty((0, 2), dtype=np.int64)


@dataclass(frozen=True)
class PlaneDomain:
    """A bounded open set whose boundary consists of straight edges.

    Edges meet at their ends only. Two loops may touch in single vertices; such a vertex is one point,
    and the edges of both loops use it.

    points : (n, 2) different vertices in the user's length unit, ends of boundary selectors and of
        interfaces included; vertices of the shape keep every bit, also those at straight angles.
    edges : (m, 2) indices into ``points``; the domain lies to the left of each edge. The edges of
        one loop follow one another; outer loops run counter-clockwise, holes clockwise. Every loop is
        a simple polygon.
    loops : (m,) number of the loop each edge belongs to, ascending; loop 0 is an outer loop, and the
        holes of a component follow its outer loop.
    part : (m,) index into ``parts`` for each edge.
    parts : the named boundary parts, in the order of the problem document.
    components : number of connected pieces of the open set (the numerics demand 1).
    interfaces : (k, 2) indices into ``points``: straight segments inside the domain on which coefficients
        may jump. Segments and edges meet at common points only. A point that no edge uses is inside the
        domain.
    regions : the named regions. The part of their boundaries that is inside the domain consists of
        interfaces. Corners of regions keep every bit unless they lie, to within the tolerance, on the boundary
        or on an earlier corner; sides that pass a point within the tolerance are led through it.
    hosts : (n, 2) the two points between which each point lies: for a vertex that divides a straight edge
        the ends of that edge; for a crossing of two sides of regions the ends of the piece of one of them
        that stays straight there (the first one stated, if both its ends are points of the domain that divide
        nothing; else the other one, if its are); for every other point itself twice. Such a vertex is
        A + t (B - A) for the t nearest to its coordinates, on the edge exactly and not only to the last bit.
        The ends lie between no other points. Empty: no such vertices.
    """

    points: NDArray[np.float64]
    edges: NDArray[np.int64]
    loops: NDArray[np.int64]
    part: NDArray[np.int64]
    parts: tuple[BoundaryPart, ...]
    components: int = 1
    interfaces: NDArray[np.int64] = field(default_factory=_no_interfaces)
    regions: tuple[Region, ...] = ()
    hosts: NDArray[np.int64] = field(default_factory=_no_interfaces)

    def __eq__(self, other: object) -> bool:
        """Whether all members are equal, arrays element by element."""
        if not isinstance(other, PlaneDomain):
            return NotImplemented
        arrays = ("points", "edges", "loops", "part", "interfaces", "hosts")
        rest = ("parts", "components", "regions")
        return all(getattr(self, name) == getattr(other, name) for name in rest) and all(
            np.array_equal(getattr(self, name), getattr(other, name)) for name in arrays
        )
