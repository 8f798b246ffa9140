"""Which arrangements of the outcome a permutation test may draw, with several samples of a subject or without."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from workbench.engine.smallest_p import TIE_TOLERANCE
from workbench.engine.subjects import SubjectDesign
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]

FEWEST_ARRANGEMENTS = 120


@dataclass(frozen=True, eq=False)
class Arrangements:
    """Rows whose outcome each sample gets.

    Attributes
    ----------
    rows : ndarray of int, shape (n_arrangements, n_samples)
        Empty where the test is withheld.
    how : str
        What was exchanged, in words.
    available : int
        Arrangements of the outcome that differ, counted up to 10^9.
    withheld : str or None
        Why there is no test.
    """

    rows: IndexArray
    how: str
    available: int
    withheld: str | None


@dataclass(frozen=True, eq=False)
class PermutationNull:
    """Permutation test of a whole procedure.

    Attributes
    ----------
    p : float or None
        ``(1 + exceedances) / (1 + permutations)``; None where withheld.
    observed : float
        AUC, or the Q2 that the blocks add to the nuisance.
    null : ndarray of shape (permutations,)
    how : str
        What was exchanged.
    withheld : str or None
    """

    p: float | None
    observed: float
    null: FloatArray
    how: str
    withheld: str | None


def permutation_null(statistics: FloatArray, arrangements: Arrangements) -> PermutationNull:
    """Return the test from the statistic of the outcome as delivered, then of each arrangement; large is good.

    Examples
    --------
    >>> drawn = Arrangements(np.zeros((3, 4), dtype=int), "samples exchanged", 24, None)
    >>> permutation_null(np.array([0.9, 0.4, 0.9, 0.5]), drawn).p
    0.5
    """
    observed, null = float(statistics[0]), statistics[1:]
    bar = observed - TIE_TOLERANCE * abs(observed)
    p = float((1 + np.count_nonzero(null >= bar)) / (1 + null.size)) if null.size else None
    return PermutationNull(p, observed, null, arrangements.how, arrangements.withheld)


def outcome_arrangements(
    outcome: NDArray[Any],
    permutations: int,
    seed: int,
    *,
    subjects: SubjectDesign | None = None,
    exchange: NDArray[Any] | None = None,
) -> Arrangements:
    """Draw arrangements under which the outcome has nothing to do with the features.

    One sample a subject: samples are exchanged. An outcome that is the same in all samples of a subject:
    subjects with the same visits exchange it whole. One that differs within subjects: where subjects with
    the same visits differ in it, they exchange it whole, in the order of the visits; else (every subject
    before and after, say) it is exchanged within each subject.

    Parameters
    ----------
    outcome : ndarray of shape (n_samples,) or (n_samples, n_columns)
        For counting arrangements that differ.
    permutations : int
    seed : int
        Arrangement ``i`` is drawn from the seed and ``i``.
    subjects : SubjectDesign, optional
    exchange : ndarray of shape (n_samples,), optional
        Level of the nuisance: samples (subjects, by their first sample) are exchanged only within it, so that classes
        stay as tangled with it as they are. Exchanged freely they are not, and p is too large (half as many below
        0.05 as there should be, with 80 % of a class in one of two batches).

    Raises
    ------
    NumericsError
        When labels and samples differ in number.

    Examples
    --------
    >>> found = outcome_arrangements(np.array([0, 0, 1, 1]), 99, 0)
    >>> found.available, found.rows.shape[0], found.withheld is None
    (6, 0, False)
    """
    codes = np.unique(np.asarray(outcome), axis=0, return_inverse=True)[1].reshape(-1)
    labels = np.zeros(codes.size, dtype=np.intp)
    if exchange is not None:
        if len(exchange) != codes.size:
            raise NumericsError(
                f"{len(exchange)} labels of exchange for {codes.size} samples; give one for each"
            )
        labels = np.unique(np.asarray(exchange), return_inverse=True)[1].reshape(-1)
    units, cells, how = _units(codes, subjects, labels)
    available = _count(units, cells, codes)
    if available < FEWEST_ARRANGEMENTS:
        return Arrangements(
            np.empty((0, codes.size), dtype=np.intp),
            how,
            available,
            f"only {available} arrangements of the outcome differ ({how}), fewer than {FEWEST_ARRANGEMENTS}: "
            "no p could be small enough to mean anything",
        )
    drawn = [_draw(units, cells, codes.size, seed, i) for i in range(permutations)]
    rows = np.array(drawn, dtype=np.intp).reshape(permutations, codes.size)
    return Arrangements(rows, how, available, None)


Units = list[IndexArray]


def _units(
    codes: IndexArray, subjects: SubjectDesign | None, labels: IndexArray
) -> tuple[Units, IndexArray, str]:
    """Rows that move together, in the order of their visits, and the cell within which units change places."""
    among = " within levels of the nuisance" if np.unique(labels).size > 1 else ""
    if subjects is None or subjects.kind == "single":
        return [np.array([i]) for i in range(codes.size)], labels, f"samples exchanged{among}"
    whole = [
        rows[np.argsort(subjects.visit[rows], kind="stable")]
        for rows in (np.flatnonzero(subjects.subject == s) for s in range(subjects.n_subjects))
    ]
    first = np.array([labels[rows[0]] for rows in whole])
    cells = np.unique(np.column_stack([subjects.pattern, first]), axis=0, return_inverse=True)[1].reshape(-1)
    constant = all(np.unique(codes[rows]).size == 1 for rows in whole)
    if constant or _count(whole, cells, codes) >= FEWEST_ARRANGEMENTS:
        return whole, cells, f"subjects with the same visits exchanged whole{among}"
    return [np.array([i]) for i in range(codes.size)], subjects.subject, "samples exchanged within subjects"


def _count(units: Units, cells: IndexArray, codes: IndexArray) -> int:
    """Count arrangements that differ: over the cells, ``units! / prod(units of equal outcome)!``."""
    logarithm = 0.0
    contents = [tuple(codes[rows].tolist()) for rows in units]
    for cell in np.unique(cells):
        inside = [contents[u] for u in np.flatnonzero(cells == cell)]
        logarithm += math.lgamma(len(inside) + 1)
        logarithm -= sum(math.lgamma(inside.count(one) + 1) for one in set(inside))
    return round(math.exp(min(logarithm, math.log(1e9))))


def _draw(units: Units, cells: IndexArray, n: int, seed: int, i: int) -> IndexArray:
    rng = np.random.default_rng(np.random.SeedSequence(seed, spawn_key=(0, 0, i)))
    rows = np.arange(n)
    for cell in np.unique(cells):
        inside = np.flatnonzero(cells == cell)
        for to, source in zip(inside, rng.permutation(inside), strict=True):
            rows[units[to]] = units[source]
    return rows
