"""Triangles inside given boundary pieces: the one place that talks to gmsh."""

from collections.abc import Iterator
from contextlib import contextmanager

import gmsh
import numpy as np
from numpy.typing import NDArray

from service.errors import ComputationError
from service.meshing.sizing import GROWTH, SizeFunction

_FRONTAL = 6
_OPTIONS = {
    "General.Terminal": 0,
    "General.NumThreads": 1,
    "Geometry.Tolerance": 1e-15,
    "Mesh.Algorithm": _FRONTAL,
    "Mesh.MeshSizeExtendFromBoundary": 0,
    "Mesh.MeshSizeFromPoints": 0,
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
) -> tuple[NDArray[np.float64], NDArray[np.int64]]:
    """Triangulate the region to the left of the boundary pieces, none of which is cut.

    Parameters
    ----------
    points : (k, 2) ends of the boundary pieces, in mesh units.
    edges : (m, 2) the pieces; those of one loop follow one another.
    loops : (m,) loop of each piece; one outer loop, the others holes.
    sizes : element size inside.

    Returns
    -------
    All points (the given ones first, bit for bit) and the counter-clockwise triangles, (nc, 3).

    Raises
    ------
    ComputationError
        ``meshing-failed`` when gmsh gives up or changes the boundary.
    """
    try:
        with _session():
            _describe(points, edges, loops, sizes)
            gmsh.model.mesh.generate(2)
            tags, flat, _ = gmsh.model.mesh.getNodes()
            _, corners = gmsh.model.mesh.getElementsByType(2)
    except ComputationError:
        raise
    except Exception as error:
        raise meshing_failed(f"The mesh generator stopped: {error}.") from error
    tags = np.asarray(tags, dtype=np.int64)
    found = np.asarray(flat, dtype=np.float64).reshape(-1, 3)[:, :2]
    given = len(points)
    if len(tags) < given or not np.array_equal(tags, np.arange(1, len(tags) + 1)):
        raise meshing_failed("The mesh generator lost points of the boundary.")
    if np.abs(found[:given] - points).max() > 1e-12:
        raise meshing_failed("The mesh generator moved points of the boundary.")
    triangles = np.asarray(corners, dtype=np.int64).reshape(-1, 3) - 1
    if not len(triangles):
        raise meshing_failed("The mesh generator returned no triangle.")
    everything = np.vstack([points, found[given:]])
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


def _describe(
    points: NDArray[np.float64], edges: NDArray[np.int64], loops: NDArray[np.int64], sizes: SizeFunction
) -> None:
    """Tell gmsh the boundary, one transfinite line with two nodes for each piece, and the sizes."""
    kernel = gmsh.model.geo
    for tag, (x, y) in enumerate(points.tolist(), start=1):
        kernel.addPoint(x, y, 0.0, tag=tag)
    for tag, (start, end) in enumerate(edges.tolist(), start=1):
        kernel.addLine(start + 1, end + 1, tag)
        kernel.mesh.setTransfiniteCurve(tag, 2)
    curves = [kernel.addCurveLoop((np.flatnonzero(loops == loop) + 1).tolist()) for loop in np.unique(loops)]
    kernel.addPlaneSurface(curves, 1)
    kernel.synchronize()
    gmsh.option.setNumber("Mesh.MeshSizeMax", sizes.size)
    if len(sizes.values):
        _set_field(sizes)


def _set_field(sizes: SizeFunction) -> None:
    """The size function as a background field: for each group linear growth with the distance."""
    field = gmsh.model.mesh.field
    grown = []
    for value, members in zip(sizes.values.tolist(), sizes.members, strict=True):
        distance = field.add("Distance")
        field.setNumbers(distance, "PointsList", (members + 1).tolist())
        threshold = field.add("Threshold")
        settings = {"InField": distance, "SizeMin": value, "SizeMax": sizes.size}
        settings |= {"DistMin": 0.0, "DistMax": (sizes.size - value) / GROWTH}
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
