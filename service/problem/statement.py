"""The member ``problem`` of the inputs as it is written: domain, boundary, operator, norm."""

from collections.abc import Mapping
from dataclasses import dataclass
from functools import partial
from typing import Any

from service.problem.boundary import PartText, part_document, read_boundary
from service.problem.coefficients import Names
from service.problem.operator import LAPLACIAN, PLAIN, Norm, Operator
from service.problem.operator_text import norm_document, operator_document, read_norm, read_operator
from service.problem.reading import Place, read_members, read_text
from service.problem.regions import RegionText, read_regions, region_document
from service.problem.rings import Shape
from service.problem.shapes import read_shape, shape_document

LONGEST_TITLE = 200
TITLE_PATTERN = r"[^\u0000-\u001f\u007f]*"

LONGEST_UNIT = 20
UNIT_PATTERN = r"[A-Za-z0-9%_.*/^+'()\[\]{}-]+"
"""The characters of unit codes as UCUM writes them, for example m, km, [ft_i]."""

DEFAULT_LENGTH_UNIT = "m"
DEFAULT_TIME_UNIT = "s"

OPTIONAL = ("title", "length_unit", "time_unit", "boundary", "operator", "norm")


@dataclass(frozen=True)
class Statement:
    """A problem as it is written. What could not be read is ``None``, or the default where there is one.

    written : the members as they were given.
    """

    title: str
    length_unit: str
    time_unit: str
    shape: Shape | None
    regions: tuple[RegionText, ...] | None
    boundary: tuple[PartText, ...] | None
    operator: Operator
    norm: Norm
    written: Mapping[str, object]


@dataclass(frozen=True)
class _Domain:
    """The member ``domain`` as it is written."""

    shape: Shape | None
    regions: tuple[RegionText, ...] | None

    @property
    def names(self) -> Names:
        """The names of the regions, ``None`` where they are not what the client meant."""
        names = [region.name for region in self.regions or ()]
        return None if self.regions is None or len(set(names)) < len(names) else names


def read_statement(value: object, place: Place) -> Statement | None:
    """The problem; its domain is read first, for the coefficients refer to its regions."""
    members = read_members(value, place, ("domain",), OPTIONAL)
    if members is None:
        return None
    domain = members.get("domain", _read_domain, _Domain(None, None))
    boundary = members.read("boundary", partial(read_boundary, names=domain.names))
    return Statement(
        title=members.get("title", _read_title, ""),
        length_unit=members.get("length_unit", _read_unit, DEFAULT_LENGTH_UNIT),
        time_unit=members.get("time_unit", _read_unit, DEFAULT_TIME_UNIT),
        shape=domain.shape,
        regions=domain.regions,
        boundary=boundary if "boundary" in members.values else (),
        operator=members.get("operator", partial(read_operator, names=domain.names), LAPLACIAN),
        norm=members.get("norm", read_norm, PLAIN),
        written=members.values,
    )


def statement_document(statement: Statement, shape: Shape) -> dict[str, Any]:
    """The canonical form. Regions, operator and norm are left out where they say nothing new.

    So a problem of the Laplacian has the form, and the digest, that it had before there were operators.
    """
    regions = [region_document(region) for region in statement.regions or ()]
    operator, norm = statement.operator, statement.norm
    return {
        "title": statement.title,
        "length_unit": statement.length_unit,
        "time_unit": statement.time_unit,
        "domain": {"shape": shape_document(shape), **({"regions": regions} if regions else {})},
        "boundary": [part_document(part) for part in statement.boundary or ()],
        **({} if operator == LAPLACIAN else {"operator": operator_document(operator)}),
        **({} if norm == PLAIN else {"norm": norm_document(norm)}),
    }


def _read_domain(value: object, place: Place) -> _Domain | None:
    members = read_members(value, place, ("shape",), ("regions",))
    if members is None:
        return None
    regions = members.read("regions", read_regions)
    return _Domain(members.read("shape", read_shape), regions if "regions" in members.values else ())


def _read_title(value: object, place: Place) -> str | None:
    return read_text(value, place, LONGEST_TITLE, TITLE_PATTERN, "Must not have control characters.")


def _read_unit(value: object, place: Place) -> str | None:
    rule = "Must be a unit code such as m, km or [ft_i]: letters, digits and the signs % _ . * / ^ + - ' ()[]{}."
    return read_text(value, place, LONGEST_UNIT, UNIT_PATTERN, rule)
