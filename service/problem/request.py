"""The inputs of the process ``constants``: from plain JSON values to a checked request, and back."""

from collections.abc import Collection
from dataclasses import dataclass
from functools import partial
from typing import Any

from service.errors import ProblemError
from service.problem.checks import check_coefficients
from service.problem.domain import PlaneDomain
from service.problem.interfaces import with_regions
from service.problem.operator import LAPLACIAN, PLAIN, Norm, Operator
from service.problem.outline import outline_of
from service.problem.parts import lay_out
from service.problem.reading import Place, read_list, read_members, read_number, read_whole_number
from service.problem.regions import region_outlines
from service.problem.selection import edges_of
from service.problem.statement import Statement, read_statement, statement_document
from service.processes.base import Limits

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


def _read(inputs: object, known: Collection[str], caps: Limits) -> tuple[Request, dict[str, Any]]:
    place = Place()
    members = read_members(inputs, place, ("problem",), ("constants", "tolerance", "limits"))
    if members is None:
        raise ProblemError(*place.faults)
    statement = members.read("problem", read_statement)
    constants = members.read("constants", partial(_read_constants, known=known))
    tolerance = members.get("tolerance", _read_tolerance, DEFAULT_TOLERANCE)
    limits = members.get("limits", partial(_read_limits, caps=caps), default_limits(caps))
    laid = None if statement is None else _lay_out(statement, place)
    if place.faults or statement is None or statement.shape is None or laid is None:
        raise ProblemError(*place.faults)
    domain, warnings = laid
    request = Request(
        title=statement.title,
        length_unit=statement.length_unit,
        time_unit=statement.time_unit,
        domain=domain,
        constants=constants,
        tolerance=tolerance,
        limits=limits,
        warnings=warnings,
        operator=statement.operator,
        norm=statement.norm,
    )
    return request, _document(request, statement_document(statement, statement.shape))


def _lay_out(statement: Statement, place: Place) -> tuple[PlaneDomain, tuple[str, ...]] | None:
    """The domain with its boundary parts and regions, and warnings; ``None`` after faults have been recorded.

    Coefficients are checked on it as soon as everything else is sound.
    """
    outline = None if statement.shape is None else outline_of(statement.shape)
    regions = None if statement.regions is None else region_outlines(statement.regions)
    if outline is None or regions is None or statement.boundary is None or not _domain_sound(place):
        return None
    laid = lay_out(outline, statement.boundary, statement.length_unit)
    if laid is None:
        return None
    domain = with_regions(laid[0], regions, outline.exponent, edges_of(outline).tolerance) if regions else laid[0]
    if domain is None:
        return None
    if not place.faults and _has_coefficients(statement):
        here = place.at("problem")
        check_coefficients(statement.operator, domain, outline.exponent, statement.written, here)
    return domain, laid[1]


def _has_coefficients(statement: Statement) -> bool:
    """Whether there is anything to check beyond the Laplacian."""
    exchanges = [part.exchange for part in statement.boundary or () if part.exchange is not None]
    return statement.operator != LAPLACIAN or bool(exchanges)


def _domain_sound(place: Place) -> bool:
    """Whether the domain is what the client meant; if not, selectors may fail through no fault of theirs."""
    return not any(fault.pointer.startswith("/problem/domain") for fault in place.faults)


def _document(request: Request, problem: dict[str, Any]) -> dict[str, Any]:
    chosen = {} if request.constants is None else {"constants": list(request.constants)}
    return {
        "problem": problem,
        **chosen,
        "tolerance": request.tolerance,
        "limits": {"seconds": request.limits.seconds, "unknowns": request.limits.unknowns},
    }


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
