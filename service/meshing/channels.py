"""Places where the domain is so narrow that long elements would be flat, and the sizes asked for there.

Rounding allowances grow with the square of (longest edge / smallest height) of a triangle. In a channel
of width w the height is at most about w, so edges may be no longer than a multiple of w. Only facing
edges matter: the shortest way from one to the other starts to the left of the first and arrives from
the left of the second. Where a channel between two straight edges is narrowest there is a vertex, or
the edges are parallel; so pieces of edges that are short against the gap to the nearest facing edge
see a gap that hardly changes along them.
"""

import numpy as np
import shapely
from numpy.typing import NDArray

from service.meshing.vectors import cross

ASPECT = 150.0
"""Longest edge wanted relative to the width of the channel; triangles come out up to a third flatter."""


def channel_sizes(
    points: NDArray[np.float64],
    edges: NDArray[np.int64],
    wanted: NDArray[np.float64],
    size: float,
    limit: int,
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Points along the narrow channels, (k, 2), and the sizes that they ask for, (k,), k ≤ ``limit``.

    Where more than ``limit`` points were needed, all of them ask for larger sizes, so that triangles are
    flatter. No triangle in a corner of angle θ can be less flat than 1/θ: a corner sharper than
    1/``ASPECT`` is left alone within the size that its vertex asks for.

    Parameters
    ----------
    points : (n, 2) vertices in mesh units.
    edges : (m, 2) start and end of each edge, the domain on its left; interfaces in both directions.
    wanted : (n,) size that each vertex asks for.
    size : the largest size.
    limit : largest number of points, and of pieces looked at.
    """
    if limit < 1:
        return np.empty((0, 2)), np.empty(0)
    aspect = ASPECT
    while True:
        search = _Search(points, edges, wanted, size, aspect)
        while len(search.edge) and search.halve(limit):
            pass
        if not len(search.edge):
            places, sizes = zip(*search.found, strict=True)
            return np.concatenate(places), np.concatenate(sizes)
        aspect *= max(2.0, search.demand() / limit)


class _Search:
    """Pieces of edges, halved until none is longer than ``aspect`` times the gap in front of it.

    edge, left, right : edge and parameters of the ends of the pieces that are not done, (k,) each.
    found : midpoints of pieces that lie along a channel, and aspect times their gaps.
    """

    def __init__(
        self,
        points: NDArray[np.float64],
        edges: NDArray[np.int64],
        wanted: NDArray[np.float64],
        size: float,
        aspect: float,
    ) -> None:
        self._points, self._edges, self._wanted, self._size = points, edges, wanted, size
        self._aspect = aspect
        self._tree = shapely.STRtree(shapely.linestrings(points[edges]))
        self._start, self._step = points[edges[:, 0]], points[edges[:, 1]] - points[edges[:, 0]]
        self._length = np.hypot(*self._step.T)
        self.edge = np.arange(len(edges))
        self.left, self.right = np.zeros(len(edges)), np.ones(len(edges))
        self.found: list[tuple[NDArray[np.float64], NDArray[np.float64]]] = []
        self._gap = np.empty(0)

    def halve(self, limit: int) -> bool:
        """Keep what is short enough, halve the rest; whether at most ``limit`` new pieces came of it."""
        extent = self._length[self.edge] * (self.right - self.left)
        at = np.stack([self.left, self.right], axis=1)[:, :, None]
        ends = self._start[self.edge][:, None] + at * self._step[self.edge][:, None]
        gap, sharp = self._look(shapely.linestrings(ends), extent)
        split = sharp | (extent > self._aspect * gap)
        ready = ~split & (self._aspect * gap < self._size)
        self.found.append((ends[ready].mean(axis=1), self._aspect * gap[ready]))
        middle = (self.left + self.right) / 2
        self.edge = np.tile(self.edge[split], 2)
        self.left, self.right = (
            np.concatenate([self.left[split], middle[split]]),
            np.concatenate([middle[split], self.right[split]]),
        )
        self._gap = np.tile(gap[split], 2)
        return self._count() <= limit

    def demand(self) -> float:
        """About how many points there would be in the end."""
        extent = self._length[self.edge] * (self.right - self.left)
        return self._count() + float((extent / (self._aspect * self._gap)).sum())

    def _count(self) -> int:
        return len(self.edge) + sum(len(sizes) for _, sizes in self.found)

    def _look(
        self, pieces: NDArray[np.object_], extent: NDArray[np.float64]
    ) -> tuple[NDArray[np.float64], NDArray[np.bool_]]:
        """Gap between each piece and the nearest edge that faces it, inf where that is too far to matter.

        Also whether the piece ends in a corner too sharp for its length.
        """
        edges, step = self._edges, self._step
        reach = 3 / self._aspect * np.minimum(extent, self._size)
        piece, other = self._tree.query(pieces, predicate="dwithin", distance=reach)
        apart = (edges[other] != edges[self.edge[piece]]) & (edges[other] != edges[self.edge[piece], ::-1])
        piece, other = piece[apart.any(axis=1)], other[apart.any(axis=1)]
        corner = self._common_corner(piece, other)

        gap = np.full(len(pieces), np.inf)
        near, far = piece[corner < 0], other[corner < 0]
        ways = shapely.shortest_line(pieces[near], self._tree.geometries[far])
        way = np.diff(shapely.get_coordinates(ways).reshape(-1, 2, 2), axis=1)[:, 0]
        faces = (cross(step[self.edge[near]], way) > 0) & (cross(step[far], -way) > 0)
        np.minimum.at(gap, near[faces], np.hypot(*way[faces].T))

        piece, other, corner = piece[corner >= 0], other[corner >= 0], corner[corner >= 0]
        own = self._from_corner(self.edge[piece], corner)
        away = self._from_corner(other, corner)
        narrow = np.abs(cross(own, away)) * self._aspect < (own * away).sum(axis=1)
        narrow &= (cross(step[self.edge[piece]], away) > 0) & (cross(step[other], own) > 0)
        sharp = np.zeros(len(pieces), dtype=bool)
        sharp[piece[narrow & (extent[piece] > self._wanted[corner])]] = True
        return gap, sharp

    def _common_corner(self, piece: NDArray[np.int64], other: NDArray[np.int64]) -> NDArray[np.int64]:
        """The vertex at which a piece touches another edge, −1 where it does not, (number of pairs,)."""
        corner = np.full(len(piece), -1)
        for end, at_end in ((0, self.left == 0), (1, self.right == 1)):
            vertex = self._edges[self.edge[piece], end]
            meets = at_end[piece] & (self._edges[other] == vertex[:, None]).any(axis=1)
            corner[meets] = vertex[meets]
        return corner

    def _from_corner(self, edge: NDArray[np.int64], corner: NDArray[np.int64]) -> NDArray[np.float64]:
        """Vectors from the vertex ``corner`` to the other ends of the edges."""
        return np.where((self._edges[edge, 0] == corner)[:, None], self._step[edge], -self._step[edge])
