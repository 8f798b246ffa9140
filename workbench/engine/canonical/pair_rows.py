"""The rows in which two or more sides are compared, and which of them may take each other's places."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
import scipy.linalg
from numpy.typing import NDArray

from workbench.engine.arrangements import Exchange
from workbench.engine.nuisance import Nuisance, check_finite, indicators, standardise
from workbench.engine.sides import block_slices, block_weights
from workbench.engine.subjects import SubjectDesign, centred, differences, subject_means
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
Level = Literal["visits", "subjects"]
BlockSizes = Sequence[int] | None


@dataclass(frozen=True, eq=False)
class ExchangeableRows:
    """Sides as rows that are exchangeable when nothing is shared.

    Attributes
    ----------
    sides : tuple of ndarray, each of shape (n_rows, n_varying)
        Standardised, the nuisance removed.
    exchange : Exchange
        Which rows may take each other's places.
    carried : ndarray of shape (n_rows, n_carried)
        Orthonormal directions that are removed from every side and that rearranging rows would bring back:
        an arrangement is followed by the smallest rotation that takes them out again.
    invariant : ndarray of shape (n_rows, n_invariant)
        Orthonormal directions that are removed and that no arrangement brings back: the mean, subjects' means.
    freedom : int
        Dimensions that the nuisance leaves.
    words : str
        What is exchanged.
    """

    sides: tuple[FloatArray, ...]
    exchange: Exchange
    carried: FloatArray
    invariant: FloatArray
    freedom: int
    words: str


def design_of(
    subjects: NDArray[Any] | SubjectDesign | None, times: NDArray[Any] | None
) -> SubjectDesign | None:
    """Design of samples from codes of subjects and times, or as given; None where each is of its own subject."""
    if subjects is None:
        return None
    design = (
        subjects if isinstance(subjects, SubjectDesign) else SubjectDesign.of(np.asarray(subjects), times)
    )
    return None if design.kind == "single" else design


def exchangeable_rows(
    sides: Sequence[FloatArray],
    nuisance: FloatArray | None,
    design: SubjectDesign | None,
    level: Level,
    block_sizes: Sequence[BlockSizes],
    *,
    turned: bool = True,
) -> ExchangeableRows:
    """Rows for a permutation test of what sides share, by the design of the samples.

    - one sample for each subject: samples, or with a nuisance the dimensions of an orthonormal basis that it
      leaves (Huh & Jhun 2001);
    - ``level="subjects"``: means of subjects, likewise;
    - pairs: differences, the mean difference removed, likewise;
    - ordered visits: deviations from the subjects' means, visit effects and nuisance removed; whole subjects with
      the same visits are exchanged;
    - replicates without an order: deviations from the subjects' means; rows of one subject are exchanged.

    Subjects with one sample say nothing about changes and are left out there. Without ``turned`` samples are not
    turned into a basis of what the nuisance leaves; they carry it.

    Raises
    ------
    NumericsError
        When values are not finite, rows differ in number, no subject has several samples, or a side has no
        variation left.
    """
    n = np.shape(sides[0])[0]
    for letter, side in zip("XYZ" + "." * len(sides), sides, strict=False):
        if np.shape(side)[:1] != (n,):
            raise NumericsError(
                f"side X has {n} rows and side {letter} {np.shape(side)[0]}; give the same samples in the same order"
            )
    if level not in ("visits", "subjects"):
        raise NumericsError(f"level is {level!r}; allowed: 'visits' (changes), 'subjects' (their means)")
    values: list[FloatArray] = [check_finite(side, "the block") for side in sides]
    if design is None:
        return _free(values, nuisance, block_sizes, "samples", turned)
    if level == "subjects":
        means = [subject_means(design, side) for side in values]
        return _free(means, _through(subject_means, design, nuisance), block_sizes, "subjects' means")
    held = design.repeated
    design = design.take(np.flatnonzero(held))
    values = [side[held] for side in values]
    columns = None if nuisance is None else np.asarray(nuisance, dtype=np.float64)[held]
    if design.kind == "pairs":
        changes = [differences(design, side) for side in values]
        return _free(changes, _through(differences, design, columns), block_sizes, "differences")
    return _structured(values, columns, design, block_sizes)


def residual_basis(basis: FloatArray) -> FloatArray:
    """Orthonormal basis, shape (n, n - c), of the dimensions that ``c`` orthonormal columns leave."""
    left: FloatArray = np.asarray(scipy.linalg.qr(basis)[0][:, basis.shape[1] :], dtype=np.float64)
    return left


def _through(how: Any, design: SubjectDesign, columns: FloatArray | None) -> FloatArray | None:
    return None if columns is None else np.asarray(how(design, columns), dtype=np.float64)


def _free(
    values: Sequence[FloatArray],
    nuisance: FloatArray | None,
    block_sizes: Sequence[BlockSizes],
    words: str,
    turned: bool = True,
) -> ExchangeableRows:
    removed = Nuisance.of(nuisance, len(values[0]))
    rows = tuple(_standard(side, removed, sizes) for side, sizes in zip(values, block_sizes, strict=True))
    carried, invariant = removed.basis[:, 1:], removed.basis[:, :1]
    if removed.rank > 1 and turned:
        left = residual_basis(removed.basis)
        rows, words = tuple(left.T @ side for side in rows), f"dimensions that the nuisance leaves of {words}"
        carried = invariant = np.empty((left.shape[1], 0))
    size = len(rows[0])
    freedom = len(values[0]) - removed.rank
    return ExchangeableRows(rows, Exchange.of_rows(size), carried, invariant, freedom, words)


def _structured(
    values: Sequence[FloatArray],
    nuisance: FloatArray | None,
    design: SubjectDesign,
    block_sizes: Sequence[BlockSizes],
) -> ExchangeableRows:
    n = design.n_samples
    own = indicators(design.subject)
    exchange, words = Exchange.within_subjects(design), "samples inside subjects"
    if design.kind == "visits":
        own = np.hstack([own, indicators(design.visit)])
        exchange, words = Exchange.of_subjects(design), "whole subjects with the same visits"
    extra = np.empty((n, 0)) if nuisance is None else centred(design, nuisance)
    removed = Nuisance.of(np.hstack([own, extra]), n)
    rows = tuple(_standard(side, removed, sizes) for side, sizes in zip(values, block_sizes, strict=True))
    invariant = 1 + int(np.count_nonzero(removed.kept < own.shape[1]))
    basis = removed.basis
    return ExchangeableRows(
        rows, exchange, basis[:, invariant:], basis[:, :invariant], n - removed.rank, words
    )


def _standard(values: FloatArray, removed: Nuisance, block_sizes: BlockSizes) -> FloatArray:
    block = standardise(values, removed)
    n_features = block.kept.size + block.dropped.size
    varies = np.isin(np.arange(n_features), block.kept)
    weighted: FloatArray = block.values * block_weights(
        varies, block_slices(block_sizes, n_features, "of the test")
    )
    return weighted
