"""The member ``regions`` of a domain: named shapes in which coefficients differ from those elsewhere."""

from dataclasses import dataclass
from typing import Any

import numpy as np

from service.problem.names import read_name
from service.problem.outline import Outline, outline_of
from service.problem.positions import MOST_POINTS, Points
from service.problem.reading import Place, read_list, read_members
from service.problem.rings import Shape
from service.problem.shapes import read_shape, shape_document

MOST_REGIONS = 1000


@dataclass(frozen=True)
class RegionText:
    """A region as it is written.

    place : where the region stands in the request.
    """

    name: str
    shape: Shape
    place: Place


@dataclass(frozen=True)
class RegionOutline:
    """The rings of a region whose shape is sound.

    rings : outer ring and holes, (k, 2) vertices each in the user's length unit, in the order in which
        they are walked with the region on the left.
    place : where the shape stands in the request.
    """

    name: str
    rings: tuple[Points, ...]
    place: Place


def read_regions(value: object, place: Place) -> tuple[RegionText, ...] | None:
    """The list of regions; their names differ."""
    regions = read_list(value, place, _read_region, 0, MOST_REGIONS)
    if regions is None:
        return None
    names: dict[str, RegionText] = {}
    for region in regions:
        first = names.setdefault(region.name, region)
        if first is not region:
            region.place.at("name").refuse(f"The region at {first.place.pointer} has the same name.")
    if sum(len(placed.ring.points) for region in regions for placed in region.shape.rings()) > MOST_POINTS:
        place.refuse(f"The regions may have at most {MOST_POINTS} vertices altogether.")
        return None
    return tuple(regions)


def region_outlines(regions: tuple[RegionText, ...]) -> tuple[RegionOutline, ...] | None:
    """The rings of all regions, ``None`` after what is wrong with their shapes has been recorded."""
    found = [_region_outline(region) for region in regions]
    outlines = [outline for outline in found if outline is not None]
    return tuple(outlines) if len(outlines) == len(regions) else None


def region_document(region: RegionText) -> dict[str, Any]:
    """The canonical form of one region."""
    return {"name": region.name, "shape": shape_document(region.shape)}


def _read_region(value: object, place: Place) -> RegionText | None:
    members = read_members(value, place, ("name", "shape"))
    if members is None:
        return None
    name = members.read("name", read_name)
    shape = members.read("shape", read_shape)
    return None if name is None or shape is None else RegionText(name, shape, place)


def _region_outline(region: RegionText) -> RegionOutline | None:
    outline = outline_of(region.shape)
    if outline is None:
        return None
    if outline.components > 1:
        region.shape.place.refuse(
            f"A region is one connected piece; this shape falls into {outline.components}. Give each piece "
            "a name of its own."
        )
        return None
    return RegionOutline(region.name, _rings(outline), region.shape.place)


def _rings(outline: Outline) -> tuple[Points, ...]:
    """The loops of an outline as lists of vertices."""
    borders = np.flatnonzero(np.diff(outline.loop)) + 1
    return tuple(outline.points[numbers] for numbers in np.split(outline.start, borders))
