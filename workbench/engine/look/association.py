"""What each component goes with: its association with every column that is known about the samples."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy.stats import beta

from workbench.engine.multiple import benjamini_hochberg
from workbench.engine.nuisance import Nuisance, indicators
from workbench.engine.tails import SMALLEST_P
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]

FEWEST_SAMPLES = 4


@dataclass(frozen=True, eq=False)
class SampleColumn:
    """One column about the samples.

    Attributes
    ----------
    name : str
    kind : {"number", "classes"}
    values : ndarray of shape (n_samples,)
        The numbers, or the position of each sample's class in ``levels``; NaN where missing.
    levels : tuple of str
        Names of the classes; empty for a number.
    """

    name: str
    kind: Literal["number", "classes"]
    values: FloatArray
    levels: tuple[str, ...] = ()


@dataclass(frozen=True, eq=False)
class AssociationMap:
    """Association of columns (rows) with components (columns).

    Attributes
    ----------
    columns : tuple of str
    r2, r2_adjusted : ndarray of shape (n_columns, n_components)
        Share of the component's variance that the column explains, and the same less what chance explains:
        ``1 - (1 - R2)(n - 1) / (n - 1 - df)``.
    p, q : ndarray of shape (n_columns, n_components)
        p of the F test; false-discovery rate over the whole map.
    n : ndarray of int, shape (n_columns,)
        Samples that have a value.
    df : ndarray of int, shape (n_columns,)
        1 for a number, classes less one otherwise.
    untestable : tuple of str
        For each column the reason why it has no figures (they are NaN), or "".
    """

    columns: tuple[str, ...]
    r2: FloatArray
    r2_adjusted: FloatArray
    p: FloatArray
    q: FloatArray
    n: NDArray[np.intp]
    df: NDArray[np.intp]
    untestable: tuple[str, ...]


def associate(scores: FloatArray, columns: Sequence[SampleColumn]) -> AssociationMap:
    """R2 and p of every component with every column, one at a time.

    A number enters as a straight line, classes by their means. Columns that go together (a group run on a day
    of its own) explain the same component, and this map cannot tell which of them did it. The p assumes
    residuals near normal.

    Parameters
    ----------
    scores : ndarray of shape (n_samples, n_components)
    columns : sequence of SampleColumn

    Raises
    ------
    NumericsError
        When a column is not of the samples' number.

    Examples
    --------
    >>> day = SampleColumn("day", "classes", np.array([0.0, 0, 0, 1, 1, 1]), ("one", "two"))
    >>> found = associate(np.array([[1.0], [2.0], [3.0], [7.0], [8.0], [9.0]]), [day])
    >>> found.r2.round(3), found.p.round(4)
    (array([[0.931]]), array([[0.0018]]))
    """
    scores = np.asarray(scores, dtype=np.float64)
    shape = (len(columns), scores.shape[1])
    r2, adjusted, p = (np.full(shape, np.nan) for _ in range(3))
    n, df = np.zeros(len(columns), dtype=np.intp), np.zeros(len(columns), dtype=np.intp)
    reasons = []
    for j, column in enumerate(columns):
        if column.values.shape != scores.shape[:1]:
            raise NumericsError(
                f"column '{column.name}' has {column.values.size} values for {scores.shape[0]} samples; "
                "give one for each, NaN where it is missing"
            )
        held = ~np.isnan(column.values)
        n[j], df[j], reason = _testable(column, column.values[held])
        reasons.append(reason)
        if not reason:
            r2[j] = _explained(column, column.values[held], scores[held])
            left = n[j] - 1 - df[j]
            adjusted[j] = 1.0 - (1.0 - r2[j]) * (n[j] - 1) / left
            p[j] = np.maximum(beta.sf(r2[j], df[j] / 2, left / 2), SMALLEST_P)
    names = tuple(column.name for column in columns)
    return AssociationMap(names, r2, adjusted, p, benjamini_hochberg(p), n, df, tuple(reasons))


def associate_rows(
    scores: FloatArray, columns: Sequence[SampleColumn], matrix: FloatArray, nuisance: Nuisance
) -> AssociationMap:
    """As :func:`associate`, of components on rows that are linear combinations of the samples.

    Each column (a number, or the indicators of its classes) goes through the same map and loses the same
    nuisance as the components did. Between visits that compares changes with changes: what a subject has all the
    time has no part.

    Parameters
    ----------
    scores : ndarray of shape (n_rows, n_components)
        The nuisance removed.
    columns : sequence of SampleColumn
        Of the samples. One with a missing value in a sample that is used is not tested.
    matrix : ndarray of shape (n_rows, n_samples)
    nuisance : Nuisance
        Of the rows.
    """
    shape = (len(columns), scores.shape[1])
    r2, adjusted, p = (np.full(shape, np.nan) for _ in range(3))
    used = np.abs(matrix).max(axis=0, initial=0.0) > 0.0
    n, df = np.full(len(columns), np.count_nonzero(used)), np.zeros(len(columns), dtype=np.intp)
    reasons = []
    free = nuisance.n_samples - nuisance.rank
    for j, column in enumerate(columns):
        basis = _mapped_basis(column, used, matrix, nuisance)
        df[j] = 0 if basis is None else basis.shape[1]
        left = free - df[j]
        reasons.append(
            "a sample has no value" if basis is None else "nothing of it is left" if not df[j] else ""
        )
        if basis is not None and df[j] and left >= 2:
            r2[j] = np.minimum(np.sum((basis.T @ scores) ** 2, axis=0) / np.sum(scores**2, axis=0), 1.0)
            adjusted[j] = 1.0 - (1.0 - r2[j]) * free / left
            p[j] = np.maximum(beta.sf(r2[j], df[j] / 2, left / 2), SMALLEST_P)
        elif not reasons[-1]:
            reasons[-1] = f"{df[j]} dimensions of {free} rows: nearly one each"
    names = tuple(column.name for column in columns)
    return AssociationMap(names, r2, adjusted, p, benjamini_hochberg(p), n, df, tuple(reasons))


def _mapped_basis(
    column: SampleColumn, used: NDArray[np.bool_], matrix: FloatArray, nuisance: Nuisance
) -> FloatArray | None:
    """Orthonormal basis of a column on the rows, nuisance removed; None where a value is missing."""
    held = column.values[used]
    if np.isnan(held).any():
        return None
    values = held[:, None] if column.kind == "number" else indicators(held.astype(np.intp))
    rest = nuisance.residuals(matrix[:, used] @ (values - values.mean(axis=0)))
    left, sizes, _ = np.linalg.svd(rest, full_matrices=False)
    whole = np.linalg.norm(matrix, 2) * np.linalg.norm(values - values.mean(axis=0))
    basis: FloatArray = left[:, sizes > 1e-8 * whole]
    return basis


def _testable(column: SampleColumn, held: FloatArray) -> tuple[int, int, str]:
    """Return samples with a value, degrees of freedom of the column, and why it cannot be tested, if so."""
    n, different = held.size, np.unique(held).size
    df = 1 if column.kind == "number" else max(different - 1, 0)
    if n < FEWEST_SAMPLES:
        return n, df, f"only {n} samples have a value"
    if different < 2:
        return n, df, "one value in all samples"
    if n - 1 - df < 2:
        return n, df, f"{different} classes among {n} samples: nearly one each"
    return n, df, ""


def _explained(column: SampleColumn, held: FloatArray, scores: FloatArray) -> FloatArray:
    """Share of each score's variance that the column explains; NaN for scores without variance."""
    centred = scores - scores.mean(axis=0)
    total = np.sum(centred**2, axis=0)
    if column.kind == "number":
        line = held - held.mean()
        explained = (line / np.linalg.norm(line) @ centred) ** 2
    else:
        _, code = np.unique(held, return_inverse=True)
        member = np.eye(int(code.max()) + 1)[code]
        explained = np.sum((member.T @ centred) ** 2 / member.sum(axis=0)[:, None], axis=0)
    with np.errstate(invalid="ignore", divide="ignore"):
        share: FloatArray = np.minimum(explained / total, 1.0)
    share[total == 0.0] = np.nan
    return share
