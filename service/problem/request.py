"""The inputs of the process ``constants``: from plain JSON values to a checked request, and back."""

from collections.abc import Collection
from dataclasses import dataclass
from functools import partial
from typing import Any

from service.errors import ProblemError
from service.problem.boundary import PartText, part_document, read_boundary
from service.problem.domain import PlaneDomain
from service.problem.operator import LAPLACIAN, PLAIN, Norm, Operator
from service.problem.outline import outline_of
from service.problem.parts import lay_out
from service.problem.reading import (
    Place,
    read_list,
    read_members,
    read_number,
    read_text,
    read_whole_number,
)
from service.problem.rings import Shape
from service.problem.shapes import read_shape, shape_document
from service.processes.base import Limits

LONGEST_TITLE = 200
TITLE_PATTERN = r"[^\u0000-\u001f\u007f]*"

LONGEST_UNIT = 20
UNIT_PATTERN = r"[A-Za-z0-9%_.*/^+'()\[\]{}-]+"
"""The characters of unit codes as UCUM writes them, for example m, km, [ft_i]."""

DEFAULT_LENGTH_UNIT = "m"
DEFAULT_TIME_UNIT = "s"

DEFAULT_TOLERANCE = 1e-3
SMALLEST_TOLERANCE = 1e-10
LARGEST_TOLERANCE = 0.5

DEFAULT_LIMITS = Limits(seconds=60.0, unknowns=2_000_000)
CAPS = Limits(seconds=3600.0, unknowns=20_000_000)
"""What a request may ask for at most, where the operator says nothing else."""

SHORTEST_SECONDS = 0.01

MOST_CONSTANTS = 100


@dataclass(frozen=True)
class Request:
    """What is to be computed.

    title : may be empty.
    length_unit, time_unit : unit codes in the manner of UCUM; all coordinates are in ``length_unit``.
    domain : the domain with its boundary parts.
    constants : ids of the constants, ``None`` for those that make sense for the problem.
    tolerance : wanted width of each enclosure, relative to its upper end.
    limits : bounds of the run.
    warnings : sentences about what was assumed.
    operator : the coefficients.
    norm : the norm of the space of functions.
    """

    title: str
    length_unit: str
    time_unit: str
    domain: PlaneDomain
    constants: tuple[str, ...] | None
    tolerance: float
    limits: Limits
    warnings: tuple[str, ...]
    operator: Operator = LAPLACIAN
    norm: Norm = PLAIN


def read_request(inputs: object, known: Collection[str], caps: Limits = CAPS) -> Request:
    """Check the plain inputs of the process ``constants``.

    inputs : parsed JSON; values that JSON cannot express (NaN, tuples) are refused as well.
    known : ids of the constants this service computes.
    caps : what a request may ask for at most.

    Raises ProblemError with every fault found; pointers start at the inputs object.
    """
    return _read(inputs, known, caps)[0]


def canonical(inputs: object, known: Collection[str], caps: Limits = CAPS) -> dict[str, Any]:
    """The inputs with every default filled in and with one spelling for what means the same.

    ``read_request`` reads the same request from it. Parameters and errors as there.
    """
    return _read(inputs, known, caps)[1]


@dataclass(frozen=True)
class _Problem:
    """The member ``problem`` as it is written."""

    title: str
    length_unit: str
    time_unit: str
    shape: Shape | None
    boundary: tuple[PartText, ...] | None


def _read(inputs: object, known: Collection[str], caps: Limits) -> tuple[Request, dict[str, Any]]:
    place = Place()
    members = read_members(inputs, place, ("problem",), ("constants", "tolerance", "limits"))
    if members is None:
        raise ProblemError(*place.faults)
    problem = members.read("problem", _read_problem)
    constants = members.read("constants", partial(_read_constants, known=known))
    tolerance = members.get("tolerance", _read_tolerance, DEFAULT_TOLERANCE)
    limits = members.get("limits", partial(_read_limits, caps=caps), default_limits(caps))
    outline = outline_of(problem.shape) if problem is not None and problem.shape is not None else None
    laid = None
    if problem is not None and problem.boundary is not None and outline is not None and _domain_sound(place):
        laid = lay_out(outline, problem.boundary, problem.length_unit)
    if place.faults or problem is None or problem.shape is None or problem.boundary is None or laid is None:
        raise ProblemError(*place.faults)
    domain, warnings = laid
    request = Request(
        title=problem.title,
        length_unit=problem.length_unit,
        time_unit=problem.time_unit,
        domain=domain,
        constants=constants,
        tolerance=tolerance,
        limits=limits,
        warnings=warnings,
    )
    return request, _document(request, problem.shape, problem.boundary)


