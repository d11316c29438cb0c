"""The bilinear form of a problem on a mesh, not symmetric, in the user's units (see ``operator``)."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.forms.coefficients import widened
from service.forms.operator import Discrete
from service.meshing.mesh import Mesh

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Bilinear:
    """a(u, v) = int K grad u . grad v + (b . grad u) v + c u v + sum_F int_F r u v, coefficients by modes.

    dirichlet : (nf,) facets on which functions vanish.
    diffusion, velocity, reaction, facet : (nc, m, 2, 2), (nc, m, 2), (nc, m), (nf, mf).
    diffusion_error, velocity_error, reaction_error, facet_error : bounds (nc,), (nc,), (nc,), (nf,) of the distance of
        the true coefficients from these polynomials, in the 2-norm of matrices and vectors.
    """

    mesh: Mesh
    dirichlet: NDArray[np.bool_]
    diffusion: Array
    velocity: Array
    reaction: Array
    facet: Array
    diffusion_error: Array
    velocity_error: Array
    reaction_error: Array
    facet_error: Array


def bilinear(discrete: Discrete, skew: bool = False) -> Bilinear:
    """The form of a problem.

    Conservative form: - int u b . grad v + int (b . n) u v over the boundary off the Dirichlet part is int (b . grad u)
    v + int div b u v - int [b . n] u v. With ``skew`` half of the advection is moved to the other function:
    (b . grad u) v stands for its skew part ((b . grad u) v - u (b . grad v)) / 2, c and r are those of the symmetric
    part.
    """
    unit = discrete.mesh.unit
    matrix, matrix_error = discrete.tensor
    flow, flow_error = np.zeros((len(matrix), 1, 2)), np.zeros(len(matrix))
    parts = discrete.velocity()
    if parts:
        width = max(part.modes.shape[1] for part in parts)
        flow = np.stack([widened(part.modes, width) for part in parts], axis=2)
        flow_error = np.hypot(parts[0].error, parts[1].error)
    flow_share, share = (0.5, discrete.skew_share) if skew else (0.0, discrete.conserved)
    reaction, facet = discrete.potential(share), discrete.facet_terms(flow_share, -share)
    return Bilinear(
        discrete.mesh,
        discrete.dirichlet,
        matrix / unit**2,
        flow / unit,
        reaction.modes,
        facet.modes / unit,
        matrix_error / unit**2,
        flow_error / unit,
        reaction.error,
        facet.error / unit,
    )
