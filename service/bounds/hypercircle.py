"""Dual norms from above: sup of L(v) / |v| for loads L(v) = int f v + int_F g v, by any flux that carries the load.

For s in H(div) with s . n = g off the Dirichlet part, L(v) = int s . grad v + (f + div s) v, so

    |L|^2 <= int G^-1 s . s + int (f + div s)^2 / w0,

the hypercircle of Prager and Synge (Quart. Appl. Math. 5 (1947) 241-269). Where w0 = 0 the divergence must be met, and
what rounding leaves of it is paid for by Poincare's inequality on cells and Friedrichs' on the domain.
"""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.bounds.flux import FluxSpace
from service.bounds.minorant import poincare_constants
from service.bounds.rounding import gamma, up
from service.forms.form import Form

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Load:
    """A load of polynomials.

    source : (nc, q) moments of f times the Jacobian against the orthonormal polynomials of the unit simplex.
    facet : (nf, f) coefficients of g in the facet functions of the flux space.
    source_error : (nc, q) bounds of the errors of the moments.
    """

    source: Array
    facet: Array
    source_error: Array


def dual_norm(norm: Form, order: int, load: Load, response: Array, friedrichs: float | None) -> float:
    """A proved bound of |L| in the dual of the norm, without the rounding of facet values.

    Parameters
    ----------
    norm : a form not above the squared norm, G constant on cells.
    order : of the fluxes; the load's polynomials have at most this order.
    response : (nc, q) moments of w0 w times the Jacobian, w near the solution of (w, v) = L(v); zeros where w0 = 0.
    friedrichs : C with |v|_L2 <= C |v| where w0 = 0, else None.
    """
    space = FluxSpace(norm, order)
    count = space.reference.divergence.shape[0]
    source = np.pad(load.source, ((0, 0), (0, count - load.source.shape[1])))
    error = np.pad(load.source_error, ((0, 0), (0, count - load.source_error.shape[1])))
    target = np.pad(response, ((0, 0), (0, count - response.shape[1])))
    fields = space.equilibrate((target - source)[:, :, None], load.facet[:, :, None])
    spread, doubt = space.divergence_moments(fields)
    residual = source + spread[:, :, 0]
    doubt = doubt[:, :, 0] + error + gamma(4) * np.abs(residual)
    energy = space.energy_gram(fields)
    jacobian = norm.jacobian
    # Beyond the mean, errors of the divergence cost a small field without flow out of the cell.
    beyond = np.sum(doubt[:, 1:] ** 2, axis=1) / jacobian
    if friedrichs is None:
        main = math.fsum(np.sum(residual**2, axis=1) / (norm.potential[:, 0] * jacobian))
        mean = math.sqrt(math.fsum(doubt[:, 0] ** 2 / (norm.potential[:, 0] * jacobian)))
    else:
        main = 0.0
        beyond = beyond + np.sum(residual[:, 1:] ** 2, axis=1) / jacobian
        mean = friedrichs * math.sqrt(math.fsum((np.abs(residual[:, 0]) + doubt[:, 0]) ** 2 / jacobian))
    strayed = math.sqrt(math.fsum(poincare_constants(norm) ** 2 * beyond))
    field = (energy.matrix[0, 0] + energy.error[0, 0]) * (1 + space.metric_error)
    return up((math.sqrt(up(field + main * (1 + 1e-12))) + strayed + mean) * (1 + 1e-12))
