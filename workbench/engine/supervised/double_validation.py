"""Repeated double cross-validation of multi-block PLS, and a permutation test that repeats the whole of it."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from workbench.engine.nuisance import fit_residuals
from workbench.engine.subjects import SubjectDesign
from workbench.engine.supervised.double_arrangements import (
    Arrangements,
    PermutationNull,
    outcome_arrangements,
    permutation_null,
)
from workbench.engine.supervised.double_folds import fold_splits, strata_of
from workbench.engine.supervised.double_loop import Choice, FoldKernels, choices, nested_fold
from workbench.engine.supervised.double_outcome import ClassOutcome, HeldOut, NumberOutcome, Outcome
from workbench.engine.supervised.double_splits import (
    BlockSource,
    BlockSplit,
    Observer,
    SplitKernels,
    split_kernels,
)
from workbench.engine.supervised.outcome_rule import learn_rule
from workbench.engine.supervised.performance_measures import (
    ClassPerformance,
    NumberPerformance,
    class_performance,
    number_performance,
)
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]
Performance = ClassPerformance | NumberPerformance


@dataclass(frozen=True, eq=False)
class HeldOutModel:
    """Predictions of one choice of blocks for samples held out, and their figures.

    Attributes
    ----------
    predicted : ndarray of shape (repeats, n_samples, columns)
        Numbers: outcomes in standard deviations, the nuisance's part included. Classes: predicted codes less
        the cut that the inner loop learnt. NaN where a sample was not scored.
    probabilities : ndarray of shape (repeats, n_samples, n_classes) or None
        If all classes were equally frequent; slope learnt in the inner loop.
    classes : ndarray of int, shape (repeats, n_samples), or None
        -1 where not scored.
    components : ndarray of int, shape (repeats, folds)
        Chosen in the inner loop.
    blocks : ndarray of bool, shape (repeats, folds, n_blocks)
        Blocks chosen there.
    features_alike : ndarray of bool, shape (repeats, folds)
        Where features, not blocks, counted alike by that choice.
    performance : ClassPerformance or NumberPerformance
    """

    predicted: FloatArray
    probabilities: FloatArray | None
    classes: IndexArray | None
    components: IndexArray
    blocks: NDArray[np.bool_]
    features_alike: NDArray[np.bool_]
    performance: Performance


@dataclass(frozen=True, eq=False)
class DoubleValidation:
    """Out-of-sample figures of multi-block PLS.

    Attributes
    ----------
    model : HeldOutModel
        All blocks together.
    singles : tuple of HeldOutModel
        Each block alone, by the same folds and the same choice inside; empty with one block.
    nuisance : HeldOutModel or None
        The outcome from the nuisance columns alone; None without.
    test : PermutationNull
        Of the mean over the repeats.
    by_components : ndarray of shape (repeats, n_candidates)
        The test's statistic at each number of components, the blocks of the final fit, nothing chosen.
    candidates : tuple of int
    components : int
        Chosen on all samples, for the final fit.
    blocks : tuple of int
        Blocks of the final fit, chosen likewise.
    alike : {"features", "blocks"}
        What counts alike in it.
    folds, repeats : int
    n_scored : ndarray of int, shape (repeats,)
    """

    model: HeldOutModel
    singles: tuple[HeldOutModel, ...]
    nuisance: HeldOutModel | None
    test: PermutationNull
    by_components: FloatArray
    candidates: tuple[int, ...]
    components: int
    blocks: tuple[int, ...]
    alike: str
    folds: int
    repeats: int
    n_scored: IndexArray


def double_validation(
    source: BlockSource,
    outcome: ClassOutcome | NumberOutcome,
    *,
    nuisance: FloatArray | None = None,
    subjects: SubjectDesign | None = None,
    strata: NDArray[Any] | None = None,
    exchange: NDArray[Any] | None = None,
    candidates: Sequence[int] = (1, 2, 3, 4, 5),
    choose_blocks: bool = True,
    folds: int = 5,
    repeats: int = 5,
    permutations: int = 0,
    seed: int = 0,
    observe: Observer | None = None,
    progress: Callable[[int, int], None] | None = None,
) -> DoubleValidation:
    """Out-of-sample figures from repeated double cross-validation, and the p of the whole procedure.

    In each outer fold an inner loop over the training part alone chooses blocks, whether features or blocks
    count alike, and number of components (all blocks, features alike and as few components as possible, unless
    others are better by more than one standard error of the difference) and, for classes, learns cut and slope
    from the samples that it holds out; the model is fitted to the training part and the test samples are
    predicted once. Loss: squared error, or the share of pairs of samples of two classes that are ranked wrongly.
    The test repeats all of this for every arrangement of the outcome, in the same folds; their kernels are
    computed once.

    Parameters
    ----------
    source : callable
        Split of given training and test positions, for example :func:`block_source`.
    outcome : ClassOutcome or NumberOutcome
        As delivered, one arrangement.
    nuisance : ndarray of shape (n_samples, n_columns), optional
        Columns whose own prediction of the outcome is reported beside; remove them from the blocks in
        ``source``.
    subjects : SubjectDesign, optional
        Folds are whole per subject.
    strata : ndarray of shape (n_samples,) or (n_samples, n_factors), optional
        Levels to be spread over the folds beside the classes.
    exchange : ndarray of shape (n_samples,), optional
        See :func:`outcome_arrangements`.
    candidates : sequence of int
        Numbers of components to choose from, fewest first; one number is no choice.
    choose_blocks : bool
        Whether blocks may be left out: a block of noise that weighs as much as the others costs a lot.
    folds, repeats : int
        Folds of the outer and of the inner loop; repeats of the outer one (the inner one is dealt
        ``INNER_REPEATS`` times).
    permutations : int
        0: no test.
    seed : int
    observe : callable, optional
        Gets every outer fold's :class:`FoldSplits`, for example a :class:`PanelSearch`.
    progress : callable, optional
        Called with outer folds done and outer folds in all.

    Raises
    ------
    NumericsError
        When folds cannot be formed, or no sample can be scored.

    References
    ----------
    Filzmoser, Liebmann & Varmuza 2009, J Chemometrics 23:160. Westerhuis et al. 2008, Metabolomics 4:81.

    Examples
    --------
    >>> from workbench.engine.supervised.double_splits import block_source
    >>> rng = np.random.default_rng(0)
    >>> ill = np.repeat([0, 1], 20)
    >>> blocks = [rng.normal(size=(40, 60)) + np.outer(ill, np.arange(60) < 12), rng.normal(size=(40, 30))]
    >>> found = double_validation(block_source(blocks), ClassOutcome.of(ill), repeats=2, permutations=19)
    >>> bool(found.model.performance.balanced_accuracy.mean() > 0.8), found.test.p
    (True, 0.05)
    """
    if outcome.size != 1:
        raise NumericsError(
            f"the outcome comes in {outcome.size} arrangements; give it as delivered, arranged here"
        )
    run = _Run.of(
        source,
        outcome,
        nuisance,
        subjects,
        strata,
        exchange,
        candidates,
        choose_blocks,
        folds,
        permutations,
        seed,
    )
    repeated = [run.repeat(r, repeats, observe, progress) for r in range(repeats)]
    return run.summary(repeated)


@dataclass(eq=False)
class _Model:
    """Predictions of one choice of blocks, filled fold by fold."""

    candidates: tuple[Choice, ...]
    outcome: Outcome
    n: int
    parts: list[HeldOut]
    every: list[HeldOut]
    chosen: list[Choice]
    probabilities: FloatArray | None
    classes: IndexArray | None

    @classmethod
    def of(cls, candidates: tuple[Choice, ...], outcome: Outcome, n: int) -> _Model:
        classes = isinstance(outcome, ClassOutcome)
        return cls(
            candidates,
            outcome,
            n,
            [],
            [],
            [],
            np.full((n, outcome.n_classes), np.nan) if isinstance(outcome, ClassOutcome) else None,
            np.full(n, -1, dtype=np.intp) if classes else None,
        )

    def add(self, kernels: FoldKernels) -> None:
        """Predict the test samples of an outer fold."""
        found = nested_fold(kernels, self.outcome, self.candidates)
        self.parts.append(found.test)
        self.every.append(found.every)
        self.chosen.append(self.candidates[found.chosen])
        if (
            isinstance(self.outcome, ClassOutcome)
            and self.classes is not None
            and self.probabilities is not None
        ):
            labels = self.outcome.labels[found.inner.rows, 0]
            rule = learn_rule(found.inner.predicted[0, :, :, 0], labels, self.outcome.n_classes)
            values = found.test.predicted[0, :, :, 0]
            self.classes[found.test.rows] = rule.classes(values)
            self.probabilities[found.test.rows] = rule.probabilities(values)

    def predicted(self) -> FloatArray:
        """Predictions of the outcome as delivered, shape (n_samples, columns)."""
        values = np.full((self.n, self.outcome.columns), np.nan)
        for part in self.parts:
            values[part.rows] = part.predicted[0, :, :, 0]
        return values


@dataclass(frozen=True, eq=False)
class _Repeat:
    models: tuple[_Model, ...]
    statistic: FloatArray
    mean: FloatArray
    nuisance: FloatArray


@dataclass(frozen=True, eq=False)
class _Run:
    """Everything that stays the same over the repeats."""

    source: BlockSource
    outcome: Outcome
    arranged: Outcome
    arrangements: Arrangements
    nuisance: FloatArray | None
    subjects: SubjectDesign
    levels: NDArray[Any] | None
    candidates: tuple[int, ...]
    choose_blocks: bool
    folds: int
    seed: int
    n: int

    @classmethod
    def of(
        cls,
        source: BlockSource,
        outcome: ClassOutcome | NumberOutcome,
        nuisance: FloatArray | None,
        subjects: SubjectDesign | None,
        strata: NDArray[Any] | None,
        exchange: NDArray[Any] | None,
        candidates: Sequence[int],
        choose_blocks: bool,
        folds: int,
        permutations: int,
        seed: int,
    ) -> _Run:
        n = len(outcome.delivered)
        drawn = outcome_arrangements(
            outcome.delivered, permutations, seed, subjects=subjects, exchange=exchange
        )
        return cls(
            source,
            outcome,
            outcome.arranged(drawn.rows),
            drawn,
            nuisance if nuisance is not None and nuisance.shape[1] else None,
            SubjectDesign.of(np.arange(n)) if subjects is None else subjects,
            strata_of(outcome, strata),
            tuple(candidates),
            choose_blocks,
            folds,
            seed,
            n,
        )

    def repeat(
        self, r: int, repeats: int, observe: Observer | None, progress: Callable[[int, int], None] | None
    ) -> _Repeat:
        """One repeat: every sample is held out once."""
        models: list[_Model] = []
        mean, nuisance = np.full((2, self.n, self.outcome.columns), np.nan)
        for splits in fold_splits(self.source, self.subjects, self.levels, self.folds, self.seed, r):
            if observe is not None:
                observe(splits)
            train, test = splits.rows[0]
            found = [
                self._kernels(split, *rows) for rows, split in zip(splits.rows, splits.splits, strict=True)
            ]
            kernels = FoldKernels(found[0], splits.inner(found))
            models = models or self._models(len(kernels.outer.train))
            for model in models:
                model.add(kernels)
            self._baselines(train, test, mean, nuisance)
            if progress is not None:
                progress(r * self.folds + splits.fold + 1, repeats * self.folds)
        return _Repeat(tuple(models), self.arranged.statistic(models[0].parts), mean, nuisance)

    def summary(self, repeated: list[_Repeat]) -> DoubleValidation:
        """Gather the repeats."""
        statistics = np.mean([one.statistic for one in repeated], axis=0)
        count = len(repeated[0].models)
        described = [self._described(repeated, m) for m in range(count)]
        last = 1 if self.nuisance is not None else 0
        nuisance = described[-1] if last else None
        final = self._final(repeated)
        return DoubleValidation(
            model=described[0],
            singles=tuple(described[1 : count - last]),
            nuisance=nuisance,
            test=permutation_null(statistics, self.arrangements),
            by_components=self._by_components(repeated, final),
            candidates=self.candidates,
            components=final.components,
            blocks=final.blocks,
            alike=final.alike,
            folds=self.folds,
            repeats=len(repeated),
            n_scored=np.isfinite(described[0].predicted[:, :, 0]).sum(axis=1),
        )

    def _models(self, blocks: int) -> list[_Model]:
        """All blocks (in every arrangement), each alone, and the nuisance, whose kernel is the last."""
        last = 1 if self.nuisance is not None else 0
        count = blocks - last
        every = choices(count, self.candidates, choose_blocks=self.choose_blocks)
        models = [_Model.of(every, self.arranged, self.n)]
        alone = [*(range(count) if count > 1 else ()), *([blocks - 1] if last else ())]
        for b in alone:
            models.append(
                _Model.of(tuple(Choice((b,), k, "blocks") for k in self.candidates), self.outcome, self.n)
            )
        return models

    def _kernels(self, split: BlockSplit, train: IndexArray, test: IndexArray) -> SplitKernels:
        found = split_kernels(split, train, test)
        if self.nuisance is None:
            return found
        fitted = fit_residuals(None, self.nuisance[train])
        x, z = fitted.standardised(None, self.nuisance[train]), fitted.standardised(None, self.nuisance[test])
        return SplitKernels(
            train,
            test,
            np.concatenate([found.train, (x @ x.T)[None]]),
            np.concatenate([found.test, (z @ x.T)[None]]),
            np.append(found.features, x.shape[1]),
        )

    def _baselines(self, train: IndexArray, test: IndexArray, mean: FloatArray, nuisance: FloatArray) -> None:
        """Predictions of numbers by the training mean and by the nuisance."""
        if isinstance(self.outcome, NumberOutcome):
            values = self.outcome.values[:, :, 0]
            mean[test] = values[train].mean(axis=0)
            nuisance[test] = values[test] - self.outcome.targets(train, test)[:, :, 0]

    def _described(self, repeated: list[_Repeat], m: int) -> HeldOutModel:
        models = [one.models[m] for one in repeated]
        predicted = np.array([model.predicted() for model in models])
        components = np.array([[one.components for one in model.chosen] for model in models])
        total_blocks = 1 + max(max(one.blocks) for one in repeated[0].models[0].candidates)
        blocks = np.array(
            [[np.isin(np.arange(total_blocks), one.blocks) for one in model.chosen] for model in models]
        )
        alike = np.array([[one.alike == "features" for one in model.chosen] for model in models])
        if not np.isfinite(predicted).any():
            raise NumericsError(
                "no sample can be scored out of fold: each has a nuisance level that its training part lacks; "
                "remove fewer nuisance columns"
            )
        if isinstance(self.outcome, ClassOutcome):
            classes = np.array([model.classes for model in models])
            probabilities = np.array([model.probabilities for model in models])
            labels = self.outcome.labels[:, 0]
            figures: Performance = class_performance(labels, predicted, classes, probabilities)
            return HeldOutModel(predicted, probabilities, classes, components, blocks, alike, figures)
        assert isinstance(self.outcome, NumberOutcome)
        mean = np.array([one.mean for one in repeated])
        nuisance = np.array([one.nuisance for one in repeated])
        of_nuisance = self.nuisance is not None and m == len(repeated[0].models) - 1
        total = np.where(np.isfinite(predicted), nuisance, np.nan) if of_nuisance else predicted + nuisance
        figures = number_performance(self.outcome.values[:, :, 0], total, mean, nuisance)
        return HeldOutModel(total, None, None, components, blocks, alike, figures)

    def _final(self, repeated: list[_Repeat]) -> Choice:
        """Blocks and components for the fit on all samples, from each sample's mean loss over the repeats."""
        models = [one.models[0] for one in repeated]
        return models[0].candidates[int(self.outcome.choose([model.every for model in models])[0])]

    def _by_components(self, repeated: list[_Repeat], final: Choice) -> FloatArray:
        """Statistic of every repeat at each number of components, all else as in the final fit."""
        candidates = repeated[0].models[0].candidates
        places = [candidates.index(replace(final, components=count)) for count in self.candidates]
        return np.array(
            [
                [
                    float(self.outcome.statistic([_one(part, place) for part in one.models[0].every])[0])
                    for place in places
                ]
                for one in repeated
            ]
        )


def _one(part: HeldOut, place: int) -> HeldOut:
    """Keep one candidate."""
    return HeldOut(part.train, part.rows, part.predicted[[place]])
