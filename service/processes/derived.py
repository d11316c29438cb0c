"""What follows from the constants: stability, quasi-optimality, and the numbers that say which term dominates."""

import math
from collections.abc import Mapping
from typing import Any

import numpy as np

from service.bounds.enclosure import Enclosure
from service.bounds.pointwise import controls
from service.bounds.rounding import up
from service.constants.structure import symmetric
from service.constants.words import inverse_operator_unit
from service.forms.bilinear import bilinear
from service.forms.operator import Discrete
from service.meshing.mesh import Mesh
from service.meshing.quality import edge_vectors
from service.problem.request import Request

JSON = dict[str, Any]


def margins(request: Request, found: Mapping[str, Enclosure]) -> JSON:
    """Stability and quasi-optimality from the enclosures of coercivity, inf-sup and continuity found so far."""
    result: JSON = {}
    below = {name: found[name].lower for name in ("inf_sup", "coercivity") if name in found}
    best = max(below, key=lambda name: below[name], default="")
    if best and below[best] > 0:
        bound = float(up(1 / below[best]))
        result["stability"] = {
            "bound": bound,
            "unit": inverse_operator_unit(request),
            "by": best,
            "statement": f"||u|| <= {bound:.6g} ||L|| for every load L, ||L|| = sup L(v) / ||v||",
        }
    above = found["continuity"].upper if "continuity" in found else math.inf
    if below.get("coercivity", 0.0) > 0 and math.isfinite(above):
        ratio = float(up(above / below["coercivity"]))
        factor = float(up(math.sqrt(ratio))) if symmetric(request) else ratio
        by = "the root of continuity / coercivity (a is symmetric)" if symmetric(request) else "continuity / coercivity"
        result["quasi_optimality"] = {
            "bound": factor,
            "unit": "1",
            "by": by,
            "statement": (
                f"||u - u_h|| <= {factor:.6g} ||u - w_h|| for the Galerkin solution u_h and every w_h of any "
                "conforming discrete space"
            ),
        }
    return result


def flow_numbers(request: Request, mesh: Mesh) -> JSON:
    """Peclet and Damkoehler numbers, bounded from above on the domain; none without flow and reaction.

    With k the smallest eigenvalue of the symmetric part of K, h a cell's longest edge and L the diagonal of the
    domain's bounding box: mesh Peclet number |b| h / (2 k), domain Peclet number |b| L / k, Damkoehler numbers
    |c| L^2 / k and |c| L / |b|.
    """
    if request.operator.velocity is None and all(value.exact == 0 for value in request.operator.reaction.values):
        return {}
    form = bilinear(Discrete(request, mesh))
    unit = mesh.unit
    tensor = controls(form.diffusion, 2)
    least = np.linalg.eigvalsh((tensor + tensor.swapaxes(2, 3)) / 2)[:, :, 0].min(axis=1) - form.diffusion_error
    speed = np.linalg.norm(controls(form.velocity, 2), axis=2).max(axis=1) + form.velocity_error
    reaction = np.abs(controls(form.reaction, 2)).max(axis=1) + form.reaction_error
    # On cells that are too large to bound the coefficients there is nothing to say yet.
    if not (np.all(least > 0) and np.all(np.isfinite(speed)) and np.all(np.isfinite(reaction))):
        return {}
    size = float(np.linalg.norm(np.ptp(request.domain.points, axis=0)))
    result: JSON = {}
    # In mesh units the coefficients are K / unit^2 and b / unit.
    drift = speed * unit / (least * unit**2)
    if np.any(form.velocity):
        edges = np.linalg.norm(edge_vectors(mesh), axis=2).max(axis=1) * unit
        result["peclet"] = {
            "domain": float(np.max(drift)) * size,
            "mesh": float(np.max(drift * edges)) / 2,
            "mesh_size_for_unit_mesh_peclet": 2 / float(np.max(drift)),
            "unit_of_mesh_size": request.length_unit,
            "statement": "domain: |b| L / k, mesh: |b| h / (2 k) on the mesh of the last step; L is the diagonal of "
            "the bounding box, k the smallest eigenvalue of K, h the longest edge; largest values, bounded from above",
        }
    if np.any(form.reaction):
        result["damkoehler"] = {"diffusive": float(np.max(reaction / (least * unit**2))) * size**2}
        statement = "diffusive: |c| L^2 / k"
        if np.any(form.velocity):
            fastest = float(np.max(speed)) * unit
            result["damkoehler"]["advective"] = float(np.max(reaction)) * size / fastest
            statement += ", advective: largest |c| times L over the largest |b|"
        statement += "; in conservative form c + div b for c; L the diagonal of the bounding box"
        result["damkoehler"]["statement"] = statement
    return result

