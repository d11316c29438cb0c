"""The member ``velocity`` of an operator: components, a stream function, or samples of a flow computation."""

from typing import Any

import numpy as np
from numpy.typing import NDArray

from service.problem.coefficients import (
    LARGEST_VALUE,
    Names,
    expression_document,
    piecewise_document,
    read_expression,
    read_piecewise,
    read_vector,
    vector_document,
)
from service.problem.expressions.expression import Expression
from service.problem.operator import Field, Samples, Vector, Velocity
from service.problem.positions import read_points
from service.problem.reading import Place, read_members, refuse_unknown

KINDS = ("stream_function", "samples")
"""The members that an object may have."""

FLATTEST = 1e-9
"""Smallest extent of the sample points across their longest direction, relative to their extent along it."""


def read_velocity(value: object, place: Place, names: Names) -> Velocity | None:
    """``[u, v]``, a list of such by region, ``{stream_function}`` or ``{samples}``."""
    if isinstance(value, dict):
        refuse_unknown(value, place, KINDS)
        if len(value) != 1:
            place.refuse(f"Must have exactly one of the members {', '.join(KINDS)}.")
        elif "samples" in value:
            return read_samples(value["samples"], place.at("samples"))
        elif "stream_function" in value:
            return read_stream_function(value["stream_function"], place.at("stream_function"), names)
        return None
    if not isinstance(value, list):
        place.refuse(
            "Must be an array of two components, an array of values by region, or an object with one of the "
            f"members {', '.join(KINDS)}."
        )
        return None
    components = read_piecewise(value, place, read_vector, names)
    if components is None:
        return None
    return Field(components, all(divergence(vector).exact == 0 for vector in components.values))


def read_stream_function(value: object, place: Place, names: Names) -> Field | None:
    """The velocity (d psi/dy, -d psi/dx)."""
    stream = read_piecewise(value, place, read_expression, names)
    return None if stream is None else Field(stream.map(_rotated_gradient), True, stream)


def read_samples(value: object, place: Place) -> Samples | None:
    """``{points, vectors}``, of one length; the points differ and do not lie on one line."""
    members = read_members(value, place, ("points", "vectors"))
    if members is None:
        return None
    points = members.read("points", lambda value, place: read_points(value, place, 3))
    vectors = members.read("vectors", lambda value, place: read_points(value, place, 3))
    if points is None or vectors is None:
        return None
    if float(np.abs(vectors).max()) > LARGEST_VALUE:
        row, axis = np.unravel_index(np.argmax(np.abs(vectors)), vectors.shape)
        where = place.at("vectors").at(int(row)).at(int(axis))
        where.refuse(f"Must be a number from {-LARGEST_VALUE:g} to {LARGEST_VALUE:g}.")
        return None
    if len(points) != len(vectors):
        place.at("vectors").refuse(f"There are {len(points)} points, so there must be {len(points)} vectors.")
        return None
    return Samples(points, vectors) if _spread(points, place.at("points")) else None


def divergence(vector: Vector) -> Expression:
    """The exact divergence of a field."""
    return vector[0].derivative("x") + vector[1].derivative("y")


def velocity_document(velocity: Velocity) -> Any:
    """The canonical form."""
    if isinstance(velocity, Samples):
        return {"samples": {"points": velocity.points.tolist(), "vectors": velocity.vectors.tolist()}}
    if velocity.stream is not None:
        return {"stream_function": piecewise_document(velocity.stream, expression_document)}
    return piecewise_document(velocity.components, vector_document)


def _rotated_gradient(stream: Expression) -> Vector:
    return stream.derivative("y"), -stream.derivative("x")


def _spread(points: NDArray[np.float64], place: Place) -> bool:
    """Whether points differ and span the plane; records it if they do not."""
    _, number, counts = np.unique(points, axis=0, return_inverse=True, return_counts=True)
    number = number.reshape(-1)
    repeated = np.flatnonzero(counts[number] > 1)
    if len(repeated):
        first, second = np.flatnonzero(number == number[repeated[0]])[:2].tolist()
        place.at(second).refuse(f"This point repeats the one at {place.at(first).pointer}.")
        return False
    largest = float(np.abs(points).max())
    centred = points / largest - (points / largest).mean(axis=0)
    along, across = np.linalg.svd(centred, compute_uv=False)
    if across <= FLATTEST * along:
        place.refuse("The points lie on one line; a velocity in the plane cannot be interpolated between them.")
        return False
    return True
