"""How often an edge is among the strongest pairs when only half of the samples are looked at.

Complementary halves (Shah & Samworth 2013): every split gives two half-samples that share no sample. Levels
of the design are spread over both halves, and the samples of one subject stay together.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from workbench.engine.evidence.strongest import strongest_pairs
from workbench.engine.folds import balanced_folds
from workbench.engine.nuisance import Nuisance
from workbench.engine.pairs.repeated import independent_pair
from workbench.engine.pairs.screen import BlockPair, Correlation, Progress
from workbench.engine.pairs.subject_space import Level
from workbench.engine.private.private_variation import LayerBlock
from workbench.engine.private.repeated_layers import cleaned_repeated
from workbench.engine.subjects import SubjectDesign, subject_labels
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]
#: The strongest ``count`` pairs of some samples: rows, count -> (pair of blocks, i, j), shape (n, 3).
StrongestOf = Callable[[IndexArray, int], IndexArray]

#: Samples that a half must have.
SMALLEST_HALF = 10
#: Degrees of freedom that a half must leave a correlation.
LEAST_FREEDOM = 3
#: Log p by which the next half begins looser than the weakest cut so far.
HINT_ROOM = 0.5


@dataclass(frozen=True, eq=False)
class PairStability:
    """Stability of edges.

    Attributes
    ----------
    share : ndarray of shape (n_edges,)
        Share of half-samples in which the edge is among the strongest E pairs, E the number of edges; NaN
        where a half is too small.
    halves : int
        Half-samples looked at.
    reasons : tuple of str
        For each pair of blocks, why it has no stability; empty where it has.
    """

    share: FloatArray
    halves: int
    reasons: tuple[str, ...]


def pair_stability(
    n: int,
    strata: NDArray[Any] | None,
    subjects: NDArray[Any] | None,
    halves: int,
    strongest: StrongestOf,
    edges: IndexArray,
    *,
    held: NDArray[np.bool_] | None = None,
    level: Level | None = None,
    seed: int = 0,
    progress: Progress | None = None,
) -> PairStability:
    """Share of half-samples in which each edge is among the strongest pairs.

    Parameters
    ----------
    n : int
        Samples of the study.
    strata : ndarray of shape (n,) or None
        Levels to be spread over both halves (group, or group and nuisance factors together).
    subjects : ndarray of shape (n,) or None
        Samples of one subject stay together.
    halves : int
        Half-samples, an even number is used: two for each split.
    strongest : callable
        Rows of a half-sample and a number to its strongest pairs; redoes on these rows all that is learnt
        from samples. :class:`HalfScreen` is the plain one.
    edges : ndarray of int, shape (n_edges, 3)
        Pair of blocks, feature of its first and of its second block.
    held : ndarray of bool, shape (n, n_block_pairs), optional
        Which samples each pair of blocks has; all when left out.
    level : {"visits", "subjects"}, optional
        Half-samples are counted in changes within subjects, or in subjects, instead of samples.
    seed : int
    progress : callable, optional
        Called with half-samples done and planned.

    Raises
    ------
    NumericsError
        When shapes differ or ``halves`` is below 2.

    References
    ----------
    Shah & Samworth 2013, J R Stat Soc B 75:55.
    """
    edges = np.asarray(edges, dtype=np.intp).reshape(-1, 3)
    count = int(edges[:, 0].max(initial=0)) + 1
    held = np.ones((n, count), dtype=np.bool_) if held is None else np.asarray(held, dtype=np.bool_)
    if held.shape[0] != n or held.shape[1] < count or halves < 2:
        raise NumericsError(
            f"{halves} half-samples of {n} samples, with a table of samples held of shape {held.shape} for "
            f"{count} pairs of blocks; give at least 2 half-samples and a row for each sample"
        )
    parts = half_samples(n, strata, subjects, halves, seed)
    smallest = np.min([_sizes(rows, held, subjects, level) for rows in parts], axis=0)
    reasons = tuple(_too_small(int(size), level) for size in smallest)
    share = np.full(len(edges), np.nan)
    able = np.array([not reason for reason in reasons], dtype=np.bool_)[edges[:, 0]]
    if not able.any():
        return PairStability(share, 0, reasons)
    found = np.zeros(len(edges))
    for done, rows in enumerate(parts):
        found += _members(edges, strongest(rows, len(edges)))
        if progress is not None:
            progress(done + 1, len(parts))
    share[able] = found[able] / len(parts)
    return PairStability(share, len(parts), reasons)


def half_samples(
    n: int, strata: NDArray[Any] | None, subjects: NDArray[Any] | None, halves: int, seed: int
) -> list[IndexArray]:
    """Rows of ``halves`` half-samples (rounded up to even), each two of them complementary.

    Examples
    --------
    >>> one, other = half_samples(6, np.array(["a", "a", "b", "b", "b", "b"]), None, 2, 0)
    >>> np.sort(np.concatenate([one, other])), one.size
    (array([0, 1, 2, 3, 4, 5]), 3)
    """
    design = SubjectDesign.of(np.arange(n) if subjects is None else subjects)
    labels = subject_labels(design, strata)
    parts: list[IndexArray] = []
    for split in range(-(-halves // 2)):
        draw = np.random.SeedSequence(seed, spawn_key=(split,))
        one, other = balanced_folds(labels, design.n_subjects, 2, draw)[0]
        parts += [np.flatnonzero(np.isin(design.subject, part)) for part in (one, other)]
    return parts


class HalfScreen:
    """The plain way to the strongest pairs of some samples: nuisance removed and correlations anew.

    Parameters
    ----------
    pairs : sequence of BlockPair
        Of all samples; the nuisance (and for repeated samples the covariance between visits) is fitted again
        in every half.
    rows : sequence of ndarray of int
        For each pair of blocks, which of the study's samples its rows are.
    correlation : {"pearson", "spearman"}
    designs, level
        For several samples of one subject, as for :func:`~workbench.engine.pairs.repeated.screen_repeated`.
    remove_private : bool
        Whether private variation is told and removed again in every half; for several samples of one subject.
    seed : int
        For the removal.
    """

    def __init__(
        self,
        pairs: Sequence[BlockPair],
        rows: Sequence[IndexArray],
        correlation: Correlation = "pearson",
        *,
        designs: Sequence[SubjectDesign] | None = None,
        level: Level | None = None,
        remove_private: bool = False,
        seed: int = 0,
    ) -> None:
        self._pairs = pairs
        self._rows = rows
        self._correlation: Correlation = correlation
        self._designs = designs
        self._level = level
        self._remove_private = remove_private
        self._seed = seed
        self._strongest = HintedStrongest(correlation if level is None else "pearson")

    def __call__(self, rows: IndexArray, count: int) -> IndexArray:
        """Strongest pairs of the study's samples ``rows``; pairs of blocks with too few of them are left out."""
        taken = [self._taken(k, np.flatnonzero(np.isin(own, rows))) for k, own in enumerate(self._rows)]
        parts = [(k, part) for k, part in enumerate(taken) if part is not None]
        return self._strongest.of(parts, count)

    def _taken(self, k: int, rows: IndexArray) -> BlockPair | None:
        pair = self._pairs[k]
        if self._level is None or self._designs is None:
            return _taken(pair, rows)
        design = self._designs[k].take(rows)
        if rows.size == 0 or (self._level == "visits" and not design.repeated.any()):
            return None
        part = BlockPair(pair.name, pair.x[rows], pair.y[rows], _columns(pair, rows))
        moved = self._moved(part, design, self._level)
        return moved if pair_freedom(moved) >= LEAST_FREEDOM else None

    def _moved(self, part: BlockPair, design: SubjectDesign, level: Level) -> BlockPair:
        """Return a pair of blocks on independent rows."""
        if not self._remove_private:
            return independent_pair(part, design, level, self._correlation)[0]
        own = np.arange(design.n_samples)
        columns = np.empty((own.size, 0)) if part.nuisance is None else np.asarray(part.nuisance)
        sides = [
            LayerBlock(name, name, np.asarray(values), own, columns)
            for name, values in (("first", part.x), ("second", part.y))
        ]
        cleaned = cleaned_repeated(sides, [(0, 1)], design, level, self._correlation, seed=self._seed)
        return cleaned.pairs[0]


