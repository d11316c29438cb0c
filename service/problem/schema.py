"""JSON Schemas of the inputs of ``constants``, in the closed dialect of OGC API - Processes 1.0.

They say of the form of a document what the readers of this package demand; what the geometry must
satisfy (rings that do not cross, selectors on the boundary) only the readers know. The dialect has one
``type``, ``enum`` instead of ``const``, no numeric exclusive bounds, no references.
"""

from collections.abc import Collection

from service.problem.boundary import CONDITIONS, MOST_PARTS
from service.problem.positions import LARGEST_COORDINATE, MOST_POINTS, MOST_RINGS
from service.problem.regions import MOST_REGIONS
from service.problem.request import (
    CAPS,
    DEFAULT_TOLERANCE,
    LARGEST_TOLERANCE,
    MOST_CONSTANTS,
    SHORTEST_SECONDS,
    SMALLEST_TOLERANCE,
    default_limits,
)
from service.problem.schema_operator import norm_schema, operator_schema, scalar_schema
from service.problem.schema_tools import JSON, array, closed_object, coordinate, name, point, text
from service.problem.selectors import REMAINDER
from service.problem.shapes import SMALLEST_SIZE
from service.problem.statement import (
    DEFAULT_LENGTH_UNIT,
    DEFAULT_TIME_UNIT,
    LONGEST_TITLE,
    LONGEST_UNIT,
    TITLE_PATTERN,
    UNIT_PATTERN,
)
from service.processes.base import Limits

EXAMPLE: JSON = {
    "title": "Channel with a pier",
    "length_unit": "m",
    "domain": {
        "shape": {
            "polygon": {
                "outer": [[0, 0], [30, 0], [30, 8], [0, 8]],
                "holes": [[[10, 3], [12, 3], [12, 5], [10, 5]]],
            }
        }
    },
    "boundary": [
        {"name": "inflow", "on": {"segment": [[0, 0], [0, 8]]}, "condition": "dirichlet"},
        {"name": "pier", "on": {"box": [[9, 2], [13, 6]]}, "condition": "dirichlet"},
        {"name": "banks and outflow", "on": "remainder", "condition": "neumann"},
    ],
}


def input_descriptions(known: Collection[str], caps: Limits = CAPS) -> dict[str, JSON]:
    """The map of OGC input descriptions: ``problem``, ``constants``, ``tolerance``, ``limits``.

    known : ids of the constants this service computes.
    caps : what a request may ask for at most.
    """
    return {
        "problem": {
            "title": "Problem",
            "description": "The domain with its boundary parts and conditions.",
            "schema": problem_schema(),
        },
        "constants": {
            "title": "Constants",
            "description": "Which constants to enclose; without it, those that make sense for the problem.",
            "minOccurs": 0,
            "schema": constants_schema(known),
        },
        "tolerance": {
            "title": "Tolerance",
            "description": "Wanted width of each enclosure, relative to its upper end.",
            "minOccurs": 0,
            "schema": tolerance_schema(),
        },
        "limits": {
            "title": "Limits",
            "description": "Bounds of the run. A run that reaches one ends with the enclosures it has.",
            "minOccurs": 0,
            "schema": limits_schema(caps),
        },
    }


def problem_schema() -> JSON:
    """The problem document."""
    return closed_object(
        {
            "title": text(LONGEST_TITLE, TITLE_PATTERN, "A title for reports.", default=""),
            "length_unit": text(
                LONGEST_UNIT,
                UNIT_PATTERN,
                "Unit of all coordinates, as a UCUM code; a name only, nothing is converted.",
                default=DEFAULT_LENGTH_UNIT,
            ),
            "time_unit": text(LONGEST_UNIT, UNIT_PATTERN, "Unit of time, as a UCUM code.", default=DEFAULT_TIME_UNIT),
            "domain": closed_object(
                {
                    "shape": shape_schema(),
                    "regions": {
                        **array(_region(), 0, MOST_REGIONS),
                        "description": "Named regions in which coefficients differ; they may overlap, and reach "
                        "beyond the domain.",
                        "default": [],
                    },
                },
                ("shape",),
                "The domain.",
            ),
            "boundary": {
                "type": "array",
                "description": "Named boundary parts, without overlap. What no part selects is natural "
                "(neumann) boundary and is reported as a warning.",
                "items": _part(),
                "maxItems": MOST_PARTS,
                "default": [],
            },
            "operator": operator_schema(),
            "norm": norm_schema(),
        },
        ("domain",),
        "A plane domain, its boundary parts and the conditions on them, and the operator.",
        title="Problem document",
        example=EXAMPLE,
    )


def shape_schema() -> JSON:
    """A shape: rectangle, polygon, GeoJSON Polygon or MultiPolygon."""
    return {
        "title": "Shape",
        "description": "A bounded plane domain with straight edges. Rings have any orientation.",
        "oneOf": [
            closed_object({"rectangle": _rectangle()}, ("rectangle",), "A rectangle with sides along the axes."),
            closed_object({"polygon": _polygon()}, ("polygon",), "A polygon, with or without holes."),
            _geojson("Polygon", _rings(closed=True, fewest=1)),
            _geojson("MultiPolygon", array(_rings(closed=True, fewest=1), 1, MOST_RINGS)),
        ],
    }


