"""Sets of the plane as unions of boxes that can be made smaller where it matters."""

from dataclasses import dataclass
from typing import Protocol

import numpy as np
import shapely
from numpy.typing import NDArray

from service.problem.positions import Points
from service.problem.segments import Indices, Mask

Corners = NDArray[np.float64]

START = 4
"""A plane set is covered by START x START boxes at first."""

MOST_SAMPLES = 1000
"""Most vertices of a plane set that are among its sample points."""


@dataclass(frozen=True)
class Boxes:
    """Boxes with sides along the axes.

    first, second : (2, n) opposite corners, in scaled units.
    """

    first: Corners
    second: Corners

    @property
    def count(self) -> int:
        """How many there are."""
        return int(self.first.shape[1])

    def chosen(self, mask: Mask | Indices) -> "Boxes":
        """Some of them, by number or by mask."""
        return Boxes(self.first[:, mask], self.second[:, mask])


class Cover(Protocol):
    """A set, and boxes whose union contains it."""

    def start(self) -> Boxes:
        """A few boxes; none if the set is empty."""

    def refined(self, boxes: Boxes) -> Boxes:
        """Smaller boxes that contain what these boxes contain of the set."""

    def near(self, boxes: Boxes) -> Mask:
        """Which boxes may meet the set, (n,); quick, and true for some that do not."""

    def witnesses(self, boxes: Boxes) -> tuple[Mask, Points]:
        """Which boxes contain a part of the set with a positive measure, (n,), and a point of each such part."""

    def samples(self) -> Points:
        """Some points of the set, (k, 2)."""

    def probes(self, boxes: Boxes) -> Points:
        """Centres and corners of boxes that belong to the set, (k, 2)."""


@dataclass(frozen=True)
class AreaCover:
    """A closed set with inner points.

    geometry : polygons, in scaled units, prepared.
    """

    geometry: shapely.Geometry

    def start(self) -> Boxes:
        if self.geometry.is_empty:
            return Boxes(np.zeros((2, 0)), np.zeros((2, 0)))
        x0, y0, x1, y1 = self.geometry.bounds
        x, y = np.linspace(x0, x1, START + 1), np.linspace(y0, y1, START + 1)
        i, j = np.indices((START, START)).reshape(2, -1)
        return Boxes(np.stack([x[i], y[j]]), np.stack([x[i + 1], y[j + 1]]))

    def refined(self, boxes: Boxes) -> Boxes:
        low, high = boxes.first, boxes.second
        middle = _centres(boxes).T
        parts = [
            Boxes(np.stack([a[0][0], b[0][1]]), np.stack([a[1][0], b[1][1]]))
            for a in ((low, middle), (middle, high))
            for b in ((low, middle), (middle, high))
        ]
        return Boxes(
            np.concatenate([part.first for part in parts], axis=1),
            np.concatenate([part.second for part in parts], axis=1),
        )

    def near(self, boxes: Boxes) -> Mask:
        found: Mask = shapely.intersects(self.geometry, shapely.box(*boxes.first, *boxes.second))
        return found

    def witnesses(self, boxes: Boxes) -> tuple[Mask, Points]:
        common = shapely.intersection(self.geometry, shapely.box(*boxes.first, *boxes.second))
        large = shapely.area(common) > 0
        return large, shapely.get_coordinates(shapely.point_on_surface(common[large]))

    def samples(self) -> Points:
        corners: Points = np.unique(shapely.get_coordinates(self.geometry), axis=0)
        return corners[:: 1 + len(corners) // MOST_SAMPLES]

    def probes(self, boxes: Boxes) -> Points:
        points = np.concatenate([_centres(boxes), boxes.first.T])
        inside: Mask = shapely.intersects_xy(self.geometry, points[:, 0], points[:, 1])
        return points[inside]


@dataclass(frozen=True)
class EdgeCover:
    """Straight segments; a box is the bounding box of a piece of one, whose ends are its corners.

    start_points, end_points : (n, 2) scaled.
    """

    start_points: Points
    end_points: Points

    def start(self) -> Boxes:
        return Boxes(self.start_points.T, self.end_points.T)

    def refined(self, boxes: Boxes) -> Boxes:
        middle = _centres(boxes).T
        return Boxes(
            np.concatenate([boxes.first, middle], axis=1),
            np.concatenate([middle, boxes.second], axis=1),
        )

    def near(self, boxes: Boxes) -> Mask:
        return np.ones(boxes.count, dtype=bool)

    def witnesses(self, boxes: Boxes) -> tuple[Mask, Points]:
        return np.ones(boxes.count, dtype=bool), _centres(boxes)

    def samples(self) -> Points:
        return np.concatenate([self.start_points, self.end_points])[: 2 * MOST_SAMPLES]

    def probes(self, boxes: Boxes) -> Points:
        return _centres(boxes)


def area_cover(geometry: shapely.Geometry) -> AreaCover:
    """A cover of polygons; lines and points among them are dropped."""
    parts = shapely.get_parts(shapely.get_parts(geometry))
    whole = shapely.union_all(parts[shapely.get_type_id(parts) == shapely.GeometryType.POLYGON])
    shapely.prepare(whole)
    return AreaCover(whole)


def _centres(boxes: Boxes) -> Points:
    """(n, 2)."""
    return (boxes.first + (boxes.second - boxes.first) / 2).T