@dataclass
class HintedStrongest:
    """The strongest pairs of one half after the other, each with a hint from those before.

    The hint is the weakest cut so far, with room: halves differ, and a second pass costs more than some more pairs.
    """

    correlation: Correlation
    hint: float | None = None

    def of(self, parts: Sequence[tuple[int, BlockPair]], count: int) -> IndexArray:
        """Return (number, i, j) of the strongest pairs over numbered pairs of blocks; none where none are given."""
        if not parts:
            return np.empty((0, 3), dtype=np.intp)
        pairs = [pair for _, pair in parts]
        found = strongest_pairs(pairs, count, correlation=self.correlation, hint=self.hint)
        self.hint = max(found.level + HINT_ROOM, -np.inf if self.hint is None else self.hint)
        numbers = np.array([k for k, _ in parts])
        return np.column_stack([numbers[found.pair_index], found.i, found.j])


def _taken(pair: BlockPair, rows: IndexArray) -> BlockPair | None:
    """Take some samples of a pair of blocks, nuisance refitted; None when too few degrees are left."""
    nuisance = Nuisance.of(_columns(pair, rows), max(rows.size, 1))
    part = BlockPair(pair.name, pair.x[rows], pair.y[rows], nuisance, damping=pair.damping)
    return part if rows.size and pair_freedom(part) >= LEAST_FREEDOM else None


def _columns(pair: BlockPair, rows: IndexArray) -> FloatArray | None:
    columns = pair.nuisance.basis[:, 1:] if isinstance(pair.nuisance, Nuisance) else pair.nuisance
    return None if columns is None else np.asarray(columns)[rows]


def pair_freedom(pair: BlockPair) -> int:
    """Degrees of freedom of the correlations of a pair of blocks."""
    rank = pair.nuisance.rank if isinstance(pair.nuisance, Nuisance) else 1
    return int(pair.x.shape[0]) - rank - 1


def _sizes(
    rows: IndexArray, held: NDArray[np.bool_], subjects: NDArray[Any] | None, level: Level | None
) -> IndexArray:
    """Count what a half-sample has, for each pair of blocks: samples, subjects, or changes within subjects."""
    samples: IndexArray = held[rows].sum(axis=0)
    if level is None or subjects is None:
        return samples
    persons = np.array([np.unique(subjects[rows][own]).size for own in held[rows].T], dtype=np.intp)
    return persons if level == "subjects" else samples - persons


def _too_small(size: int, level: Level | None) -> str:
    if size >= SMALLEST_HALF:
        return ""
    what = {None: "samples", "subjects": "subjects", "visits": "changes within subjects"}[level]
    return f"a half-sample has {size} {what}; {SMALLEST_HALF} are the least for a stability"


def _members(edges: IndexArray, found: IndexArray) -> NDArray[np.bool_]:
    """Which edges are among the pairs found."""
    everything = np.vstack([edges, found]).astype(np.int64)
    sizes = everything.max(axis=0, initial=0) + 1
    keys = (everything[:, 0] * sizes[1] + everything[:, 1]) * sizes[2] + everything[:, 2]
    return np.isin(keys[: len(edges)], keys[len(edges) :])
