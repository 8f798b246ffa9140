"""Several samples of one subject: what kind of design they form, and what may be computed from it.

Samples of one subject resemble each other, so that they are never pooled as if they were independent. A
question about changes looks within subjects (differences of two samples, deviations from the subject's own
mean), a question about persons looks at subjects' means.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from workbench.engine.folds import Fold, Seed, balanced_folds
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]
Kind = Literal["single", "pairs", "visits", "replicates"]

#: Times form a schedule when they have at most this many times as many values as a subject has samples.
SCHEDULE = 2


@dataclass(frozen=True, eq=False)
class SubjectDesign:
    """Which samples belong to which subject, in what order.

    Attributes
    ----------
    kind : {"single", "pairs", "visits", "replicates"}
        One sample a subject; two each, in order; more than two in order (not all need have all); several
        without an order.
    reason : str
        Why it is that kind, in words.
    subject : ndarray of int, shape (n_samples,)
        Subject of each sample, numbered from 0 in the order of the codes given.
    visit : ndarray of int, shape (n_samples,)
        Visit of each sample from 0: its time's place in the schedule, or its place among the subject's own
        samples where times follow no schedule; 0 throughout without times.
    pattern : ndarray of int, shape (n_subjects,)
        Subjects with the same visits have the same number.
    scheduled : bool
        Whether the times are those of a schedule (few values, shared by the subjects).
    pairs : ndarray of int, shape (n_pairs, 2)
        Rows of the earlier and of the later sample of each pair, subject by subject; empty for other kinds.

    Examples
    --------
    >>> design = SubjectDesign.of(np.array([7, 7, 9, 9]), np.array([0.0, 1.0, 1.0, 0.0]))
    >>> design.kind, design.pairs.tolist()
    ('pairs', [[0, 1], [3, 2]])
    """

    kind: Kind
    reason: str
    subject: IndexArray
    visit: IndexArray
    pattern: IndexArray
    scheduled: bool
    pairs: IndexArray

    @classmethod
    def of(cls, subjects: NDArray[Any], times: NDArray[Any] | None = None) -> SubjectDesign:
        """Design of samples with the given subjects and times.

        Parameters
        ----------
        subjects : ndarray of shape (n_samples,)
            Codes or names.
        times : ndarray of shape (n_samples,), optional
            Whatever orders a subject's samples: a time, a visit number, or the code of a group that each
            subject has one sample of. Without it samples have no order, and nothing that all subjects have
            in common over time can be told from chance.

        Raises
        ------
        NumericsError
            When shapes differ, a time is missing, or a subject has two samples at one time.
        """
        names, subject = np.unique(np.asarray(subjects), return_inverse=True)
        counts = np.bincount(subject)
        moments = None if times is None else _check_times(np.asarray(times), subject, names)
        most = int(counts.max(initial=0))
        scheduled = moments is not None and np.unique(moments).size <= SCHEDULE * most
        visit = _visits(subject, moments, scheduled)
        kind, reason = _kind(counts, moments is not None)
        pairs = _pairs(subject, visit, counts) if kind == "pairs" else np.empty((0, 2), dtype=np.intp)
        return cls(kind, reason, subject, visit, _patterns(subject, visit, names.size), scheduled, pairs)

    @property
    def n_samples(self) -> int:
        """Number of samples."""
        return int(self.subject.size)

    @property
    def n_subjects(self) -> int:
        """Number of subjects."""
        return int(self.pattern.size)

    @property
    def repeated(self) -> NDArray[np.bool_]:
        """Samples of subjects that have at least two: what a question about changes can use."""
        return np.asarray(np.bincount(self.subject)[self.subject] >= 2)

    def take(self, rows: NDArray[Any]) -> SubjectDesign:
        """Design of some of the samples, in the order given; visits keep their places in the schedule."""
        rows = np.arange(self.n_samples)[rows]
        if self.kind in ("pairs", "visits"):
            return SubjectDesign.of(self.subject[rows], self.visit[rows])
        return SubjectDesign.of(self.subject[rows])


def differences(design: SubjectDesign, x: FloatArray) -> FloatArray:
    """Later less earlier sample of each pair, shape (n_pairs, n_features), in the order of ``design.pairs``.

    Subjects with one sample have no row. What all subjects have in common over time is left in: remove the
    intercept.

    Raises
    ------
    NumericsError
        When the design is not made of pairs, or ``x`` has another number of rows.

    Examples
    --------
    >>> design = SubjectDesign.of(np.array([0, 0, 1, 1]), np.array([1, 2, 1, 2]))
    >>> differences(design, np.array([[1.0], [4.0], [2.0], [2.5]])).ravel()
    array([3. , 0.5])
    """
    x = _check_rows(design, x)
    if design.kind != "pairs":
        raise NumericsError(f"differences need two ordered samples a subject; here: {design.reason}")
    changes: FloatArray = x[design.pairs[:, 1]] - x[design.pairs[:, 0]]
    return changes


def subject_means(design: SubjectDesign, x: FloatArray) -> FloatArray:
    """Mean of each subject's samples, shape (n_subjects, n_features), subjects in the order of their codes.

    Raises
    ------
    NumericsError
        When ``x`` has another number of rows than the design.

    Examples
    --------
    >>> design = SubjectDesign.of(np.array([0, 1, 0]))
    >>> subject_means(design, np.array([[1.0], [5.0], [2.0]])).ravel()
    array([1.5, 5. ])
    """
    x = _check_rows(design, x)
    sums = np.zeros((design.n_subjects, *x.shape[1:]))
    np.add.at(sums, design.subject, x)
    counts = np.bincount(design.subject).reshape(-1, *(1,) * (x.ndim - 1))
    means: FloatArray = sums / counts
    return means


def centred(design: SubjectDesign, x: FloatArray) -> FloatArray:
    """Each sample less the mean of its subject's samples, shape of ``x``; zero for a subject with one.

    Raises
    ------
    NumericsError
        When ``x`` has another number of rows than the design.

    Examples
    --------
    >>> design = SubjectDesign.of(np.array([0, 1, 0]))
    >>> centred(design, np.array([[1.0], [5.0], [2.0]])).ravel()
    array([-0.5,  0. ,  0.5])
    """
    deviations: FloatArray = _check_rows(design, x) - subject_means(design, x)[design.subject]
    return deviations


def subject_labels(design: SubjectDesign, labels: NDArray[Any] | None) -> IndexArray:
    """One label for each subject, shape (n_subjects,): its samples' label, or their set of labels.

    Two subjects have the same number when their samples have the same labels, however often; without labels
    all are 0. Folds and half-samples of whole subjects are balanced over these.

    Examples
    --------
    >>> design = SubjectDesign.of(np.array([0, 0, 1, 1, 2]))
    >>> subject_labels(design, np.array(["a", "b", "b", "a", "a"]))
    array([1, 1, 0])
    """
    if labels is None:
        return np.zeros(design.n_subjects, dtype=np.intp)
    levels = np.unique(_check_rows(design, np.asarray(labels)), return_inverse=True)[1]
    held = np.zeros((design.n_subjects, int(levels.max(initial=0)) + 1), dtype=np.bool_)
    held[design.subject, levels] = True
    codes: IndexArray = np.unique(held, axis=0, return_inverse=True)[1].reshape(-1)
    return codes


def whole_subject_folds(
    design: SubjectDesign, labels: NDArray[Any] | None, folds: int, random_state: Seed
) -> list[Fold]:
    """Train and test rows of each fold, all samples of a subject on one side, labels spread over the folds.

    Raises
    ------
    NumericsError
        When there are fewer subjects than folds.

    Examples
    --------
    >>> design = SubjectDesign.of(np.array([0, 0, 1, 1, 2, 2]))
    >>> [test.size for _, test in whole_subject_folds(design, None, 3, 0)]
    [2, 2, 2]
    """
    if folds > design.n_subjects:
        raise NumericsError(
            f"{folds} folds for {design.n_subjects} subjects; a subject's samples stay together, so that "
            "there can be no more folds than subjects"
        )
    dealt = balanced_folds(subject_labels(design, labels), design.n_subjects, folds, random_state)
    rows = [[np.flatnonzero(np.isin(design.subject, part)) for part in fold] for fold in dealt]
    return [(train, test) for train, test in rows]


def _check_rows(design: SubjectDesign, x: NDArray[Any]) -> NDArray[Any]:
    x = np.asarray(x)
    if x.shape[:1] != (design.n_samples,):
        raise NumericsError(
            f"values of shape {x.shape} for {design.n_samples} samples of {design.n_subjects} subjects; "
            "give one row for each sample, in the same order"
        )
    return x


def _check_times(times: NDArray[Any], subject: IndexArray, names: NDArray[Any]) -> IndexArray:
    """Places of the times in their order; every subject has at most one sample at each."""
    if times.shape != subject.shape:
        raise NumericsError(f"{times.size} times for {subject.size} samples; give one for each")
    if np.issubdtype(times.dtype, np.floating) and np.isnan(times).any():
        missing = int(np.flatnonzero(np.isnan(times))[0])
        raise NumericsError(
            f"sample {missing} (from 0) of subject {names[subject[missing]]} has no time; leave it out, or "
            "fill it in"
        )
    values, moments = np.unique(times, return_inverse=True)
    order = np.lexsort((moments, subject))
    same = (np.diff(subject[order]) == 0) & (np.diff(moments[order]) == 0)
    if same.any():
        twice = order[np.flatnonzero(same)[0]]
        raise NumericsError(
            f"subject {names[subject[twice]]} has two samples at time {values[moments[twice]]}; give each its "
            "own time, or leave one out"
        )
    return moments.astype(np.intp)


def _visits(subject: IndexArray, moments: IndexArray | None, scheduled: bool) -> IndexArray:
    if moments is None:
        return np.zeros(subject.size, dtype=np.intp)
    if scheduled:
        return moments
    order = np.lexsort((moments, subject))
    first = np.searchsorted(subject[order], subject[order])
    visit = np.empty(subject.size, dtype=np.intp)
    visit[order] = np.arange(subject.size) - first
    return visit


def _kind(counts: IndexArray, ordered: bool) -> tuple[Kind, str]:
    most, alone = int(counts.max(initial=0)), int(np.count_nonzero(counts == 1))
    left = f", {alone} of {counts.size} with one alone" if alone else ""
    if most <= 1:
        return "single", f"one sample for each of {counts.size} subjects"
    if not ordered:
        return (
            "replicates",
            f"up to {most} samples for each of {counts.size} subjects{left}, without an order",
        )
    if most == 2:
        return "pairs", f"two ordered samples for each of {counts.size} subjects{left}"
    return "visits", f"up to {most} ordered visits of {counts.size} subjects{left}"


def _pairs(subject: IndexArray, visit: IndexArray, counts: IndexArray) -> IndexArray:
    order = np.lexsort((visit, subject))
    rows: IndexArray = order[counts[subject[order]] == 2].reshape(-1, 2)
    return rows


def _patterns(subject: IndexArray, visit: IndexArray, n_subjects: int) -> IndexArray:
    held = np.zeros((n_subjects, int(visit.max(initial=0)) + 1), dtype=np.intp)
    np.add.at(held, (subject, visit), 1)
    codes: IndexArray = np.unique(held, axis=0, return_inverse=True)[1].reshape(-1)
    return codes