def constants_schema(known: Collection[str]) -> JSON:
    """The list of constants."""
    return {
        **array({"type": "string", "enum": sorted(known)}, 1, MOST_CONSTANTS),
        "title": "Constants",
        "description": "Ids of constants, each at most once.",
        "uniqueItems": True,
        "example": sorted(known)[:1],
    }


def tolerance_schema() -> JSON:
    """The tolerance."""
    return {
        "title": "Tolerance",
        "description": "Wanted width of each enclosure, relative to its upper end.",
        "type": "number",
        "minimum": SMALLEST_TOLERANCE,
        "maximum": LARGEST_TOLERANCE,
        "default": DEFAULT_TOLERANCE,
        "example": DEFAULT_TOLERANCE,
    }


def limits_schema(caps: Limits = CAPS) -> JSON:
    """The limits of a run."""
    defaults = default_limits(caps)
    return closed_object(
        {
            "seconds": {
                "type": "number",
                "description": "Wall-clock time in seconds.",
                "minimum": SHORTEST_SECONDS,
                "maximum": caps.seconds,
                "default": defaults.seconds,
            },
            "unknowns": {
                "type": "integer",
                "description": "Unknowns of the largest system that is solved.",
                "minimum": 1,
                "maximum": caps.unknowns,
                "default": defaults.unknowns,
            },
        },
        (),
        "Bounds of the run.",
        title="Limits",
        example={"seconds": defaults.seconds, "unknowns": defaults.unknowns},
    )


def _rings(closed: bool, fewest: int) -> JSON:
    """Rings of positions; closed ones follow RFC 7946, section 3.1.6, and may carry an altitude."""
    position = array(coordinate(), 2, 3) if closed else point()
    return array(array(position, 4 if closed else 3, MOST_POINTS + 1), fewest, MOST_RINGS)


def _rectangle() -> JSON:
    side = {"type": "number", "minimum": SMALLEST_SIZE, "maximum": LARGEST_COORDINATE}
    size = {**array(side, 2, 2), "description": "Width and height."}
    corner = {**point(), "description": "The corner with the smallest coordinates."}
    return closed_object({"corner": corner, "size": size}, ("corner", "size"), "Corner and size.")


def _polygon() -> JSON:
    holes = _rings(closed=False, fewest=0)
    outer = {**holes["items"], "description": "Vertices; the first may be repeated at the end or not."}
    return closed_object(
        {"outer": outer, "holes": {**holes, "description": "Rings inside the outer one.", "default": []}},
        ("outer",),
        "Outer ring and holes.",
    )


def _geojson(kind: str, coordinates: JSON) -> JSON:
    box = [array(coordinate(), size, size) for size in (4, 6)]
    return closed_object(
        {
            "type": {"type": "string", "enum": [kind]},
            "coordinates": coordinates,
            "bbox": {"oneOf": box, "description": "Ignored."},
        },
        ("type", "coordinates"),
        f"A GeoJSON {kind} geometry (RFC 7946), read as plane coordinates; altitudes, if any, all equal.",
    )


def _part() -> JSON:
    segment = array(point(), 2, 2)
    selectors = (
        ("segment", segment, "What lies on the segment between two points."),
        ("polyline", array(point(), 2, MOST_POINTS), "What lies on a chain of segments."),
        ("box", segment, "What lies in the closed box [[xmin, ymin], [xmax, ymax]]."),
    )
    choices = [closed_object({name: form}, (name,), description) for name, form, description in selectors]
    everything_else = {
        "type": "string",
        "description": "What no other part selects.",
        "enum": [REMAINDER],
    }
    on = {
        "description": "Where the part is; ends of a selector inside an edge split the edge.",
        "oneOf": [*choices, everything_else],
    }

    def part(conditions: list[str], description: str, more: JSON) -> JSON:
        condition = {"type": "string", "description": description, "enum": conditions}
        members = {"name": name("A name of its own."), "on": on, "condition": condition, **more}
        return closed_object(members, ("name", "on", "condition", *more), "A named part of the boundary.")

    plain = [condition for condition in CONDITIONS if condition != "robin"]
    exchange = scalar_schema("alpha, in length unit per time unit: the flux per unit of the function.")
    return {
        "oneOf": [
            part(plain, "dirichlet: functions vanish on the part; neumann: they are free there.", {}),
            part(["robin"], "robin: the flux and exchange times the function balance.", {"exchange": exchange}),
        ]
    }


def _region() -> JSON:
    return closed_object(
        {"name": name("A name of its own."), "shape": shape_schema()},
        ("name", "shape"),
        "A connected region; its shape may not fall into pieces.",
    )
