"""The sides of regions as chains of vertices that are cut and joined to vertices step by step."""

from dataclasses import dataclass, replace

import numpy as np

from service.problem.positions import Points
from service.problem.segments import Indices, Mask, inner, subdivide


class RegionError(Exception):
    """Regions that cannot be laid out, for which somebody must be told.

    region : number of the region that is blamed.
    point : scaled, where it happens.
    sentence : what is wrong; ``{point}`` and ``{tolerance}`` stand for the place and the distance.
    """

    def __init__(self, region: int, point: Points, sentence: str) -> None:
        super().__init__(sentence)
        self.region = region
        self.point = point
        self.sentence = sentence


@dataclass(frozen=True)
class Drawing:
    """The outlines of regions, ring by ring; all lengths scaled.

    points : (v, 2) vertices; those of the domain come first.
    line : (v,) for vertices that divide a straight boundary edge (other than the domain's own) the number
        of that edge, -1 for all others.
    between : (v, 2) for crossings of sides the ends of the side that stays straight there, for all others
        the vertex itself twice.
    start, end : (k,) vertex numbers of the sides; those of one ring follow one another.
    ring : (k,) number of the ring.
    region : (r,) number of the region of each ring.
    active : (k,) whether the side comes near the domain; the others are left as they are.
    """

    points: Points
    line: Indices
    between: Indices
    start: Indices
    end: Indices
    ring: Indices
    region: Indices
    active: Mask

    def owner(self, side: int) -> int:
        """The region a side belongs to."""
        return int(self.region[self.ring[side]])

    def with_vertices(self, points: Points, line: Indices, between: Indices) -> "Drawing":
        """The same with further vertices; ``between`` is -1 for those that lie between no others."""
        own = len(self.points) + np.arange(len(points))
        between = np.where(between < 0, own[:, None], between)
        return replace(
            self,
            points=np.concatenate([self.points, points]),
            line=np.concatenate([self.line, line]),
            between=np.concatenate([self.between, between]),
        )

    def cut(self, side: Indices, vertex: Indices) -> "Drawing":
        """The same with sides that pass through further vertices; pairs may repeat, and a side's own ends occur."""
        inner_ones = (vertex != self.start[side]) & (vertex != self.end[side])
        side, vertex = np.unique(np.stack([side[inner_ones], vertex[inner_ones]]), axis=1)
        start, end = self.points[self.start[side]], self.points[self.end[side]]
        order = np.lexsort((inner(self.points[vertex] - start, end - start), side))
        pieces = subdivide(self.start, self.end, side[order], vertex[order])
        return replace(
            self,
            start=pieces.start,
            end=pieces.end,
            ring=self.ring[pieces.parent],
            active=self.active[pieces.parent],
        )


@dataclass(frozen=True)
class Strokes:
    """The different segments of which the active sides of a drawing consist.

    start, end : (s,) vertex numbers, the smaller one first.
    order : (a,) the active sides, grouped by stroke.
    first : (s + 1,) where the group of each stroke begins.
    """

    start: Indices
    end: Indices
    order: Indices
    first: Indices

    def sides(self, stroke: Indices) -> tuple[Indices, Indices]:
        """All sides that lie on given strokes: positions in the list given, and the sides, (c,) each."""
        counts = self.first[stroke + 1] - self.first[stroke]
        position = np.repeat(np.arange(len(stroke)), counts)
        rank = np.arange(len(position)) - (np.cumsum(counts) - counts)[position]
        return position, self.order[self.first[stroke][position] + rank]


def strokes_of(drawing: Drawing) -> Strokes:
    """Every segment once, however many sides lie on it."""
    side = np.flatnonzero(drawing.active)
    low = np.minimum(drawing.start[side], drawing.end[side])
    high = np.maximum(drawing.start[side], drawing.end[side])
    size = len(drawing.points)
    keys, stroke = np.unique(low * size + high, return_inverse=True)
    order = np.argsort(stroke, kind="stable")
    first = np.searchsorted(stroke[order], np.arange(len(keys) + 1))
    return Strokes(keys // size, keys % size, side[order], first)
