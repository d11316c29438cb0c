"""A velocity known at points: linear between its values at the vertices of one mesh, which all other meshes refine."""

from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import LinearNDInterpolator, NearestNDInterpolator
from scipy.spatial import cKDTree

from service.errors import ComputationError
from service.forms.coefficients import user_points
from service.forms.operator import Discrete
from service.meshing.generate import mesh_domain
from service.meshing.mesh import Mesh
from service.meshing.quality import edge_vectors
from service.meshing.refine import refine
from service.problem.operator import Samples
from service.problem.request import Request

TARGET = 1e-3
"""Accuracy for which the carrying mesh is graded to corners; the same for every tolerance, so that the field is."""

SIZES = (0.02, 0.5)
"""Finest and coarsest carrying mesh, in mesh units."""


@dataclass(frozen=True)
class Carrier:
    """The meshes of a problem with a sampled velocity: one that carries it, and its uniform refinements.

    The field is linear on the cells of the first mesh, about as fine as the samples lie; inside the samples' hull its
    values at the vertices are interpolated on a Delaunay triangulation of the samples, outside they are those of the
    nearest sample.
    """

    request: Request
    max_cells: int

    @property
    def samples(self) -> Samples:
        """The velocity as stated."""
        velocity = self.request.operator.velocity
        assert isinstance(velocity, Samples)
        return velocity

    @cached_property
    def meshes(self) -> list[Mesh]:
        """The carrying mesh and the refinements made so far."""
        domain, points = self.request.domain, self.samples.points
        distances = np.asarray(cKDTree(points).query(points, k=2)[0])
        spacing = float(np.median(distances[:, 1]))
        coarse = mesh_domain(domain, size=SIZES[1], target=TARGET, max_cells=self.max_cells)
        size = float(np.clip(2 * spacing / coarse.unit, *SIZES))
        mesh = mesh_domain(domain, size=size, target=TARGET, max_cells=self.max_cells)
        values, _ = self._values(user_points(mesh, mesh.points))
        return [replace(mesh, nodal=values)]

    def _values(self, places: NDArray[np.float64]) -> tuple[NDArray[np.float64], NDArray[np.bool_]]:
        """Velocities at places (n, 2), and which of them lie outside the samples' hull."""
        centre, size = self.samples.points.mean(axis=0), float(np.ptp(self.samples.points, axis=0).max())
        points, wanted = (self.samples.points - centre) / size, (places - centre) / size
        values = np.asarray(LinearNDInterpolator(points, self.samples.vectors)(wanted))
        outside: NDArray[np.bool_] = np.asarray(np.any(np.isnan(values), axis=1))
        nearest = np.asarray(NearestNDInterpolator(points, self.samples.vectors)(wanted))
        return np.where(outside[:, None], nearest, values), outside

    def mesh_at(self, size: float) -> Mesh:
        """The first mesh of the family with edges of at most a length in mesh units.

        Raises
        ------
        ComputationError
            ``mesh-too-large`` beyond ``max_cells``.
        """
        for level in range(64):
            if level == len(self.meshes):
                if 4 * len(self.meshes[-1].cells) > self.max_cells:
                    break
                self.meshes.append(refine(self.meshes[-1]))
            # Meshes keep to the sizes asked for but for a little.
            if float(np.max(np.linalg.norm(edge_vectors(self.meshes[level]), axis=2))) <= 1.5 * size:
                return self.meshes[level]
        raise ComputationError(
            "mesh-too-large",
            "The mesh would be too large",
            f"Refining the mesh that carries the sampled velocity takes more than {self.max_cells} triangles.",
        )

    def remarks(self) -> list[str]:
        """What the user should know of the interpolation: its mesh, its divergence, and where it extrapolates."""
        mesh = self.meshes[0]
        _, outside = self._values(user_points(mesh, mesh.points))
        divergence = Discrete(self.request, mesh).divergence()
        assert divergence is not None
        largest = float(np.max(np.abs(divergence.modes[:, 0])))
        mean = float(np.sqrt(np.average(divergence.modes[:, 0] ** 2, weights=mesh.jacobian)))
        unit = f"1/{self.request.time_unit}"
        remarks = [
            f"velocity: {len(self.samples.points)} samples, interpolated linearly on {len(mesh.cells)} triangles. The "
            f"interpolated field's divergence is at most {largest:.3g} {unit} in size, {mean:.3g} {unit} in the root "
            "mean square; it enters the forms, and the constants hold for that field."
        ]
        if outside.any():
            remarks.append(
                f"velocity: {int(outside.sum())} of {len(outside)} vertices lie outside the samples; the nearest "
                "sample counts there."
            )
        return remarks
