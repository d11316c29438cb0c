"""The members ``operator`` and ``norm`` of a problem document."""

from functools import partial
from typing import Any

from service.problem.coefficients import (
    Names,
    matrix_document,
    piecewise_document,
    read_matrix,
    read_piecewise,
    read_scalar,
    scalar_document,
)
from service.problem.operator import LAPLACIAN, PLAIN, Form, Matrix, Norm, NormKind, Operator
from service.problem.piecewise import Piecewise
from service.problem.positions import LARGEST_COORDINATE
from service.problem.reading import Place, read_members, read_number
from service.problem.shapes import SMALLEST_SIZE
from service.problem.velocity import read_velocity, velocity_document

FORMS: dict[str, Form] = {"convective": "convective", "conservative": "conservative"}

NORMS: dict[str, NormKind] = {"h1": "h1", "seminorm": "seminorm", "diffusion": "diffusion"}


def read_operator(value: object, place: Place, names: Names) -> Operator | None:
    """``{diffusion, velocity, reaction, form}``, all optional.

    names : of the regions of the domain.
    """
    members = read_members(value, place, (), ("diffusion", "velocity", "reaction", "form"))
    if members is None:
        return None
    flow = "velocity" in members.values
    velocity = read_velocity(members.values["velocity"], place.at("velocity"), names) if flow else None
    return Operator(
        diffusion=members.get("diffusion", partial(_read_diffusion, names=names), LAPLACIAN.diffusion),
        velocity=velocity,
        reaction=members.get("reaction", partial(read_scalar, names=names), LAPLACIAN.reaction),
        form=members.get("form", _read_form, LAPLACIAN.form),
    )


def read_norm(value: object, place: Place) -> Norm | None:
    """``{kind, length_scale}``; only the kind h1 has a length scale."""
    members = read_members(value, place, (), ("kind", "length_scale"))
    if members is None:
        return None
    kind: NormKind | None = members.read("kind", _read_kind)
    length = members.read("length_scale", _read_length)
    if kind not in (None, "h1") and "length_scale" in members.values:
        place.at("length_scale").refuse("Only the kind h1 has a length scale.")
    return Norm(kind or PLAIN.kind, PLAIN.length_scale if length is None else length)


def operator_document(operator: Operator) -> dict[str, Any]:
    """The canonical form: every member except a velocity that does not exist."""
    velocity = {} if operator.velocity is None else {"velocity": velocity_document(operator.velocity)}
    return {
        "diffusion": piecewise_document(operator.diffusion, matrix_document),
        **velocity,
        "reaction": scalar_document(operator.reaction),
        "form": operator.form,
    }


def norm_document(norm: Norm) -> dict[str, Any]:
    """The canonical form."""
    return {"kind": norm.kind, **({"length_scale": norm.length_scale} if norm.kind == "h1" else {})}


def _read_diffusion(value: object, place: Place, names: Names) -> Piecewise[Matrix] | None:
    return read_piecewise(value, place, read_matrix, names)


def _read_form(value: object, place: Place) -> Form | None:
    if not isinstance(value, str) or value not in FORMS:
        place.refuse(f"Must be one of: {', '.join(FORMS)}.")
        return None
    return FORMS[value]


def _read_kind(value: object, place: Place) -> NormKind | None:
    if not isinstance(value, str) or value not in NORMS:
        place.refuse(f"Must be one of: {', '.join(NORMS)}.")
        return None
    return NORMS[value]


def _read_length(value: object, place: Place) -> float | None:
    return read_number(value, place, SMALLEST_SIZE, LARGEST_COORDINATE)
