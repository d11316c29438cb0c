"""The boundary of a laid-out domain, prepared for the outlines of regions that meet it."""

from dataclasses import dataclass

import numpy as np
import shapely
from numpy.typing import NDArray

from service.problem.domain import PlaneDomain
from service.problem.positions import Points
from service.problem.segments import Indices, box_pairs, boxes, distances, inner, norms


@dataclass(frozen=True)
class Border:
    """The boundary edges of a domain; all lengths scaled by 2**-exponent.

    points : (n, 2) the vertices of the domain.
    start, end : (m,) vertex numbers of the edges.
    line : (m,) the straight edge of the shape that each edge is a part of.
    ends : (q, 2) vertex numbers of the ends of each straight edge of the shape.
    tolerance : what is closer to a vertex or to an edge lies on it.
    exponent : power of two that leads back to the user's length unit.
    tree : the bounding boxes of the edges, widened by the tolerance.
    """

    points: Points
    start: Indices
    end: Indices
    line: Indices
    ends: Indices
    tolerance: float
    exponent: int
    tree: shapely.STRtree

    def on_lines(self, points: Points, line: Indices) -> Points:
        """The points of straight edges that are closest to given points, (k, 2)."""
        start, end = self.points[self.ends[line, 0]], self.points[self.ends[line, 1]]
        along = (end - start) / norms(end - start)[:, None]
        normal = np.stack([-along[:, 1], along[:, 0]], axis=1)
        feet: Points = points - inner(points - start, normal)[:, None] * normal
        return feet

    def nearest_lines(self, points: Points) -> Indices:
        """The straight edge within the tolerance that is closest to each point, -1 where there is none, (k,)."""
        found = np.full(len(points), -1, dtype=np.int64)
        for batch in box_pairs(self.tree, boxes(points, points, 0.0)):
            point, edge = batch.first, batch.second
            gaps = distances(points[point], self.points[self.start[edge]], self.points[self.end[edge]])
            order = np.lexsort((edge, gaps, point))
            order = order[gaps[order] <= self.tolerance]
            first = order[np.diff(point[order], prepend=-1) != 0]
            found[point[first]] = self.line[edge[first]]
        return found


def border_of(domain: PlaneDomain, exponent: int, tolerance: float) -> Border:
    """Prepare the boundary of a domain that has no regions yet.

    tolerance : in scaled units, less than half the distance of any two parts of the boundary.
    """
    points = np.ldexp(domain.points, -exponent)
    start, end = domain.edges.T
    divides = domain.hosts[:, 0] != np.arange(len(points))
    ends = np.stack([start, end], axis=1)
    for vertex in (start, end):
        ends = np.where(divides[vertex][:, None], domain.hosts[vertex], ends)
    ends, line = np.unique(ends, axis=0, return_inverse=True)
    tree = shapely.STRtree(boxes(points[start], points[end], tolerance))
    return Border(points, start, end, line.reshape(-1), ends, tolerance, exponent, tree)


def domain_polygons(domain: PlaneDomain, exponent: int) -> NDArray[np.object_]:
    """The connected pieces of a domain as scaled polygons."""
    rings = shapely.linearrings(np.ldexp(domain.points[domain.edges[:, 0]], -exponent), indices=domain.loops)
    found: NDArray[np.object_] = shapely.polygons(rings, indices=np.cumsum(shapely.is_ccw(rings)) - 1)
    return found
