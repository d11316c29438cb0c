"""Boundary parts laid onto the outline of a domain: who owns which edge, and what nobody owns."""

import numpy as np

from service.problem.boundary import PartText
from service.problem.domain import BoundaryPart, PlaneDomain
from service.problem.outline import Outline
from service.problem.positions import Points, say
from service.problem.segments import Indices, Mask, norms, renumber
from service.problem.selection import (
    NOTHING,
    Edges,
    Spans,
    edges_of,
    merged,
    nearby,
    spans_in_box,
    spans_on_polyline,
)
from service.problem.selectors import Box, Polyline, Remainder
from service.problem.splitting import Split, split

WHOLE = "boundary"

REST = "rest of the boundary"

FARTHEST = 1e6
"""How far a segment may reach beyond the domain, in diameters; farther, its direction is not exact enough."""

MOST_NEARBY = 2_000_000
"""Most pairs of an edge and a piece of a selector that are looked at for one problem."""


def lay_out(
    outline: Outline, parts: tuple[PartText, ...], length_unit: str
) -> tuple[PlaneDomain, tuple[str, ...]] | None:
    """The domain with its boundary parts, and warnings; ``None`` after faults have been recorded.

    What no part selects becomes a natural (neumann) part of its own, with a warning that says how much
    it is.
    """
    edges = edges_of(outline)
    selected = _selections(edges, parts, outline.exponent)
    pieces = split(outline, edges, [NOTHING if spans is None else spans for spans in selected])
    owner = np.full(len(pieces.start), -1, dtype=np.int64)
    sound = all(spans is not None for spans in selected)
    for number, part in enumerate(parts):
        if selected[number] is not None and not isinstance(part.selector, Remainder):
            sound &= _own(pieces, owner, parts, number, edges.tolerance, outline.exponent)
    if not sound:
        return None
    named = [BoundaryPart(part.name, part.condition, part.exchange) for part in parts]
    warnings: tuple[str, ...] = ()
    free = owner < 0
    rest = [number for number, part in enumerate(parts) if isinstance(part.selector, Remainder)]
    if rest:
        owner[free] = rest[0]
        if not free.any():
            parts[rest[0]].place.at("on").refuse("The other parts leave nothing of the boundary.")
            return None
    elif free.any():
        owner[free] = len(parts)
        named.append(BoundaryPart(_unused_name(parts), "neumann"))
        warnings = (_warning(pieces, free, named[-1].name, length_unit),)
    return _domain(pieces, owner, tuple(named), outline.components), warnings


def _selections(edges: Edges, parts: tuple[PartText, ...], exponent: int) -> list[Spans | None]:
    """What each part selects, nothing for the remainder; ``None`` where a fault has been recorded."""
    selected: list[Spans | None] = []
    left = MOST_NEARBY
    for part in parts:
        chain = _chain(edges, part, exponent)
        if chain is None:
            selected.append(NOTHING if isinstance(part.selector, Remainder) else None)
            continue
        near = nearby(edges, chain[:-1], chain[1:], left)
        if near is None:
            part.place.at("on").refuse(
                f"The selectors up to this one come near edges in more than {MOST_NEARBY} places, too many "
                "to look at. Fewer or shorter segments and smaller boxes help."
            )
            return [*selected, *[None] * (len(parts) - len(selected))]
        left -= len(near.edge)
        select = spans_in_box if isinstance(part.selector, Box) else spans_on_polyline
        selected.append(merged(edges, select(edges, chain, near)))
    return selected


def _chain(edges: Edges, part: PartText, exponent: int) -> Points | None:
    """The scaled points of a selector, ``None`` if it has none or they have been refused."""
    selector = part.selector
    if isinstance(selector, Box):
        return np.clip(np.ldexp(selector.corners, -exponent), -4.0, 4.0)
    if not isinstance(selector, Polyline):
        return None
    points = np.ldexp(selector.points, -exponent)
    away = np.abs(points - edges.start[0]).max(axis=1) > FARTHEST * edges.diameter
    if away.any():
        where = selector.place.at(int(np.argmax(away)))
        where.refuse(f"This point is more than {FARTHEST:g} times the domain's diameter away from it.")
        return None
    return points


def _own(
    pieces: Split, owner: Indices, parts: tuple[PartText, ...], number: int, tolerance: float, exponent: int
) -> bool:
    """Enter a part as the owner of what it selects; whether that is something and was free."""
    place = parts[number].place.at("on")
    chosen = pieces.chosen(number)
    taken = np.flatnonzero(chosen & (owner >= 0))
    if len(taken):
        other = parts[owner[taken[0]]].place.pointer
        start, end = pieces.points[pieces.start[taken[0]]], pieces.points[pieces.end[taken[0]]]
        place.refuse(f"Overlaps the part at {other}, for example from {say(start)} to {say(end)}.")
        return False
    if not chosen.any():
        place.refuse(
            "Selects nothing of the boundary, or single points only. A selector must follow the boundary "
            f"to within {np.ldexp(tolerance, exponent):.3g}."
        )
        return False
    owner[chosen] = number
    return True


def _unused_name(parts: tuple[PartText, ...]) -> str:
    """A name for the part that nobody named."""
    if not parts:
        return WHOLE
    used = {part.name for part in parts}
    names = (REST if count == 1 else f"{REST} ({count})" for count in range(1, len(parts) + 2))
    return next(name for name in names if name not in used)


def _warning(pieces: Split, free: Mask, name: str, unit: str) -> str:
    """The sentence about the boundary that no part selects."""
    length = norms(pieces.points[pieces.end] - pieces.points[pieces.start])
    total, open_length = float(length.sum()), float(length[free].sum())
    return (
        f"No boundary part is stated for {100 * open_length / total:.3g} % of the boundary (length "
        f"{open_length:.6g} {unit} of {total:.6g} {unit}). It is taken as natural (neumann) and named "
        f"«{name}»."
    )


def _domain(pieces: Split, owner: Indices, parts: tuple[BoundaryPart, ...], components: int) -> PlaneDomain:
    """The domain, its vertices numbered in the order in which the loops pass them first."""
    used, start, end = renumber(pieces.start, pieces.end)
    label = np.argsort(used)  # every vertex is in use
    given = len(pieces.points) - len(pieces.hosts)
    hosts = np.stack([used, used], axis=1)
    added = used >= given
    hosts[added] = pieces.hosts[used[added] - given]
    return PlaneDomain(
        points=pieces.points[used],
        edges=np.stack([start, end], axis=1),
        loops=pieces.loop,
        part=owner,
        parts=parts,
        components=components,
        hosts=label[hosts],
    )
