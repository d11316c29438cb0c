"""A simplicial mesh whose element shapes are known to full relative accuracy."""

from dataclasses import dataclass, field
from functools import cached_property

import numpy as np
from numpy.typing import NDArray


def no_regions() -> NDArray[np.bool_]:
    """Memberships before the number of cells is known."""
    return np.empty((0, 0), dtype=bool)


def no_field() -> NDArray[np.float64]:
    """No values at vertices."""
    return np.empty((0, 0))


@dataclass(frozen=True)
class Mesh:
    """Simplices in d dimensions, in normalised coordinates.

    Next to a strongly graded corner, differences of vertex coordinates lose all digits; the bounds
    therefore never use coordinates, only ``spans``, which the mesh generator carries along exactly.

    points : (nv, d) vertices, approximate; one mesh unit is ``unit`` of the user's length unit.
    cells : (nc, d+1) vertex numbers, ascending in each row.
    spans : (nc, d, d); ``spans[c, :, i]`` is the vector from vertex 0 to vertex i+1 of cell c (the
        Jacobian of the map from the unit simplex).
    facets : (nf, d) vertex numbers, ascending in each row.
    cell_facets : (nc, d+1) facet opposite to vertex i.
    facet_cells : (nf, 2) the cells on both sides, the second -1 on the boundary.
    part : (nf,) index of the boundary part, -1 inside.
    unit : length of one mesh unit in the user's length unit, a power of two.
    shape_error : bound of the spectral norm of F where the true Jacobian of every cell is (I + F) spans:
        x -> (I + F) x takes the computed cell to the true one.
    origin : (d,) the user's coordinates of the mesh's origin: a point x of the mesh is the user's
        origin + unit x. Empty for a mesh that has no user's coordinates.
    regions : (nc, R) whether the cell lies inside each region of the domain, outside otherwise; (nc, 0)
        if not given.
    nodal : (nv, k) values at the vertices of a field that is linear on every cell and is carried along; (0, 0) if
        there is none.
    """

    points: NDArray[np.float64]
    cells: NDArray[np.int64]
    spans: NDArray[np.float64]
    facets: NDArray[np.int64]
    cell_facets: NDArray[np.int64]
    facet_cells: NDArray[np.int64]
    part: NDArray[np.int64]
    unit: float
    shape_error: float
    origin: tuple[float, ...] = ()
    regions: NDArray[np.bool_] = field(default_factory=no_regions)
    nodal: NDArray[np.float64] = field(default_factory=no_field)

    def __post_init__(self) -> None:
        """Memberships of every cell in no region."""
        if not self.regions.size:
            object.__setattr__(self, "regions", np.empty((len(self.cells), 0), dtype=bool))

    @cached_property
    def inverses(self) -> NDArray[np.float64]:
        """(nc, d, d) inverses of the spans."""
        return np.asarray(np.linalg.inv(self.spans))

    @cached_property
    def jacobian(self) -> NDArray[np.float64]:
        """(nc,) absolute determinants of the spans."""
        return np.asarray(np.abs(np.linalg.det(self.spans)))

    @property
    def dimension(self) -> int:
        """Space dimension d."""
        return int(self.cells.shape[1]) - 1
