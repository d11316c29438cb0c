"""The building blocks of the schemas: closed objects, bounded arrays, patterned texts, points."""

from typing import Any

from service.problem.names import LONGEST_NAME, NAME_PATTERN
from service.problem.positions import LARGEST_COORDINATE

JSON = dict[str, Any]


def closed_object(properties: JSON, required: tuple[str, ...], description: str, **more: Any) -> JSON:
    """An object with these members and no others."""
    needed = {"required": list(required)} if required else {}
    return {
        **more,
        "description": description,
        "type": "object",
        "properties": properties,
        **needed,
        "additionalProperties": False,
    }


def array(items: JSON, fewest: int, most: int) -> JSON:
    """An array of bounded length."""
    return {"type": "array", "items": items, "minItems": fewest, "maxItems": most}


def text(longest: int, pattern: str, description: str, **more: Any) -> JSON:
    """A string of limited length that matches a pattern wholly."""
    return {
        "type": "string",
        "description": description,
        "maxLength": longest,
        "pattern": f"^(?:{pattern})$",
        **more,
    }


def name(description: str) -> JSON:
    """A name of a boundary part or a region."""
    return text(LONGEST_NAME, NAME_PATTERN, description)


def coordinate() -> JSON:
    """A coordinate in the user's length unit."""
    return {"type": "number", "minimum": -LARGEST_COORDINATE, "maximum": LARGEST_COORDINATE}


def point() -> JSON:
    """A point [x, y]."""
    return array(coordinate(), 2, 2)
