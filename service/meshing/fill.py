"""Triangles inside given boundary pieces: the one place that talks to gmsh."""

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import replace

import gmsh
import numpy as np
from numpy.typing import NDArray

from service.errors import ComputationError
from service.meshing.sizing import SizeFunction

_FRONTAL = 6
_LINE = 1
_SURFACE = 1
_ROTATION = np.array([[np.cos(1.0), np.sin(1.0)], [-np.sin(1.0), np.cos(1.0)]])
_MANY = 500
_OPTIONS = {
    "General.Terminal": 0,
    "General.NumThreads": 1,
    "Geometry.Tolerance": 1e-15,
    "Mesh.Algorithm": _FRONTAL,
    "Mesh.MeshSizeExtendFromBoundary": 0,
    "Mesh.MeshSizeFromPoints": 0,
    "Mesh.MeshOnlyEmpty": 1,
    "Mesh.Renumber": 0,
    "Mesh.RandomFactor": 1e-12,
    "Mesh.RandomSeed": 1,
}


def meshing_failed(detail: str) -> ComputationError:
    """The error of a domain that cannot be meshed: what happened, with the advice appended."""
    advice = "Look for almost touching edges or very short ones, simplify the outline, or remove details."
    return ComputationError("meshing-failed", "The domain could not be meshed", f"{detail} {advice}")


def fill(
    points: NDArray[np.float64],
    edges: NDArray[np.int64],
    loops: NDArray[np.int64],
    sizes: SizeFunction,
    interfaces: NDArray[np.int64] | None = None,
) -> tuple[NDArray[np.float64], NDArray[np.int64]]:
    """Triangulate the region to the left of the boundary pieces, none of which is cut.

    Parameters
    ----------
    points : (k, 2) ends of the pieces, in mesh units.
    edges : (m, 2) the pieces; those of one loop follow one another.
    loops : (m,) loop of each piece; one outer loop, the others holes.
    sizes : element size inside.
    interfaces : (j, 2) pieces inside, which become sides of triangles; their ends are no inner points of
        other pieces.

    Returns
    -------
    All points (the given ones first, bit for bit) and the counter-clockwise triangles, (nc, 3).

    Raises
    ------
    ComputationError
        ``meshing-failed`` when gmsh gives up or changes the boundary.
    """
    # Thousands of pieces on each of two lines parallel to an axis take gmsh minutes, on slanted lines seconds.
    rotation = _ROTATION if len(edges) > _MANY else np.eye(2)
    try:
        with _session():
            shown = points @ rotation
            taken = _describe(shown, edges, loops)
            if interfaces is not None and len(interfaces):
                _embed(shown, edges, interfaces, taken + 1)
            _set_sizes(replace(sizes, points=sizes.points @ rotation), taken)
            gmsh.model.mesh.generate(2)
            tags, flat, _ = gmsh.model.mesh.getNodes(2, _SURFACE)
            _, corners = gmsh.model.mesh.getElementsByType(2, _SURFACE)
    except Exception as error:
        raise meshing_failed(f"The mesh generator stopped: {error}.") from error
    inner = np.asarray(flat, dtype=np.float64).reshape(-1, 3)[:, :2] @ rotation.T
    # The given points have the tags 1 … k.
    number = np.full(max([len(points), *tags]) + 1, -1, dtype=np.int64)
    number[1 : len(points) + 1] = np.arange(len(points))
    number[tags] = len(points) + np.arange(len(tags))
    triangles = number[np.asarray(corners, dtype=np.int64).reshape(-1, 3)]
    if not len(triangles) or (triangles < 0).any():
        raise meshing_failed("The mesh generator returned no mesh of the interior.")
    everything = np.vstack([points, inner])
    return everything, _counter_clockwise(everything, triangles)


@contextmanager
def _session() -> Iterator[None]:
    """A fresh gmsh with fixed options, always finalised."""
    gmsh.initialize(readConfigFiles=False, interruptible=False)
    try:
        for name, value in _OPTIONS.items():
            gmsh.option.setNumber(name, value)
        yield
    finally:
        gmsh.finalize()


