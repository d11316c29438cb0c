"""Checks that triangles cover a domain exactly once and respect its outline."""

import numpy as np
from numpy.typing import NDArray

from service.meshing.facets import build_facets, find_facets
from service.meshing.fill import meshing_failed
from service.meshing.outline import Outline
from service.meshing.triangulation import Triangulation
from service.meshing.vectors import cross


def outline_area(outline: Outline) -> float:
    """Area of the polygon, holes subtracted, in square mesh units."""
    start, end = outline.points[outline.edges].swapaxes(0, 1)
    return float(cross(start, end).sum() / 2)


def check_cover(mesh: Triangulation, outline: Outline, interfaces: NDArray[np.int64]) -> None:
    """The triangles have the polygon's area and Euler characteristic, and sides on the interfaces.

    Parameters
    ----------
    mesh : the triangles.
    outline : what they should cover.
    interfaces : (k, 2) ends of the pieces into which the interfaces are cut.

    Raises
    ------
    ComputationError
        ``meshing-failed`` when it is not so.
    """
    doubled = cross(mesh.spans[:, :, 0], mesh.spans[:, :, 1])
    area = outline_area(outline)
    start, end = outline.points[outline.edges].swapaxes(0, 1)
    length = np.hypot(*(end - start).T).sum()
    if (doubled <= 0).any() or abs(doubled.sum() / 2 - area) > 1e-12 * area + 1e-13 * length:
        raise meshing_failed("The triangles do not cover the domain exactly once.")
    vertices = len(np.unique(mesh.cells))
    facets = (3 * len(mesh.cells) + len(mesh.boundary)) / 2
    euler = vertices - facets + len(mesh.cells)
    if vertices != len(mesh.points) or euler != 2 - len(np.unique(outline.loops)):
        raise meshing_failed("The triangles do not fit together like the domain.")
    if len(interfaces):
        try:
            find_facets(build_facets(np.sort(mesh.cells, axis=1)).vertices, interfaces)
        except ValueError as error:
            raise meshing_failed("The triangles do not end at the outlines of regions.") from error
