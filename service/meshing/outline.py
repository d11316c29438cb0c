"""What there is to mesh, in mesh units: boundary and interfaces, and what their vertices ask for."""

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from service.errors import ComputationError
from service.meshing.corners import interior_angles, layer_counts, singular_exponents
from service.meshing.normalise import Frame, normalise, on_hosts
from service.meshing.regions import membership
from service.meshing.scales import local_scales
from service.meshing.sizing import vertex_sizes
from service.meshing.stars import find_stars
from service.meshing.transmission import HIGHEST, transmission_exponents
from service.problem.domain import PlaneDomain, Region

Diffusion = Callable[[NDArray[np.bool_]], NDArray[np.float64]]
"""Scalar diffusion, (n,), in any unit, of places with the given memberships in regions, (n, R)."""

MOST_LAYERS = 24
"""Layers at a vertex of interfaces: they end at 4⁻²⁴ of an element, below what rounding lets any corner go to."""

CLOSER = 4.0
"""How much smaller elements are at parts that weigh by themselves."""

_SMALLEST_EXPONENT = 0.05
"""Exponents below this ask for more layers than there may be in any case, and for numbers out of range."""


@dataclass(frozen=True)
class Outline:
    """Boundary and interfaces.

    frame : the way back to the user's coordinates.
    points, edges, loops, part, interfaces, hosts, regions : as in ``PlaneDomain``, points in mesh units.
    wanted : (n,) size that each vertex asks for.
    scales : (n,) distance over which the solution changes at each vertex.
    exponents : (n, k) singular exponents at each vertex, at least 0.05; rows filled up with 2.
    """

    frame: Frame
    points: NDArray[np.float64]
    edges: NDArray[np.int64]
    loops: NDArray[np.int64]
    part: NDArray[np.int64]
    interfaces: NDArray[np.int64]
    hosts: NDArray[np.int64]
    regions: tuple[Region, ...]
    wanted: NDArray[np.float64]
    scales: NDArray[np.float64]
    exponents: NDArray[np.float64]

    @cached_property
    def segments(self) -> NDArray[np.int64]:
        """Start and end of the edges, then of the interfaces, (m + k, 2)."""
        return np.vstack([self.edges, self.interfaces])

    @cached_property
    def sides(self) -> NDArray[np.int64]:
        """Edges, and interfaces in both directions, so that there is domain on the left, (m + 2k, 2)."""
        both: NDArray[np.int64] = np.vstack([self.segments, self.interfaces[:, ::-1]])
        return both

    def layers(self, sizes: NDArray[np.float64], target: float) -> NDArray[np.int64]:
        """Number of layers at every vertex, (n,), for elements of the given sizes, (n,), at them."""
        counts: NDArray[np.int64] = layer_counts(self.exponents, (sizes / self.scales)[:, None], target).max(axis=1)
        return self.limit_layers(counts, MOST_LAYERS)

    def limit_layers(self, layers: NDArray[np.int64], most: int) -> NDArray[np.int64]:
        """No more than ``most`` layers at vertices of interfaces, the others as they are."""
        limited = layers.copy()
        limited[self.interfaces] = np.minimum(layers[self.interfaces], most)
        return limited


def describe(
    domain: PlaneDomain, size: float, diffusion: Diffusion | None, close: frozenset[int] = frozenset()
) -> Outline:
    """The outline of a domain.

    Parameters
    ----------
    domain : the domain.
    size : the largest size, in mesh units.
    diffusion : diffusion in the regions; equal everywhere if None.
    close : numbers of the boundary parts at whose vertices elements are smaller by ``CLOSER``.

    Raises
    ------
    ComputationError
        ``boundary-touches-itself`` when two loops share a vertex.
    ValueError
        When the edges do not form closed loops, a point is not in use, or a diffusion is not positive.
    """
    everyone = np.unique(domain.edges)
    if not all(np.array_equal(np.sort(end), everyone) for end in domain.edges.T):
        if len(np.unique(domain.edges[:, 0])) < len(domain.edges):
            raise touching_loops(domain)
        raise ValueError("every point of the boundary must start one edge and end one")
    if len(np.union1d(everyone, domain.interfaces)) != len(domain.points):
        raise ValueError("every point must be used by an edge or an interface")
    frame = normalise(domain.points)
    points = on_hosts(frame.points, domain.hosts)
    dirichlet = np.array([part.condition == "dirichlet" for part in domain.parts])[domain.part]
    wanted = vertex_sizes(points, domain.edges, size, domain.interfaces)
    wanted[domain.edges[np.isin(domain.part, list(close))]] /= CLOSER
    return Outline(
        frame=frame,
        points=points,
        edges=domain.edges,
        loops=domain.loops,
        part=domain.part,
        interfaces=domain.interfaces,
        hosts=domain.hosts,
        regions=domain.regions,
        wanted=wanted,
        scales=local_scales(points, domain.edges, dirichlet),
        exponents=_exponents(domain, frame, wanted, dirichlet, diffusion),
    )


def touching_loops(domain: PlaneDomain) -> ComputationError:
    """The refusal of a boundary that passes one point twice: no mesh is graded for such points yet."""
    numbers, times = np.unique(domain.edges[:, 0], return_counts=True)
    x, y = domain.points[numbers[times > 1][0]]
    return ComputationError(
        "boundary-touches-itself",
        "The boundary touches itself",
        f"Two pieces of the boundary meet in the point ({x:.9g}, {y:.9g}). Such points are not meshed in this "
        "version: move one of the pieces by a small distance, or join them along an edge.",
    )


def _exponents(
    domain: PlaneDomain,
    frame: Frame,
    wanted: NDArray[np.float64],
    dirichlet: NDArray[np.bool_],
    diffusion: Diffusion | None,
) -> NDArray[np.float64]:
    """The smallest exponent at vertices with one material, all below 2 at the others, (n, k)."""
    # The given points, scaled only: their differences are as exact as they can be.
    points = domain.points / frame.unit
    angles = interior_angles(points, domain.edges)
    single = singular_exponents(angles, domain.edges, dirichlet)
    stars = find_stars(points, domain.edges, domain.interfaces, dirichlet)
    single[stars.vertices[stars.closed]] = 1.0
    if diffusion is None or not len(stars.vertices):
        return single[:, None]
    # The circle of radius ``wanted`` meets no other segments than those that end in its centre.
    radius = 0.5 * wanted[stars.vertices][:, None, None]
    places = frame.points[stars.vertices][:, None] + radius * stars.middles
    inside = membership(places.reshape(-1, 2), domain.regions, frame)
    kappa = np.asarray(diffusion(inside), dtype=np.float64).reshape(stars.widths.shape)
    if not (np.isfinite(kappa) & (kappa > 0)).all():
        raise ValueError("diffusion must be positive")
    several = (kappa != kappa[:, :1]).any(axis=1)
    found = transmission_exponents(
        stars.widths[several], kappa[several], stars.closed[several], stars.dirichlet[several]
    )
    exponents = np.full((len(points), found.shape[1]), HIGHEST)
    exponents[:, 0] = single
    exponents[stars.vertices[several]] = np.maximum(found, _SMALLEST_EXPONENT)
    return exponents
