"""Folds for cross-validation in which every level of the design is spread over all of them."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from workbench.errors import NumericsError

IndexArray = NDArray[np.intp]
Fold = tuple[IndexArray, IndexArray]
Seed = int | np.random.SeedSequence | np.random.Generator | None


def balanced_folds(labels: NDArray[np.generic] | None, n: int, folds: int, random_state: Seed) -> list[Fold]:
    """Train and test positions of each fold, every level of ``labels`` spread over the folds.

    Samples are dealt out in random order, those of the rarest levels first, each to the fold that holds
    fewest of its (rarest, then next) level, then to the smallest fold. With one label per sample each
    level's counts differ by at most 1 between folds, and so do the folds' sizes.

    Parameters
    ----------
    labels : ndarray of shape (n,) or (n, n_factors) or None
        Level of each sample, for one factor or several; ``None`` deals them out without regard.
    n : int
        Number of samples.
    folds : int
        From 2 to ``n``.
    random_state : int, SeedSequence, Generator or None
        Passed to :func:`numpy.random.default_rng`.

    Returns
    -------
    list of (train, test)
        Sorted positions; the test parts divide the samples between them.

    Raises
    ------
    NumericsError
        When ``folds`` is out of range or ``labels`` has another number of rows than ``n``.

    Examples
    --------
    >>> batch = np.array(["a", "a", "a", "a", "b", "b"])
    >>> [sorted(batch[test].tolist()) for _, test in balanced_folds(batch, 6, 2, 0)]
    [['a', 'a', 'b'], ['a', 'a', 'b']]
    """
    if not 2 <= folds <= n:
        raise NumericsError(f"{folds} folds for {n} samples; allowed: from 2 to the number of samples")
    codes = _level_codes(labels, n)
    rarity = np.column_stack([np.bincount(column)[column] for column in codes.T])
    order = np.random.default_rng(random_state).permutation(n)
    order = order[np.lexsort((codes[order, 0], rarity[order].min(axis=1)))]
    fold_of = _deal(codes, rarity, order, folds)
    return [(np.flatnonzero(fold_of != fold), np.flatnonzero(fold_of == fold)) for fold in range(folds)]


def _level_codes(labels: NDArray[np.generic] | None, n: int) -> IndexArray:
    if labels is None:
        return np.zeros((n, 1), dtype=np.intp)
    table = np.asarray(labels)
    table = table[:, None] if table.ndim == 1 else table
    if table.ndim != 2 or table.shape[0] != n or table.shape[1] == 0:
        raise NumericsError(
            f"labels have shape {np.shape(labels)}; give one row for each of the {n} samples, in their order"
        )
    return np.column_stack([np.unique(column, return_inverse=True)[1] for column in table.T])


def _deal(codes: IndexArray, rarity: IndexArray, order: IndexArray, folds: int) -> IndexArray:
    """Fold of each sample: one after the other, to the fold that lacks its levels most."""
    counts = [np.zeros((column.max() + 1, folds), dtype=np.intp) for column in codes.T]
    sizes = np.zeros(folds, dtype=np.intp)
    fold_of = np.empty(len(codes), dtype=np.intp)
    for sample in order:
        by_rarity = np.argsort(rarity[sample], kind="stable")
        keys = [sizes] + [counts[factor][codes[sample, factor]] for factor in by_rarity[::-1]]
        fold = np.lexsort(keys)[0]
        for factor, level in enumerate(codes[sample]):
            counts[factor][level, fold] += 1
        sizes[fold] += 1
        fold_of[sample] = fold
    return fold_of
