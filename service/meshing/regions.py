"""Which regions a place lies in."""

import numpy as np
import shapely
from numpy.typing import NDArray

from service.meshing.normalise import Frame
from service.problem.domain import PlaneDomain, Region


def membership(places: NDArray[np.float64], regions: tuple[Region, ...], frame: Frame) -> NDArray[np.bool_]:
    """Whether each place, (k, 2) in mesh units, lies inside each region, (k, R).

    Meant for places away from the outlines of the regions; on them the answer is arbitrary.
    """
    inside = np.zeros((len(places), len(regions)), dtype=bool)
    for column, region in zip(inside.T, regions, strict=True):
        polygon = _polygon(region.rings, frame)
        shapely.prepare(polygon)
        column[:] = shapely.contains_xy(polygon, places[:, 0], places[:, 1])
    return inside


def check_areas(areas: NDArray[np.float64], inside: NDArray[np.bool_], domain: PlaneDomain, frame: Frame) -> None:
    """Compare the area that each region has in the mesh with that of its rings.

    Parameters
    ----------
    areas : (nc,) area of each triangle in mesh units.
    inside : (nc, R) whether it lies in each region.

    Raises
    ------
    ValueError
        When they differ, so that triangles are partly inside: the interfaces are not the outlines.
    """
    loops = [domain.points[domain.edges[domain.loops == loop, 0]] for loop in np.unique(domain.loops)]
    whole = _polygon(tuple(loops), frame)
    rounding = 2.0**-50 * np.abs(domain.points).max() / frame.unit
    for column, region in zip(inside.T, domain.regions, strict=True):
        polygon = _polygon(region.rings, frame)
        allowed = 1e-10 + rounding * (polygon.length + whole.length)
        if abs(areas[column].sum() - shapely.intersection(polygon, whole).area) > allowed:
            raise ValueError(f"the outline of region {region.name!r} does not consist of interfaces")


def _polygon(rings: tuple[NDArray[np.float64], ...], frame: Frame) -> shapely.Polygon:
    """The polygon in mesh units."""
    outer, *holes = ((ring - frame.origin) / frame.unit for ring in rings)
    return shapely.Polygon(outer, holes)
