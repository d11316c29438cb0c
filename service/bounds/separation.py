"""A proved rough bound rho above the wanted eigenvalue and below the rest, and lower bounds by counting alone."""

import math
import time
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.bounds.proof import Prover, count, reaches
from service.forms.form import Pencil
from service.meshing.mesh import Mesh

Array = NDArray[np.float64]

CLEAR_GAP = 0.3
"""Relative gap in the spectrum that is worth stopping at."""

SMALL_GAP = 0.1
"""Relative gap that takes exact values and high orders to prove."""

LEAST_GAP = 0.002
"""Relative gap that still helps."""

BISECTIONS = 6
"""How often the distance of a counted bound is halved on a logarithmic scale."""

STEPS_BACK = (0.0, 0.3, 1.0, 2.0, 4.0, 6.0, 9.0, 12.0)
"""Logarithms of the factors by which the distance grows until a proof succeeds."""


@dataclass(frozen=True)
class Separation:
    """tau_(count + 1) >= rho is proved; count = 0 says that no useful gap was found.

    gap : relative distance of rho above the Ritz value tau_count.
    pencil : the pencil on the mesh that carried the proof.
    """

    count: int
    rho: float
    gap: float
    pencil: Pencil


def reachable(
    pencil: Pencil,
    pencil_on: Callable[[Mesh], Pencil],
    refined: Callable[[Mesh], Mesh],
    value: float,
    cells: int,
) -> Pencil | None:
    """The pencil on the mesh, refined uniformly until A - value B has minorants; None if that takes too many cells."""
    while not reaches(pencil.at(value)):
        if 4 * len(pencil.mesh.cells) > cells:
            return None
        pencil = pencil_on(refined(pencil.mesh))
    return pencil


def gap_above(ritz: Array, index: int) -> tuple[int, float]:
    """Where to cut above the ratio ``index``: after which ratio, and how wide the gap is relative to the next one.

    The first clear gap, or else the widest.
    """
    gaps = (ritz[index:] - ritz[index - 1 : -1]) / np.abs(ritz[index:])
    clear = np.flatnonzero(gaps >= CLEAR_GAP)
    pick = int(clear[0]) if len(clear) else int(np.argmax(gaps))
    return index + pick, float(gaps[pick])


def separate(pencil: Pencil, ritz: Array, size: int, orders: int = 3) -> Separation:
    """Proves a cut, for the true forms, between the ratios ``size`` and ``size`` + 1, given their Ritz values.

    pencil : on a mesh fine enough for minorants at ritz[size].
    orders : how many orders of minorants are tried.
    """
    below, above = float(ritz[size - 1]), float(ritz[size])
    tried = (1, 2, 3) if len(pencil.mesh.cells) > 1500 else (2, 3, 1)
    for order in ((3, 4, 5) if above - below < SMALL_GAP * abs(above) else tried)[:orders]:
        prover = Prover(pencil, order, above)
        for part in (0.8, 0.5, 0.25):
            rho = below + part * (above - below)
            if prover.proves(rho, size):
                return Separation(size, rho, (rho - below) / abs(above), pencil)
    return Separation(0, 0.0, 0.0, pencil)


def counted_bound(
    pencil: Pencil,
    estimate: float,
    index: int,
    order: int,
    width: float,
    known: float = -math.inf,
    deadline: float = math.inf,
) -> float:
    """A proved lower bound of tau_index by counting alone, -inf where there is none.

    Bisects the distance below the upper bound ``estimate``, relative and on a logarithmic scale, from ``width``
    / 100 to that of a bound that is ``known``. Halves it less often where the ``deadline`` is near.
    """
    size = abs(estimate)
    low = math.log(width / 100)
    high = math.log(min(2.0, max((estimate - known) / size, 2 * width / 100)))

    def value(distance: float) -> float:
        return estimate - size * math.exp(distance)

    for _ in range(BISECTIONS):
        begun = time.monotonic()
        middle = (low + high) / 2
        found = count(pencil.at(value(middle)), order)
        if found is not None and found < index:
            high = middle
        else:
            low = middle
        # A proof takes about as long as four counts.
        if time.monotonic() + 5 * (time.monotonic() - begun) > deadline:
            break
    # What the proof sets aside for rounding may be more than this distance: then step back.
    prover = Prover(pencil, order, value(high))
    for back in STEPS_BACK:
        t = value(min(high + back, 0.0))
        if prover.proves(t, index - 1):
            return t
        if time.monotonic() > deadline:
            break
    return -math.inf
