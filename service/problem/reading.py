"""Reading plain JSON values: every fault is collected with its place, none hides the others.

A reader is a function ``(value, place) -> T | None``. It returns what it read, or ``None`` after it
has recorded at least one fault. Readers never quote what they were given: the sentences speak of what
is expected, and the place says where.
"""

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import TypeVar

from service.errors import Fault

MOST_FAULTS = 100
"""Faults that are reported for one request; what is wrong beyond that shows in the next attempt."""

LONGEST_NAME_IN_POINTER = 100

T = TypeVar("T")
Reader = Callable[[object, "Place"], T | None]


@dataclass(frozen=True)
class Place:
    """Where a value stands in the request, and the list that collects the faults of the request.

    pointer : JSON Pointer (RFC 6901) from the inputs object.
    faults : shared by all places of one request, in the order of discovery.
    """

    pointer: str = ""
    faults: list[Fault] = field(default_factory=list)

    def at(self, key: str | int) -> "Place":
        """The place of a member or of an element of the value at this place."""
        step = str(key).replace("~", "~0").replace("/", "~1")
        return Place(f"{self.pointer}/{step}", self.faults)

    def refuse(self, detail: str) -> None:
        """Record a fault at this place; further faults than MOST_FAULTS are dropped."""
        if not self.full:
            self.faults.append(Fault(self.pointer, detail))

    @property
    def full(self) -> bool:
        """Whether looking for more faults is pointless."""
        return len(self.faults) >= MOST_FAULTS


@dataclass(frozen=True)
class Members:
    """The members of an object whose unknown and missing members have been refused already."""

    values: Mapping[str, object]
    place: Place

    def read(self, name: str, reader: Reader[T]) -> T | None:
        """A member, ``None`` where it is missing or refused."""
        return reader(self.values[name], self.place.at(name)) if name in self.values else None

    def get(self, name: str, reader: Reader[T], default: T) -> T:
        """A member, ``default`` where it is missing or refused."""
        found = self.read(name, reader)
        return default if found is None else found


def read_members(
    value: object, place: Place, required: tuple[str, ...], optional: tuple[str, ...] = ()
) -> Members | None:
    """The members of an object; refuses other JSON types, missing members and unknown ones."""
    if not isinstance(value, dict):
        place.refuse("Must be an object.")
        return None
    known = (*required, *optional)
    refuse_unknown(value, place, known)
    for name in required:
        if name not in value:
            place.refuse(f"The member {name} is missing.")
    return Members({name: value[name] for name in known if name in value}, place)


def refuse_unknown(value: Mapping[object, object], place: Place, known: tuple[str, ...]) -> None:
    """Refuse every member that is not known, each at its own place."""
    for name in value:
        if place.full:
            return
        if name not in known:
            printable = isinstance(name, str) and name.isprintable() and len(name) <= LONGEST_NAME_IN_POINTER
            where = place.at(str(name)) if printable else place
            where.refuse(f"Not known to this version of the service. Known here: {', '.join(known)}.")


def read_alternative(value: object, place: Place, table: Mapping[str, Reader[T]]) -> T | None:
    """An object with exactly one member, whose name chooses the reader of its value."""
    names = tuple(table)
    if not isinstance(value, dict):
        place.refuse(f"Must be an object with one of the members {', '.join(names)}.")
        return None
    refuse_unknown(value, place, names)
    chosen = [name for name in names if name in value]
    if len(chosen) > 1 or not value:
        place.refuse(f"Must have exactly one of the members {', '.join(names)}.")
        return None
    return table[chosen[0]](value[chosen[0]], place.at(chosen[0])) if chosen else None


def read_list(value: object, place: Place, read: Reader[T], fewest: int = 0, most: int | None = None) -> list[T] | None:
    """An array of bounded length, each element by the same reader; ``None`` if any was refused."""
    if not check_length(value, place, fewest, most) or not isinstance(value, list):
        return None
    found: list[T] = []
    for index, element in enumerate(value):
        if place.full:
            return None
        item = read(element, place.at(index))
        if item is not None:
            found.append(item)
    return found if len(found) == len(value) else None


def check_length(value: object, place: Place, fewest: int = 0, most: int | None = None) -> bool:
    """Whether the value is an array of an acceptable length; refuses it otherwise."""
    if not isinstance(value, list):
        place.refuse("Must be an array.")
        return False
    if fewest == most and len(value) != most:
        place.refuse(f"Must have exactly {most} elements.")
        return False
    if len(value) < fewest:
        place.refuse(f"Must have at least {fewest} element{'s' if fewest > 1 else ''}.")
        return False
    if most is not None and len(value) > most:
        place.refuse(f"Must have at most {most} elements.")
        return False
    return True


def read_number(value: object, place: Place, low: float, high: float) -> float | None:
    """A finite number between two bounds (both allowed); a truth value or a text is not a number."""
    if isinstance(value, bool) or not isinstance(value, int | float):
        place.refuse("Must be a number.")
        return None
    if not low <= value <= high:
        place.refuse(f"Must be a number from {low:g} to {high:g}.")
        return None
    return float(value) + 0.0


def read_whole_number(value: object, place: Place, low: int, high: int) -> int | None:
    """An integer between two bounds; ``2e6`` and ``2000000.0`` are integers (JSON has one number type)."""
    if isinstance(value, bool) or not isinstance(value, int | float):
        place.refuse("Must be a whole number.")
        return None
    if not low <= value <= high or value != int(value):
        place.refuse(f"Must be a whole number from {low} to {high}.")
        return None
    return int(value)


def read_text(value: object, place: Place, longest: int, pattern: str, rule: str) -> str | None:
    """A string of limited length that matches ``pattern`` wholly; ``rule`` is the sentence if it does not."""
    if not isinstance(value, str):
        place.refuse("Must be a string.")
        return None
    if len(value) > longest:
        place.refuse(f"Must have at most {longest} characters.")
        return None
    if re.fullmatch(pattern, value) is None or re.search("[\ud800-\udfff]", value):
        place.refuse(rule)
        return None
    return value


def read_choice(value: object, place: Place, choices: tuple[str, ...]) -> str | None:
    """One of a few strings."""
    if not isinstance(value, str) or value not in choices:
        place.refuse(f"Must be one of: {', '.join(choices)}.")
        return None
    return value
