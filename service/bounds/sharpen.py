"""Both bounds of a ratio from trial functions and fluxes of one order, where the spectrum is cut."""

import math

import numpy as np
from numpy.typing import NDArray

from service.bounds.enclosure import UNKNOWN, Enclosure
from service.bounds.flux import FluxSpace
from service.bounds.lehmann import goerisch_gram, lower_bounds, upper_bounds
from service.bounds.ritz import TrialSpace
from service.bounds.rounding import down, up
from service.bounds.separation import Separation
from service.forms.form import Pencil

Array = NDArray[np.float64]

LARGEST_ERROR = 0.1
"""Largest relative error of the forms, from the shapes of cells, with which anything is still concluded."""


def sharpen(pencil: Pencil, index: int, cut: Separation, order: int, functions: Array, ratios: Array) -> Enclosure:
    """Enclosure of tau_index from trial functions of one order and fluxes of the same order."""
    used = max(cut.count, index)
    functions, ratios = functions[:, :, :used], ratios[:used]
    shift = positive_shift(pencil, float(ratios[index - 1]))
    shifted = pencil.shifted(shift)
    trial = TrialSpace(shifted, order)
    mass = trial.gram(pencil.weight, functions)
    energy = trial.gram(shifted.energy, functions)
    if functions.shape[2] < index:
        return UNKNOWN
    ritz = ritz_bound(shifted, trial, functions, index) - shift
    above = Enclosure(-math.inf, up(ritz), upper_by=f"Ritz, order {order}")
    if not cut.count or functions.shape[2] < cut.count:
        return above
    error = shifted.ratio_error
    if error > LARGEST_ERROR:
        return above
    dual = goerisch_gram(trial, FluxSpace(shifted.energy, order), functions, ratios + shift)
    rho = down((cut.rho + shift) * (1 - error))
    below = down(lower_bounds(energy, mass, dual, rho)[index - 1] * (1 - error)) - shift
    return above.intersect(Enclosure(down(below), math.inf, lower_by=f"Lehmann-Goerisch, flux order {order}"))


def ritz_bound(pencil: Pencil, trial: TrialSpace, functions: Array, index: int) -> float:
    """A proved upper bound of the index-th ratio from trial functions."""
    raised, lessened = pencil.energy.moved(1.0), pencil.weight.moved(-1.0)
    return float(upper_bounds(trial.gram(raised, functions), trial.gram(lessened, functions))[index - 1])


def positive_shift(pencil: Pencil, ratio: float) -> float:
    """A power of two near the ratio: adding and removing it costs next to nothing.

    Large enough to make the potential of A + shift B positive on every cell, where B is a mass.
    """
    least = abs(ratio) + 1e-300
    density = pencil.weight.potential[:, 0]
    if np.all(density > 0):
        least = max(least, 2 * float(np.max(-pencil.energy.potential[:, 0] / density)))
    return float(2.0 ** round(math.log2(least) + (0.5 if least > abs(ratio) + 1e-300 else 0.0)))


def can_sharpen(pencil: Pencil) -> bool:
    """Whether the Lehmann-Goerisch bound applies: constant coefficients per cell, B a mass, no facet terms."""
    return pencil.energy.steady and pencil.weight.steady and not np.any(pencil.weight.diffusion)