def _domain_sound(place: Place) -> bool:
    """Whether the domain is what the client meant; if not, selectors may fail through no fault of theirs."""
    return not any(fault.pointer.startswith("/problem/domain") for fault in place.faults)


def _document(request: Request, shape: Shape, boundary: tuple[PartText, ...]) -> dict[str, Any]:
    chosen = {} if request.constants is None else {"constants": list(request.constants)}
    return {
        "problem": {
            "title": request.title,
            "length_unit": request.length_unit,
            "time_unit": request.time_unit,
            "domain": {"shape": shape_document(shape)},
            "boundary": [part_document(part) for part in boundary],
        },
        **chosen,
        "tolerance": request.tolerance,
        "limits": {"seconds": request.limits.seconds, "unknowns": request.limits.unknowns},
    }


def _read_problem(value: object, place: Place) -> _Problem | None:
    members = read_members(value, place, ("domain",), ("title", "length_unit", "time_unit", "boundary"))
    if members is None:
        return None
    boundary = members.read("boundary", read_boundary)
    return _Problem(
        title=members.get("title", _read_title, ""),
        length_unit=members.get("length_unit", _read_unit, DEFAULT_LENGTH_UNIT),
        time_unit=members.get("time_unit", _read_unit, DEFAULT_TIME_UNIT),
        shape=members.read("domain", _read_domain),
        boundary=boundary if "boundary" in members.values else (),
    )


def _read_domain(value: object, place: Place) -> Shape | None:
    members = read_members(value, place, ("shape",))
    return None if members is None else members.read("shape", read_shape)


def _read_title(value: object, place: Place) -> str | None:
    return read_text(value, place, LONGEST_TITLE, TITLE_PATTERN, "Must not have control characters.")


def _read_unit(value: object, place: Place) -> str | None:
    rule = (
        "Must be a unit code such as m, km or [ft_i]: letters, digits and the signs % _ . * / ^ + - ' ()[]{}."
    )
    return read_text(value, place, LONGEST_UNIT, UNIT_PATTERN, rule)


def _read_constants(value: object, place: Place, known: Collection[str]) -> tuple[str, ...] | None:
    def one(value: object, place: Place) -> str | None:
        if not isinstance(value, str) or value not in known:
            place.refuse(f"Must be the id of a constant. Known here: {', '.join(sorted(known))}.")
            return None
        return value

    found = read_list(value, place, one, 1, MOST_CONSTANTS)
    seen: set[str] = set()
    for index, name in enumerate(found or ()):
        if name in seen:
            place.at(index).refuse("This constant is asked for already.")
        seen.add(name)
    return None if found is None else tuple(found)


def _read_tolerance(value: object, place: Place) -> float | None:
    return read_number(value, place, SMALLEST_TOLERANCE, LARGEST_TOLERANCE)


def default_limits(caps: Limits) -> Limits:
    """The limits of a request that states none."""
    return Limits(
        min(DEFAULT_LIMITS.seconds, caps.seconds),
        min(DEFAULT_LIMITS.unknowns, caps.unknowns),
    )


def _read_limits(value: object, place: Place, caps: Limits) -> Limits | None:
    members = read_members(value, place, (), ("seconds", "unknowns"))
    if members is None:
        return None

    def seconds(value: object, place: Place) -> float | None:
        return read_number(value, place, SHORTEST_SECONDS, caps.seconds)

    def unknowns(value: object, place: Place) -> int | None:
        return read_whole_number(value, place, 1, caps.unknowns)

    defaults = default_limits(caps)
    return Limits(
        members.get("seconds", seconds, defaults.seconds),
        members.get("unknowns", unknowns, defaults.unknowns),
    )
