"""Which course each feature takes over the run order: none, a level per batch, or a curve per batch."""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property, lru_cache
from hashlib import blake2b

import numpy as np
from numpy.typing import NDArray

from workbench.prepare.local_lines import local_lines, medians, read_off
from workbench.prepare.tables import Mask, Matrix
from workbench.prepare.words import some

NONE, LEVEL, CURVE = 0, 1, 2
FEWEST_FOR_LEVEL = 3
SEEN_IN_POOLS = 0.7
BETTER = 0.9
MOST_FOLDS = 20
QUESTIONS_KEPT = 8


@dataclass(frozen=True, eq=False)
class BatchPools:
    """The pools of one batch in run order: names, order (n_pools,), logarithms (n_pools, n_features)."""

    batch: str
    names: tuple[str, ...]
    x: Matrix
    logs: Matrix


@dataclass(frozen=True, eq=False)
class BatchCourse:
    """What is taken from the logarithms at each place of a batch's pools, (n_places, n_features)."""

    batch: str
    x: Matrix
    course: Matrix


@dataclass(frozen=True, eq=False)
class Courses:
    """The chosen courses.

    Attributes
    ----------
    kinds : int ndarray of shape (n_features,)
        0 none, 1 a level per batch, 2 a curve per batch (a level where a batch has too few pools for a curve).
    batches : tuple of BatchCourse
        Batches that are corrected.
    pools : tuple of str
        Names of the pools, and ``left_out``, (n_pools, n_features): what the course fitted without it takes from each.
    reason : str
        Why no batch is corrected; empty when one is.
    cautions : tuple of str
        What was left alone, and why.
    """

    kinds: NDArray[np.int_]
    batches: tuple[BatchCourse, ...]
    pools: tuple[str, ...]
    left_out: Matrix
    reason: str
    cautions: tuple[str, ...]

    def of_features(self, places: NDArray[np.intp]) -> Courses:
        """Return the courses of some of the features; with no pool at all, that they have none."""
        if not self.batches:
            return replace(
                self, kinds=np.zeros(len(places), dtype=np.int_), left_out=np.empty((0, len(places)))
            )
        batches = tuple(replace(batch, course=batch.course[:, places]) for batch in self.batches)
        return replace(self, kinds=self.kinds[places], batches=batches, left_out=self.left_out[:, places])


@dataclass(frozen=True, eq=False)
class CourseQuestion:
    """Pools, and how their courses are to be fitted; equal when every number and name is.

    Every feature's course depends on its own readings in the pools alone, and no sample teaches it anything: the
    question is the same in every fold of a validation, and is answered once.
    """

    batches: tuple[BatchPools, ...]
    fewest: int
    span: float

    @cached_property
    def digest(self) -> bytes:
        """Hash of all that the answer depends on."""
        found = blake2b(repr((self.fewest, self.span)).encode())
        for batch in self.batches:
            found.update(repr((batch.batch, batch.names, batch.logs.shape)).encode())
            for part in (batch.x, batch.logs):
                found.update(np.ascontiguousarray(part).tobytes())
        return found.digest()

    def __hash__(self) -> int:
        return hash(self.digest)

    def __eq__(self, other: object) -> bool:
        return isinstance(other, CourseQuestion) and self.digest == other.digest


@lru_cache(maxsize=QUESTIONS_KEPT)
def answered(question: CourseQuestion) -> Courses:
    """Return :func:`choose_courses` of a question; the last few answers are kept, and nobody can write into them."""
    courses = choose_courses(question.batches, question.fewest, question.span)
    for array in (courses.kinds, courses.left_out, *(batch.course for batch in courses.batches)):
        array.flags.writeable = False
    return courses


def choose_courses(batches: tuple[BatchPools, ...], fewest: int, span: float) -> Courses:
    """Return the course of every feature, chosen by predicting left-out pools.

    A more complex course must lower the mean absolute error of left-out pools to nine tenths of that of any
    simpler one: with the few pools that a study has, a tie is drift that is not there. A feature must be
    seen in 70 % of a batch's pools for a curve, in three of them for a level.

    Parameters
    ----------
    batches : tuple of BatchPools
    fewest : int
        Pools of a batch for a curve.
    span : float
        See :func:`workbench.prepare.local_lines.local_lines`.
    """
    p = batches[0].logs.shape[1] if batches else 0
    usable = tuple(batch for batch in batches if len(batch.names) >= FEWEST_FOR_LEVEL)
    several = len(usable) > 1
    curved = tuple(batch for batch in usable if len(batch.names) >= fewest)
    if not (several or curved):
        return _nothing(batches, p, fewest)
    centre = medians(np.vstack([batch.logs for batch in usable]))
    candidates = [_candidates(batch, usable, fewest, span, several) for batch in usable]
    kinds = _choose(
        np.sum([c.errors for c in candidates], axis=0), np.any([c.may_curve for c in candidates], axis=0)
    )
    courses = tuple(
        BatchCourse(
            batch.batch, batch.x, _pick(kinds, _courses(batch, centre, fewest, span, several), c.may_curve)
        )
        for batch, c in zip(usable, candidates, strict=True)
    )
    left_out = np.vstack([_pick(kinds, c.left_out, c.may_curve) for c in candidates])
    names = tuple(name for batch in usable for name in batch.names)
    return Courses(kinds, courses, names, left_out, "", _cautions(usable, curved, fewest))


