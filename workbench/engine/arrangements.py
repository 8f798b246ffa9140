"""Arrangements of rows for a permutation test: which are allowed, all of them where they are few, else drawn."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import islice, permutations, product

import numpy as np
from numpy.typing import NDArray

from workbench.engine.subjects import SubjectDesign

IndexArray = NDArray[np.intp]


@dataclass(frozen=True, eq=False)
class Exchange:
    """Which rows may take each other's places.

    Attributes
    ----------
    size : int
        Number of rows.
    classes : tuple of ndarray of int, each of shape (n_units, rows_of_a_unit)
        Units of a class may take each other's places, a unit's rows keeping their order; rows of no class stay.

    Examples
    --------
    >>> design = SubjectDesign.of(np.array([0, 0, 0, 1, 1, 1]), np.array([1, 2, 3, 1, 2, 3]))
    >>> [len(part) for part in Exchange.of_subjects(design).batches(1, True, np.random.SeedSequence(0), 10)]
    [1]
    """

    size: int
    classes: tuple[IndexArray, ...]

    @property
    def free(self) -> bool:
        """Whether any row may take any place."""
        return len(self.classes) == 1 and self.classes[0].shape[1] == 1

    @classmethod
    def of_rows(cls, size: int) -> Exchange:
        """Any row may take any place."""
        return cls(size, (np.arange(size)[:, None],))

    @classmethod
    def of_subjects(cls, design: SubjectDesign) -> Exchange:
        """Whole subjects with the same visits take each other's places, the order of the visits kept."""
        order = np.lexsort((design.visit, design.subject))
        rows = np.split(order, np.cumsum(np.bincount(design.subject))[:-1])
        patterns = [np.flatnonzero(design.pattern == one) for one in np.unique(design.pattern)]
        return cls(design.n_samples, tuple(np.array([rows[k] for k in same]) for same in patterns))

    @classmethod
    def within_subjects(cls, design: SubjectDesign) -> Exchange:
        """Rows of one subject take each other's places: for replicates without an order."""
        codes = range(design.n_subjects)
        return cls(design.n_samples, tuple(np.flatnonzero(design.subject == code)[:, None] for code in codes))

    @classmethod
    def side_by_side(cls, several: Sequence[Exchange]) -> Exchange:
        """Rows of several exchanges one after the other, each rearranged on its own."""
        classes, start = [], 0
        for one in several:
            classes += [units + start for units in one.classes]
            start += one.size
        return cls(start, tuple(classes))

    def staying(self) -> Exchange:
        """Return the same rows with none that moves."""
        return Exchange(self.size, ())

    def count(self, limit: int) -> int:
        """How many arrangements there are, or ``limit`` when that is fewer.

        >>> Exchange.of_rows(4).count(1000), Exchange.of_rows(100).count(1000)
        (24, 1000)
        """
        found = 1
        for units in self.classes:
            found = min(found * math.factorial(min(len(units), 20)), limit)
        return found

    def batches(
        self, wanted: int, every: bool, seed: np.random.SeedSequence, batch: int
    ) -> Iterator[IndexArray]:
        """Batches of arrangements of the rows, the identity not among the enumerated ones.

        Parameters
        ----------
        wanted : int
            How many in all.
        every : bool
            Enumerate them in lexicographic order instead of drawing them.
        seed : SeedSequence
            Arrangements are drawn one after the other: they do not depend on the batches.
        batch : int
            Arrangements at a time; the last batch may be smaller.

        Yields
        ------
        ndarray of shape (up to batch, size)

        Examples
        --------
        >>> [len(part) for part in Exchange.of_rows(3).batches(5, True, np.random.SeedSequence(0), 4)]
        [4, 1]
        """
        chosen = islice(self._every() if every else self._drawn(seed), wanted)
        while part := list(islice(chosen, batch)):
            yield np.array(part, dtype=np.intp)

    def _every(self) -> Iterator[IndexArray]:
        orders = product(*(permutations(range(len(units))) for units in self.classes))
        return (self._arranged([np.array(one) for one in order]) for order in islice(orders, 1, None))

    def _drawn(self, seed: np.random.SeedSequence) -> Iterator[IndexArray]:
        draw = np.random.default_rng(seed)
        while True:
            yield self._arranged([draw.permutation(len(units)) for units in self.classes])

    def _arranged(self, orders: list[IndexArray]) -> IndexArray:
        arrangement = np.arange(self.size)
        for units, order in zip(self.classes, orders, strict=True):
            arrangement[units] = units[order]
        return arrangement
