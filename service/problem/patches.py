"""The parts of a domain in which each entry of a coefficient holds."""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
import shapely
from numpy.typing import NDArray

from service.problem.border import domain_polygons
from service.problem.covers import AreaCover, EdgeCover, area_cover
from service.problem.domain import PlaneDomain

NEAR = 1e-12
"""What is this close to a patch, in scaled units, touches it."""

Names = tuple[str | None, ...]
"""The names of the entries of a coefficient, in order of precedence, ``None`` last."""


@dataclass(frozen=True)
class Patches:
    """A domain with its regions, in units of 2**exponent of the user's length unit."""

    domain: PlaneDomain
    exponent: int

    @cached_property
    def whole(self) -> shapely.Geometry:
        """The domain; made valid where rounded points on its edges have crossed other edges in the last bits."""
        pieces = domain_polygons(self.domain, self.exponent)
        return shapely.union_all(np.where(shapely.is_valid(pieces), pieces, shapely.make_valid(pieces)))

    @cached_property
    def regions(self) -> dict[str, shapely.Polygon]:
        """The regions."""
        scaled = {r.name: [np.ldexp(ring, -self.exponent) for ring in r.rings] for r in self.domain.regions}
        return {name: shapely.Polygon(outer, holes) for name, (outer, *holes) in scaled.items()}

    def cover(self, names: Names, number: int) -> AreaCover:
        """Where an entry holds: nowhere, if those before it take all."""
        name = names[number]
        earlier = np.array([self.regions[known] for known in names[:number] if known is not None], dtype=object)
        if name is None:
            return area_cover(shapely.difference(self.whole, shapely.union_all(earlier)))
        region = self.regions[name]
        above = shapely.union_all(earlier[shapely.intersects(earlier, region)])
        return area_cover(shapely.difference(shapely.intersection(self.whole, region), above))

    def edge_cover(self, part: int, names: Names, number: int) -> EdgeCover:
        """The edges of a boundary part on which an entry holds; those between two patches count for both."""
        ends = np.ldexp(self.domain.points[self.domain.edges[self.domain.part == part]], -self.exponent)
        start, end = ends[:, 0], ends[:, 1]
        if len(names) == 1:
            return EdgeCover(start, end)
        middle = shapely.points(start + (end - start) / 2)
        beside: NDArray[np.bool_] = shapely.dwithin(self.cover(names, number).geometry, middle, NEAR)
        return EdgeCover(start[beside], end[beside])
