"""Descriptions of what processes return, in the closed schema dialect of OGC API - Processes 1.0."""

from typing import Any

JSON = dict[str, Any]

NUMBER_OR_NONE: JSON = {"type": "number", "nullable": True}

CONSTANT: JSON = {
    "type": "object",
    "properties": {
        "exists": {"type": "boolean", "description": "False when the problem has no such constant."},
        "lower": {**NUMBER_OR_NONE, "description": "Proved lower bound of the constant; null while none is known."},
        "upper": {**NUMBER_OR_NONE, "description": "Proved upper bound; null while none is known."},
        "best": {"type": "number", "description": "The value that is nearest, by experience."},
        "relative_width": {**NUMBER_OR_NONE, "description": "(upper - lower) / upper."},
        "target_met": {"type": "boolean"},
        "rigour": {"type": "string", "enum": ["guaranteed", "estimated"]},
        "rounding": {"type": "string", "enum": ["included", "not included"]},
        "unit": {"type": "string"},
        "statement": {"type": "string", "description": "The inequality that is proved; C is the constant."},
        "conclusion": {"type": "string", "description": "Of coercivity: what its sign says."},
        "witness": {
            "type": "object",
            "description": "Of coercivity below zero: a function, linear on triangles, with a(v, v) < 0 (proved).",
            "properties": {
                "points": {"type": "array", "items": {"type": "array", "items": {"type": "number"}}},
                "triangles": {"type": "array", "items": {"type": "array", "items": {"type": "integer"}}},
                "values": {"type": "array", "items": {"type": "number"}},
                "ratio": {"type": "number", "description": "Proved upper bound of a(v, v) / ||v||^2."},
            },
        },
        "lower_by": {"type": "string"},
        "upper_by": {"type": "string"},
    },
    "required": ["statement"],
}

NUMBER_WITH_WORDS: JSON = {
    "type": "object",
    "required": ["bound", "statement"],
    "properties": {
        "bound": {"type": "number"},
        "unit": {"type": "string"},
        "by": {"type": "string", "description": "The constants that it follows from."},
        "statement": {"type": "string"},
    },
}

DERIVED: JSON = {
    "type": "object",
    "description": "What follows from the constants found; members that do not apply are left out.",
    "properties": {
        "stability": NUMBER_WITH_WORDS,
        "quasi_optimality": NUMBER_WITH_WORDS,
        "peclet": {
            "type": "object",
            "properties": {
                "domain": {"type": "number"},
                "mesh": {"type": "number"},
                "mesh_size_for_unit_mesh_peclet": {"type": "number"},
                "unit_of_mesh_size": {"type": "string"},
                "statement": {"type": "string"},
            },
        },
        "damkoehler": {
            "type": "object",
            "properties": {
                "diffusive": {"type": "number"},
                "advective": {"type": "number"},
                "statement": {"type": "string"},
            },
        },
    },
}

RESULT: JSON = {
    "type": "object",
    "required": ["target_met", "constants"],
    "properties": {
        "target_met": {"type": "boolean", "description": "Whether every constant is as narrow as asked."},
        "constants": {
            "type": "object",
            "properties": {
                "trace": {
                    "type": "object",
                    "description": "One constant for each boundary part, by its name.",
                    "additionalProperties": CONSTANT,
                }
            },
            "additionalProperties": CONSTANT,
        },
        "derived": DERIVED,
        "mesh": {
            "type": "object",
            "properties": {
                "triangles": {"type": "integer"},
                "largest_edge": {"type": "number"},
                "smallest_edge": {"type": "number"},
            },
        },
        "history": {"type": "array", "items": {"type": "object"}},
        "warnings": {"type": "array", "items": {"type": "string"}},
        "provenance": {"type": "object"},
    },
}

CONSTANTS_OUTPUT: dict[str, JSON] = {
    "result": {
        "title": "Enclosures",
        "description": "Every constant with its proved bounds, and how they were obtained.",
        "schema": RESULT,
    }
}
