"""A coefficient that is stated region by region."""

from collections.abc import Callable, Collection, Sequence
from dataclasses import dataclass
from typing import Generic, TypeVar

import numpy as np
from numpy.typing import NDArray

T = TypeVar("T")
U = TypeVar("U")


@dataclass(frozen=True)
class Piecewise(Generic[T]):
    """One value for each of some regions, and one for everywhere else.

    entries : pairs of a region's name and the value there, in order of precedence: where regions
        overlap the first one counts. The last name is ``None`` and its value holds everywhere else;
        no name occurs twice.
    """

    entries: tuple[tuple[str | None, T], ...]

    @staticmethod
    def everywhere(value: T) -> "Piecewise[T]":
        """The same value in all regions."""
        return Piecewise(((None, value),))

    @property
    def uniform(self) -> bool:
        """Whether no region is named."""
        return len(self.entries) == 1

    @property
    def names(self) -> tuple[str | None, ...]:
        """The names of the entries in their order, ``None`` last."""
        return tuple(name for name, _ in self.entries)

    @property
    def values(self) -> tuple[T, ...]:
        """The values in the order of the entries, the one for everywhere else last."""
        return tuple(value for _, value in self.entries)

    def within(self, regions: Collection[str]) -> T:
        """The value at a place that lies in the regions named and in no other."""
        return next(value for name, value in self.entries if name is None or name in regions)

    def indices(self, names: Sequence[str], inside: NDArray[np.bool_]) -> NDArray[np.int64]:
        """The number of the entry that holds at each of n places, (n,).

        Parameters
        ----------
        names : of all R regions; every region of the entries is among them.
        inside : (n, R) whether each place lies in each region.
        """
        chosen = np.full(len(inside), len(self.entries) - 1, dtype=np.int64)
        for number in range(len(self.entries) - 2, -1, -1):
            name = self.entries[number][0]
            chosen[inside[:, [known == name for known in names]].any(axis=1)] = number
        return chosen

    def map(self, function: Callable[[T], U]) -> "Piecewise[U]":
        """What a function makes of every value."""
        return Piecewise(tuple((name, function(value)) for name, value in self.entries))
