"""Reading lists of coordinates: many numbers at once where all is well, one by one where it is not."""

from itertools import chain

import numpy as np
from numpy.typing import NDArray

from service.problem.reading import Place, check_length, read_list, read_number

LARGEST_COORDINATE = 1e150
"""Largest absolute value of a coordinate: squares and areas must stay within double precision."""

MOST_POINTS = 100_000
"""Most points of one shape, and of all boundary selectors of one problem together."""

MOST_RINGS = MOST_POINTS // 3
"""Most rings of one shape."""

Points = NDArray[np.float64]


def read_coordinate(value: object, place: Place) -> float | None:
    """One coordinate in the user's length unit."""
    return read_number(value, place, -LARGEST_COORDINATE, LARGEST_COORDINATE)


def read_point(value: object, place: Place) -> tuple[float, float] | None:
    """A point ``[x, y]``."""
    found = read_list(value, place, read_coordinate, 2, 2)
    return None if found is None else (found[0], found[1])


def read_points(
    value: object, place: Place, fewest: int, most: int = MOST_POINTS, sizes: tuple[int, ...] = (2,)
) -> Points | None:
    """An array of positions, (n, s) with one size s out of ``sizes`` for all of them.

    Records a fault for every position that is not an array of numbers of an acceptable size.
    """
    if not check_length(value, place, fewest, most) or not isinstance(value, list):
        return None
    if set(map(type, value)) <= {list}:
        lengths = set(map(len, value))
        kinds = set(map(type, chain.from_iterable(value))) if lengths <= set(sizes) else {object}
        if len(lengths) == 1 and kinds <= {int, float}:
            found = _as_array(value)
            if found is not None and bool((np.abs(found) <= LARGEST_COORDINATE).all()):
                return found + 0.0
    _refuse_positions(value, place, sizes)
    return None


def _as_array(rows: list[object]) -> Points | None:
    """The rows as one array; ``None`` where an integer is too large for a float."""
    try:
        return np.array(rows, dtype=np.float64)
    except OverflowError:
        return None


def _refuse_positions(rows: list[object], place: Place, sizes: tuple[int, ...]) -> None:
    """Say what is wrong with each position of a list that is known to be faulty."""
    before = len(place.faults)
    for index, row in enumerate(rows):
        if place.full:
            return
        here = place.at(index)
        if not isinstance(row, list):
            here.refuse(f"Must be an array of {_either(sizes)} numbers.")
        elif len(row) not in sizes:
            here.refuse(f"Must have exactly {_either(sizes)} numbers.")
        else:
            for axis, number in enumerate(row):
                read_coordinate(number, here.at(axis))
    if len(place.faults) == before:
        place.refuse("Either all positions have an altitude or none has.")


def _either(sizes: tuple[int, ...]) -> str:
    return " or ".join(map(str, sizes))


def say(point: Points) -> str:
    """A point as it is quoted in sentences."""
    return f"({point[0] + 0.0:.12g}, {point[1] + 0.0:.12g})"