@dataclass(frozen=True, eq=False)
class _Candidates:
    """Left-out predictions of one batch: (3 courses, n_pools, n_features); summed errors (3, n_features)."""

    left_out: Matrix
    errors: Matrix
    may_curve: Mask


def _candidates(
    batch: BatchPools, usable: tuple[BatchPools, ...], fewest: int, span: float, several: bool
) -> _Candidates:
    """Return what each course, fitted without a pool, takes from it, and the errors of these predictions."""
    n, p = batch.logs.shape
    others = [other.logs for other in usable if other is not batch]
    left_out, may_curve = np.zeros((3, n, p)), _may_curve(batch.logs, fewest)
    errors = np.zeros((3, n, p))
    for fold in _folds(n):
        rest = np.setdiff1d(np.arange(n), fold)
        kept = BatchPools(batch.batch, (), batch.x[rest], batch.logs[rest])
        centre = medians(np.vstack([kept.logs, *others]))
        courses = _courses(kept, centre, min(fewest, len(rest)), span, several, may_curve)
        for kind in (NONE, LEVEL, CURVE):
            taken = read_off(kept.x, courses[kind], batch.x[fold])
            left_out[kind, fold] = taken
            errors[kind, fold] = np.abs(batch.logs[fold] - centre - taken)
    return _Candidates(left_out, np.nansum(errors, axis=1), may_curve)


def _folds(n: int) -> list[NDArray[np.intp]]:
    """Return the pools left out together: each alone up to 20 pools, else every 20th."""
    count = min(n, MOST_FOLDS)
    return [np.arange(start, n, count) for start in range(count)]


def _courses(
    batch: BatchPools, centre: Matrix, fewest: int, span: float, several: bool, may_curve: Mask | None = None
) -> Matrix:
    """Return the three courses at the batch's pools, (3, n_pools, n_features), relative to the overall centre."""
    n, p = batch.logs.shape
    courses = np.zeros((3, n, p))
    seen = (~np.isnan(batch.logs)).sum(axis=0)
    if several:
        levels = np.where(seen >= min(FEWEST_FOR_LEVEL, n), medians(batch.logs) - centre, 0.0)
        courses[LEVEL:] = np.nan_to_num(levels)
    curve = _may_curve(batch.logs, fewest) if may_curve is None else may_curve & (seen > 0)
    if n >= fewest and curve.any():
        courses[CURVE][:, curve] = local_lines(batch.x, batch.logs[:, curve], span) - centre[curve]
    return courses


def _may_curve(logs: Matrix, fewest: int) -> Mask:
    """Return the features that enough pools have for a curve."""
    seen = (~np.isnan(logs)).sum(axis=0)
    enough: Mask = (seen >= fewest) & (seen >= SEEN_IN_POOLS * len(logs))
    return enough


def _choose(errors: Matrix, may_curve: Mask) -> NDArray[np.int_]:
    """Return the simplest course that a more complex one does not beat clearly."""
    kinds = np.where(errors[LEVEL] < BETTER * errors[NONE], LEVEL, NONE)
    simplest = np.minimum(errors[NONE], errors[LEVEL])
    return np.where(may_curve & (errors[CURVE] < BETTER * simplest), CURVE, kinds)


def _pick(kinds: NDArray[np.int_], courses: Matrix, may_curve: Mask) -> Matrix:
    """Return each feature's own course; in a batch where it may have no curve, the level."""
    here = np.where((kinds == CURVE) & ~may_curve, LEVEL, kinds)
    picked: Matrix = np.take_along_axis(courses, here[None, None, :], axis=0)[0]
    return picked


def _nothing(batches: tuple[BatchPools, ...], p: int, fewest: int) -> Courses:
    sizes = [len(batch.names) for batch in batches]
    most = max(sizes, default=0)
    reason = f"a batch needs {fewest} with their order for a curve and the fullest has {most}"
    caution = (
        f"drift left alone: {reason}" if most else "drift left alone: no pool in the run sheet with its order"
    )
    return Courses(np.zeros(p, dtype=np.int_), (), (), np.empty((0, p)), reason, (caution,))


def _cautions(usable: tuple[BatchPools, ...], curved: tuple[BatchPools, ...], fewest: int) -> tuple[str, ...]:
    levelled = [batch.batch for batch in usable if batch not in curved]
    if not levelled:
        return ()
    return (f"fewer than {fewest} pools in batches {some(levelled)}: the batch's level at most, no curve",)
