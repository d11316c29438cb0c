"""JSON Schemas of the coefficients and the norm."""

from service.problem.coefficients import LARGEST_VALUE
from service.problem.expressions.parser import DEFAULT_LIMITS
from service.problem.operator import LAPLACIAN, PLAIN
from service.problem.operator_text import FORMS, NORMS
from service.problem.positions import LARGEST_COORDINATE, MOST_POINTS
from service.problem.regions import MOST_REGIONS
from service.problem.schema_tools import JSON, array, closed_object, name, point
from service.problem.shapes import SMALLEST_SIZE


def operator_schema() -> JSON:
    """The operator -div(K grad u) + b . grad u + c u."""
    return closed_object(
        {
            "diffusion": {
                "description": "K, in length unit squared per time unit: a scalar or a matrix, not necessarily "
                "symmetric. Its symmetric part must be positive definite everywhere.",
                "oneOf": _piecewise([*_scalars(), _matrix()]),
                "default": 1,
            },
            "velocity": {
                "description": "b, in length unit per time unit. Without it there is no flow.",
                "oneOf": [*_piecewise([_vector("The components along x and y.")]), _stream_function(), _samples()],
            },
            "reaction": {**scalar_schema("c, per time unit, of any sign."), "default": 0},
            "form": {
                "type": "string",
                "description": "convective: the flow enters as b . grad u; conservative: as div(b u).",
                "enum": list(FORMS),
                "default": LAPLACIAN.form,
            },
        },
        (),
        "The operator -div(K grad u) + b . grad u + c u; without it, the Laplacian.",
        title="Operator",
        example={
            "diffusion": [[1.5, "0.2*x"], ["0.2*x", 1]],
            "velocity": {"stream_function": "0.1*y*(1 - y)"},
            "reaction": 0.003,
        },
    )


def norm_schema() -> JSON:
    """The norm of the space of functions."""
    others = [kind for kind in NORMS if kind != PLAIN.kind]
    return {
        "title": "Norm",
        "description": "The norm in which the constants are measured.",
        "oneOf": [
            closed_object(
                {
                    "kind": {"type": "string", "enum": [PLAIN.kind], "default": PLAIN.kind},
                    "length_scale": {
                        "type": "number",
                        "description": "In the length unit.",
                        "minimum": SMALLEST_SIZE,
                        "maximum": LARGEST_COORDINATE,
                        "default": PLAIN.length_scale,
                    },
                },
                (),
                "h1: the square root of length_scale^2 int |grad v|^2 + int v^2.",
            ),
            closed_object(
                {"kind": {"type": "string", "enum": others}},
                ("kind",),
                "seminorm: the gradient alone; diffusion: the gradient weighted by the symmetric part of K.",
            ),
        ],
        "example": {"kind": "h1", "length_scale": 50},
    }


def scalar_schema(description: str) -> JSON:
    """A number or an expression, or a list of such by region."""
    return {"description": description, "oneOf": _piecewise(_scalars())}


def _scalars() -> list[JSON]:
    return [
        {"type": "number", "minimum": -LARGEST_VALUE, "maximum": LARGEST_VALUE},
        {
            "type": "string",
            "description": "An expression in x and y: + - * / ^, parentheses, pi, and the functions sin, cos, tan, "
            "exp, log, sqrt, abs, min, max, tanh.",
            "minLength": 1,
            "maxLength": DEFAULT_LIMITS.length,
        },
    ]


def _piecewise(values: list[JSON]) -> list[JSON]:
    """One value everywhere, or a list of values by region."""
    value = values[0] if len(values) == 1 else {"oneOf": values}
    entry = closed_object(
        {"region": name("The name of a region of the domain."), "value": value},
        ("value",),
        "A value in a region; without a region, everywhere else.",
    )
    listed = {
        **array(entry, 1, MOST_REGIONS + 1),
        "description": "Values by region; the first entry whose region contains the place counts. Exactly one "
        "entry has no region: it holds everywhere else.",
    }
    return [*values, listed]


def _vector(description: str) -> JSON:
    return {**array({"oneOf": _scalars()}, 2, 2), "description": description}


def _matrix() -> JSON:
    return {**array(_vector("A row."), 2, 2), "description": "Two rows of two entries."}


def _stream_function() -> JSON:
    stream = scalar_schema("psi, in length unit squared per time unit: b = (d psi/dy, -d psi/dx).")
    return closed_object({"stream_function": stream}, ("stream_function",), "A velocity without divergence.")


def _samples() -> JSON:
    component = {"type": "number", "minimum": -LARGEST_VALUE, "maximum": LARGEST_VALUE}
    points = {**array(point(), 3, MOST_POINTS), "description": "Different points, not all on one line."}
    vectors = {**array(array(component, 2, 2), 3, MOST_POINTS), "description": "The velocity at each point."}
    samples = closed_object(
        {"points": points, "vectors": vectors},
        ("points", "vectors"),
        "A velocity from a flow computation, interpolated between the points.",
    )
    return closed_object({"samples": samples}, ("samples",), "A velocity that is known at points.")
