"""Marker panel: the smallest set of features, across blocks, that predicts as well as larger ones."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from workbench.engine.linear import column_correlations
from workbench.engine.subjects import SubjectDesign
from workbench.engine.supervised.double_arrangements import (
    Arrangements,
    PermutationNull,
    outcome_arrangements,
    permutation_null,
)
from workbench.engine.supervised.double_choice import fewest_as_good
from workbench.engine.supervised.double_folds import fold_splits, strata_of
from workbench.engine.supervised.double_loop import NestedFold, best_inside
from workbench.engine.supervised.double_outcome import ClassOutcome, HeldOut, NumberOutcome, Outcome
from workbench.engine.supervised.double_splits import BlockSource, BlockSplit, FoldSplits
from workbench.engine.supervised.multiblock_kernel import kernel_components, kernel_products
from workbench.engine.supervised.outcome_rule import learn_rule
from workbench.engine.supervised.panel_candidates import (
    Candidate,
    columns_of,
    panel_candidates,
    rank_features,
    try_candidates,
)
from workbench.engine.supervised.performance_measures import (
    ClassPerformance,
    NumberPerformance,
    class_performance,
    number_performance,
)

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]

LARGEST = 200
ALIKE = 0.7
MOST_ALTERNATIVES = 5

PANEL_CAUTION = (
    "A panel is a short list to confirm by a targeted assay in samples that nobody has looked at yet. It is not a "
    "diagnostic test, other features may do as well (alternatives), and its figure is that of the whole procedure of "
    "choosing, not of these features."
)


@dataclass(frozen=True, eq=False)
class Panel:
    """A chosen panel, and how the procedure that chose it does on samples held out.

    Attributes
    ----------
    block, feature : ndarray of int, shape (size,)
        Block, and position in the block; the most important first.
    coefficient : ndarray of shape (size, columns)
        Of the refitted model, for standardised features: predicted outcome, or codes of the classes.
    frequency : ndarray of shape (size,)
        Share of the outer folds' training parts whose panel has the feature.
    alternatives : tuple of tuple of (int, int, float)
        For each feature, others that correlate with it at ``ALIKE`` or more: block, position, correlation.
    components : int
        Of the refitted model.
    performance : ClassPerformance or NumberPerformance
        Of the procedure, ranking and size chosen anew in every training part.
    test : PermutationNull or None
        Of the procedure, ranking and size chosen anew for every arrangement of the outcome too; of the first
        repeat. None where no arrangements were given.
    sizes : ndarray of int, shape (repeats, folds)
        Sizes chosen there.
    candidates : tuple of Candidate
    loss : ndarray of shape (n_candidates,)
        Mean loss of each candidate on samples held out, none of them chosen.
    every_frequency : tuple of ndarray
        For each block the share of the training parts whose panel has each feature.
    """

    block: IndexArray
    feature: IndexArray
    coefficient: FloatArray
    frequency: FloatArray
    alternatives: tuple[tuple[tuple[int, int, float], ...], ...]
    components: int
    performance: ClassPerformance | NumberPerformance
    test: PermutationNull | None
    sizes: IndexArray
    candidates: tuple[Candidate, ...]
    loss: FloatArray
    every_frequency: tuple[FloatArray, ...]


def select_panel(
    source: BlockSource,
    outcome: ClassOutcome | NumberOutcome,
    block_sizes: Sequence[int],
    *,
    subjects: SubjectDesign | None = None,
    strata: NDArray[Any] | None = None,
    components: Sequence[int] = (1, 2, 3),
    largest: int = LARGEST,
    folds: int = 5,
    repeats: int = 5,
    permutations: int = 0,
    seed: int = 0,
    progress: Callable[[int, int], None] | None = None,
) -> Panel:
    """Choose a panel, and measure the choosing by double cross-validation.

    In every training part the features are ranked by a fit (:func:`rank_features`), the most important
    ones refitted as one block, and the smallest size taken whose loss on the inner loop's samples is within one
    standard error (of the difference on the same samples) of the best; the outer test samples are predicted once.
    The panel itself comes from all samples, its size from the outer folds' samples.

    Parameters
    ----------
    source : callable
    outcome : ClassOutcome or NumberOutcome
    block_sizes : sequence of int
        Features of each block.
    subjects, strata, folds, repeats, permutations, seed
        See :func:`double_validation`.
    components : sequence of int
        Numbers of components to try.
    largest : int
        Most features of a panel.
    progress : callable, optional
        Called with outer folds done and outer folds in all.

    Examples
    --------
    >>> from workbench.engine.supervised.double_splits import block_source
    >>> rng = np.random.default_rng(0)
    >>> markers = rng.normal(size=(80, 4))
    >>> first = np.hstack([markers[:, :2], rng.normal(size=(80, 40))])
    >>> second = np.hstack([markers[:, 2:], rng.normal(size=(80, 9))])
    >>> outcome = NumberOutcome.of(markers.sum(axis=1))
    >>> found = select_panel(block_source([first, second]), outcome, [42, 11], repeats=1)
    >>> sorted(zip(found.block.tolist(), found.feature.tolist()))
    [(0, 0), (0, 1), (1, 0), (1, 1)]
    """
    n = len(outcome.delivered)
    design = SubjectDesign.of(np.arange(n)) if subjects is None else subjects
    drawn = outcome_arrangements(outcome.delivered, permutations, seed, subjects=subjects)
    search = PanelSearch(outcome, block_sizes, components=components, largest=largest, arrangements=drawn)
    levels = strata_of(outcome, strata)
    for r in range(repeats):
        for splits in fold_splits(source, design, levels, folds, seed, r):
            search(splits)
            if progress is not None:
                progress(r * folds + splits.fold + 1, repeats * folds)
    every = np.arange(n)
    return search.panel(source(every, every))


@dataclass(eq=False)
class _Repeat:
    """One repeat, filled fold by fold."""

    predicted: FloatArray
    mean: FloatArray
    nuisance: FloatArray
    classes: IndexArray
    probabilities: FloatArray
    test: list[HeldOut]
    every: list[HeldOut]
    chosen: list[IndexArray]

    @classmethod
    def empty(cls, outcome: ClassOutcome | NumberOutcome, n: int) -> _Repeat:
        n_classes = outcome.n_classes if isinstance(outcome, ClassOutcome) else 1
        predicted, mean, nuisance = np.full((3, n, outcome.columns), np.nan)
        return cls(predicted, mean, nuisance, np.full(n, -1), np.full((n, n_classes), np.nan), [], [], [])


class PanelSearch:
    """Observer of a double cross-validation that chooses a panel in every training part.

    Parameters
    ----------
    outcome : ClassOutcome or NumberOutcome
    block_sizes : sequence of int
        Features of each block.
    components : sequence of int
        Numbers of components to try.
    largest : int
        Most features of a panel.
    arrangements : Arrangements, optional
        Of the outcome, for a test of the whole procedure in the folds of the first repeat.
    """

    def __init__(
        self,
        outcome: ClassOutcome | NumberOutcome,
        block_sizes: Sequence[int],
        *,
        components: Sequence[int] = (1, 2, 3),
        largest: int = LARGEST,
        arrangements: Arrangements | None = None,
    ) -> None:
        self.outcome = outcome
        self.arrangements = arrangements
        self.block_sizes = tuple(block_sizes)
        self.candidates = panel_candidates(sum(block_sizes), largest, components)
        self.n = len(outcome.delivered)
        self._arranged = outcome if arrangements is None else outcome.arranged(arrangements.rows)
        self._repeated: list[_Repeat] = []

    def __call__(self, splits: FoldSplits) -> None:
        """Choose a panel in the training part of an outer fold, and predict its test samples."""
        if len(self._repeated) == splits.repeat:
            self._repeated.append(_Repeat.empty(self.outcome, self.n))
        found = self._repeated[splits.repeat]
        outcome = self._arranged if splits.repeat == 0 else self.outcome
        tried = [
            self._try(*rows, split, outcome) for rows, split in zip(splits.rows, splits.splits, strict=True)
        ]
        (outer, chosen), held_out = tried[0], [one[0] for one in tried]
        best = best_inside(splits.inner(held_out), outer, outcome)
        found.test.append(best.test)
        found.every.append(best.every)
        found.chosen.append(chosen[best.chosen])
        self._score(found, best)

    def panel(self, whole: BlockSplit) -> Panel:
        """Return the panel of all samples, with the figures of the folds that were seen.

        Parameters
        ----------
        whole : BlockSplit
            All samples as the training part.
        """
        repeated = self._repeated
        rows, losses = self.outcome.mean_losses([one.every for one in repeated])
        weights = self.outcome.weights(rows)
        chosen = self.candidates[int(fewest_as_good(losses, weights)[0])]
        codes = self.outcome.codes(np.arange(self.n))
        columns = rank_features(whole.train, codes, [chosen.components], chosen.size)[0, 0]
        block, feature = self._named(whole, columns)
        values = columns_of(whole.train, columns)
        frequency = self._frequency(repeated)
        fitted = kernel_components(kernel_products(values), codes[:, :, 0], chosen.components)
        return Panel(
            block=block,
            feature=feature,
            coefficient=values.T @ fitted.coefficients,
            frequency=np.array([frequency[b][j] for b, j in zip(block, feature, strict=True)]),
            alternatives=self._alternatives(whole, columns, values),
            components=chosen.components,
            performance=self._performance(repeated),
            test=self._test(repeated),
            sizes=np.array([[one[:, 0].size for one in r.chosen] for r in repeated]),
            candidates=self.candidates,
            loss=np.einsum("knp,np->k", losses, weights),
            every_frequency=frequency,
        )

    def _try(
        self, train: IndexArray, test: IndexArray, split: BlockSplit, outcome: Outcome
    ) -> tuple[HeldOut, list[IndexArray]]:
        predicted, chosen = try_candidates(split, outcome.codes(train), self.candidates)
        scored = np.isfinite(predicted).all(axis=(0, 2, 3))
        named = [np.column_stack(self._named(split, columns)) for columns in chosen]
        return HeldOut(train, test[scored], predicted[:, scored]), named

    def _score(self, found: _Repeat, best: NestedFold) -> None:
        outer, values = best.test, best.test.predicted[0, :, :, 0]
        if isinstance(self.outcome, NumberOutcome):
            truth = self.outcome.values[:, :, 0]
            found.mean[outer.rows] = truth[outer.train].mean(axis=0)
            found.nuisance[outer.rows] = (
                truth[outer.rows] - self.outcome.targets(outer.train, outer.rows)[:, :, 0]
            )
            found.predicted[outer.rows] = values + found.nuisance[outer.rows]
            return
        labels = self.outcome.labels[best.inner.rows, 0]
        rule = learn_rule(best.inner.predicted[0, :, :, 0], labels, self.outcome.n_classes)
        found.predicted[outer.rows] = values
        found.classes[outer.rows] = rule.classes(values)
        found.probabilities[outer.rows] = rule.probabilities(values)

    def _test(self, repeated: list[_Repeat]) -> PermutationNull | None:
        if self.arrangements is None:
            return None
        return permutation_null(self._arranged.statistic(repeated[0].test), self.arrangements)

    def _performance(self, repeated: list[_Repeat]) -> ClassPerformance | NumberPerformance:
        predicted = np.array([one.predicted for one in repeated])
        if isinstance(self.outcome, NumberOutcome):
            mean, nuisance = (
                np.array([getattr(one, name) for one in repeated]) for name in ("mean", "nuisance")
            )
            return number_performance(self.outcome.values[:, :, 0], predicted, mean, nuisance)
        classes = np.array([one.classes for one in repeated])
        probabilities = np.array([one.probabilities for one in repeated])
        return class_performance(self.outcome.labels[:, 0], predicted, classes, probabilities)

    def _named(self, split: BlockSplit, columns: IndexArray) -> tuple[IndexArray, IndexArray]:
        """Block, and position among all of the block's features, of columns side by side."""
        starts = np.cumsum([0, *(kept.size for kept in split.kept)])
        block = np.searchsorted(starts, columns, side="right") - 1
        feature = np.array(
            [split.kept[b][c - starts[b]] for b, c in zip(block, columns, strict=True)], dtype=np.intp
        )
        return block.astype(np.intp), feature

    def _frequency(self, repeated: list[_Repeat]) -> tuple[FloatArray, ...]:
        counts = [np.zeros(size) for size in self.block_sizes]
        for panel in (one for r in repeated for one in r.chosen):
            for b, j in panel:
                counts[b][j] += 1.0
        total = sum(len(one.chosen) for one in repeated)
        return tuple(count / total for count in counts)

    def _alternatives(
        self, whole: BlockSplit, columns: IndexArray, values: FloatArray
    ) -> tuple[tuple[tuple[int, int, float], ...], ...]:
        r = np.concatenate([column_correlations(x, values) for x in whole.train])
        found = []
        for k, column in enumerate(columns):
            alike = np.flatnonzero(np.abs(np.nan_to_num(r[:, k])) >= ALIKE)
            alike = alike[alike != column]
            alike = alike[np.argsort(-np.abs(r[alike, k]), kind="stable")][:MOST_ALTERNATIVES]
            block, feature = self._named(whole, alike)
            found.append(
                tuple((int(b), int(j), float(r[c, k])) for b, j, c in zip(block, feature, alike, strict=True))
            )
        return tuple(found)