def _describe(points: NDArray[np.float64], edges: NDArray[np.int64], loops: NDArray[np.int64]) -> int:
    """Tell gmsh the boundary, one discrete curve with its mesh for each loop; returns their number."""
    flat = np.column_stack([points, np.zeros(len(points))])
    curves = []
    for loop, curve in enumerate(np.unique(loops).tolist(), start=1):
        pieces = edges[loops == curve]
        first, rest = int(pieces[0, 0]), pieces[1:, 0]
        gmsh.model.addDiscreteEntity(0, loop)
        gmsh.model.setCoordinates(loop, *flat[first])
        gmsh.model.mesh.addNodes(0, loop, [first + 1], flat[first])
        gmsh.model.addDiscreteEntity(1, loop, [loop, loop])
        gmsh.model.mesh.addNodes(1, loop, rest + 1, flat[rest].ravel())
        gmsh.model.mesh.addElementsByType(loop, _LINE, [], (pieces + 1).ravel())
        curves.append(gmsh.model.geo.addCurveLoop([loop]))
    gmsh.model.geo.addPlaneSurface(curves, _SURFACE)
    gmsh.model.geo.synchronize()
    return len(curves)


def _embed(points: NDArray[np.float64], edges: NDArray[np.int64], interfaces: NDArray[np.int64], curve: int) -> None:
    """All interfaces as the mesh of one discrete curve in the surface.

    gmsh takes nodes and sides of a curve as given, whether or not the sides form a line.
    """
    flat = np.column_stack([points, np.zeros(len(points))])
    inner = np.setdiff1d(interfaces, edges)
    gmsh.model.addDiscreteEntity(1, curve, [])
    gmsh.model.mesh.addNodes(1, curve, inner + 1, flat[inner].ravel())
    gmsh.model.mesh.addElementsByType(curve, _LINE, [], (interfaces + 1).ravel())
    gmsh.model.mesh.embed(1, [curve], 2, _SURFACE)


def _set_sizes(sizes: SizeFunction, taken: int) -> None:
    """The size function as a background field: for each group linear growth with the distance.

    Points with tags above ``taken`` are added for the vertices that ask for small elements.
    """
    gmsh.option.setNumber("Mesh.MeshSizeMax", sizes.size)
    if not len(sizes.values):
        return
    flat = np.column_stack([sizes.points, np.zeros(len(sizes.points))])
    field = gmsh.model.mesh.field
    grown = []
    for value, members in zip(sizes.values.tolist(), sizes.members, strict=True):
        tags = range(taken + 1, taken + 1 + len(members))
        taken += len(members)
        for tag, vertex in zip(tags, members.tolist(), strict=True):
            gmsh.model.addDiscreteEntity(0, tag)
            gmsh.model.setCoordinates(tag, *flat[vertex])
        distance = field.add("Distance")
        field.setNumbers(distance, "PointsList", list(tags))
        threshold = field.add("Threshold")
        settings = {"InField": distance, "SizeMin": value, "SizeMax": sizes.size}
        settings |= {"DistMin": 0.0, "DistMax": sizes.reach(value)}
        for name, setting in settings.items():
            field.setNumber(threshold, name, setting)
        grown.append(threshold)
    smallest = field.add("Min")
    field.setNumbers(smallest, "FieldsList", grown)
    field.setAsBackgroundMesh(smallest)


def _counter_clockwise(points: NDArray[np.float64], triangles: NDArray[np.int64]) -> NDArray[np.int64]:
    """Turn all triangles over if they run clockwise; gmsh gives all the same sense."""
    first, second = points[triangles[:, 1:]].swapaxes(0, 1) - points[triangles[:, 0]]
    area = (first[:, 0] * second[:, 1] - first[:, 1] * second[:, 0]).sum()
    return triangles if area > 0 else np.ascontiguousarray(triangles[:, ::-1])
