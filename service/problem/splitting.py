"""Edges cut at the ends of selections, and the owner of every piece."""

from dataclasses import dataclass

import numpy as np

from service.problem.outline import Outline
from service.problem.positions import Points
from service.problem.segments import Indices, Mask, subdivide
from service.problem.selection import Edges, Spans, joined


@dataclass(frozen=True)
class Split:
    """The boundary with the ends of all selections as vertices.

    points : (n, 2) vertices in the user's length unit; those of the outline come first, unchanged.
    start, end : (m,) vertex numbers of the sub-edges, in the order of the outline.
    loop : (m,) number of the loop.
    hosts : (a, 2) the ends of the edge of the outline on which each added vertex lies, the last ``a`` ones.
    begin, stop : (k,) for every span of every selection the sub-edge it begins with and the one after its
        last.
    bounds : (s + 1,) the spans of selection i are those from bounds[i] to bounds[i + 1].
    """

    points: Points
    start: Indices
    end: Indices
    loop: Indices
    hosts: Indices
    begin: Indices
    stop: Indices
    bounds: Indices

    def chosen(self, selection: int) -> Mask:
        """The sub-edges a selection consists of, (m,)."""
        spans = slice(self.bounds[selection], self.bounds[selection + 1])
        change = np.zeros(len(self.start) + 1, dtype=np.int64)
        np.add.at(change, self.begin[spans], 1)
        np.add.at(change, self.stop[spans], -1)
        chosen: Mask = np.cumsum(change[:-1]) > 0
        return chosen


def split(outline: Outline, edges: Edges, selections: list[Spans]) -> Split:
    """Cut the edges of an outline so that every selection consists of whole sub-edges.

    Cuts closer together than the tolerance become one, the first of them along the edge.
    """
    every = joined(selections)
    edge = every.edge
    length = edges.length[edge]
    owner = np.concatenate([edge, edge])
    distance = np.concatenate([every.low, every.high])
    inside = np.flatnonzero((distance > 0) & (distance < np.concatenate([length, length])))
    inside = inside[np.lexsort((distance[inside], owner[inside]))]
    new = np.diff(owner[inside], prepend=-1) != 0
    new |= np.diff(distance[inside], prepend=-np.inf) > edges.tolerance
    first = inside[new]
    vertex = len(outline.points) + np.arange(len(first))
    cut = subdivide(outline.start, outline.end, owner[first], vertex)

    # For each end of a span the number of the sub-edge that begins there.
    cuts_before = np.searchsorted(owner[first], np.arange(len(outline.start)))
    node = np.empty(len(owner), dtype=np.int64)
    node[: len(edge)] = cut.first[edge]
    node[len(edge) :] = np.append(cut.first, len(cut.start))[edge + 1]
    node[inside] = cut.first[owner[inside]] + np.cumsum(new) - cuts_before[owner[inside]]
    added = np.ldexp(np.concatenate([every.low_point, every.high_point])[first], outline.exponent) + 0.0
    return Split(
        points=np.concatenate([outline.points, added]),
        start=cut.start,
        end=cut.end,
        loop=outline.loop[cut.parent],
        hosts=np.stack([outline.start[owner[first]], outline.end[owner[first]]], axis=1),
        begin=node[: len(edge)],
        stop=node[len(edge) :],
        bounds=np.cumsum([0, *(len(spans.edge) for spans in selections)]),
    )
