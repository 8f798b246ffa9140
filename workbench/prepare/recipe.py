"""From measured to prepared values: a recipe is a list of steps, chosen by layer and values.

What is learnt is learnt from the samples given to ``fit`` alone: no other block, no outcome, no group
label (only the size of the smallest group). A fitted recipe prepares samples that it has never seen, one by
one, against what it has learnt.

>>> table = MeasuredTable(np.array([[1.0, 5.0], [2.0, 5.0], [4.0, 5.0]]), ("a", "b", "c"), ("x", "y"))
>>> prepared = recipe_for("clinical", "continuous").fit_transform(table, smallest_group=None, seed=1)
>>> prepared.features, prepared.dropped
(('x',), {'y': 'constant: 5 wherever it has a value'})
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from itertools import chain

import numpy as np

from workbench.errors import InputError
from workbench.prepare.continuous import continuous_steps
from workbench.prepare.counts import check_count_cells, check_counts, count_steps
from workbench.prepare.intensities import check_intensities, intensity_steps
from workbench.prepare.log_values import log_steps
from workbench.prepare.mixed import check_mixed, mixed_steps
from workbench.prepare.steps import FitContext, FittedStep, Step
from workbench.prepare.tables import MeasuredTable, PreparedTable, StepAccount, StepTable, some

Check = Callable[[MeasuredTable], None]

FEWEST_TRAINING_SAMPLES = 2


def _anything(table: MeasuredTable) -> None:
    """Accept any finite number."""


def _no_runs(table: MeasuredTable) -> None:  # noqa: ARG001
    """Refuse any run: text has no mean."""
    raise InputError("a run sheet for `mixed` values: text of several runs cannot be averaged; leave it out")


_KINDS: dict[str, tuple[Callable[[], tuple[Step, ...]], Check, Check]] = {
    "counts": (count_steps, check_counts, check_count_cells),
    "intensities": (intensity_steps, check_intensities, check_intensities),
    "log": (log_steps, _anything, _anything),
    "continuous": (continuous_steps, _anything, _anything),
    "mixed": (mixed_steps, check_mixed, _no_runs),
}


def recipe_for(layer: str, values: str) -> Recipe:
    """Return the default recipe of a layer and a kind of values.

    Parameters
    ----------
    layer : str
        ``transcripts``, ``metabolites`` ... or a name of the user's.
    values : {"counts", "intensities", "log", "continuous", "mixed"}
        What the numbers are.

    Raises
    ------
    InputError
        For unknown values, and for counts of microbes.
    """
    if values not in _KINDS:
        allowed = ", ".join(f"`{kind}`" for kind in _KINDS)
        raise InputError(f"no preparation for values `{values}` of layer '{layer}'; allowed: {allowed}")
    if layer == "microbes" and values == "counts":
        raise InputError(
            "counts of microbes are shares of a whole and need log-ratios, which this version does not "
            "compute; deliver centred log-ratios and declare values = `continuous`"
        )
    steps, check, check_runs = _KINDS[values]
    return Recipe(layer, values, steps(), check, check_runs)


@dataclass(frozen=True)
class Recipe:
    """A list of steps that has learnt nothing yet.

    Attributes
    ----------
    layer, values : str
        What the recipe is for.
    steps : tuple of Step
        In order.
    check, check_runs : callable
        Refuse tables, and runs as the rows of a table, that cannot be of this kind.
    """

    layer: str
    values: str
    steps: tuple[Step, ...]
    check: Check
    check_runs: Check

    def explain(self) -> tuple[str, ...]:
        """Return one line per step: what it would do."""
        return tuple(step.rule for step in self.steps)

    def fit(self, table: MeasuredTable, *, smallest_group: int | None, seed: int) -> FittedRecipe:
        """Return the recipe as learnt from these samples.

        Parameters
        ----------
        table : MeasuredTable
            The training samples.
        smallest_group : int or None
            Size of the smallest group among them; None without groups.
        seed : int
            Key of the draws for left-censored gaps: a cell's draw depends on it and on the names of
            sample and feature alone.

        Raises
        ------
        InputError
            When there are fewer than two samples, the table is not of this kind, or no feature is left.
        """
        self._check_fit(table, smallest_group)
        context = FitContext(smallest_group, seed)
        current, fitted, account = StepTable.of(table), list[FittedStep](), list[StepAccount]()
        for step in self.steps_for(table):
            learnt = step.fit(current, context)
            current, done = learnt.transform(current)
            fitted.append(learnt)
            account.append(done)
            _check_features_left(current, account, len(table.features))
        prepared = _prepared(current, tuple(account))
        return FittedRecipe(self, table.features, tuple(fitted), prepared, table.runs is not None)

    def steps_for(self, table: MeasuredTable) -> tuple[Step, ...]:
        """Return the steps that apply to a table: those about runs, pools and blanks need a run sheet."""
        return tuple(step for step in self.steps if table.runs is not None or not step.runs_only)

    def fit_transform(self, table: MeasuredTable, *, smallest_group: int | None, seed: int) -> PreparedTable:
        """Return the training samples prepared; the same as ``fit(...).prepared``."""
        return self.fit(table, smallest_group=smallest_group, seed=seed).prepared

    def _check_fit(self, table: MeasuredTable, smallest_group: int | None) -> None:
        n = len(table.samples)
        if n < FEWEST_TRAINING_SAMPLES:
            raise InputError(f"{n} samples to learn from; at least {FEWEST_TRAINING_SAMPLES} needed")
        if smallest_group is not None and not 1 <= smallest_group <= n:
            raise InputError(
                f"a smallest group of {smallest_group} among {n} samples; allowed: 1 to {n}, or None"
            )
        _check_kind(self, table)


@dataclass(frozen=True)
class FittedRecipe:
    """A recipe with all that it has learnt from its training samples.

    Attributes
    ----------
    recipe : Recipe
        The steps before learning.
    features : tuple of str
        The measured features.
    steps : tuple of FittedStep
        In order.
    prepared : PreparedTable
        The training samples, prepared.
    with_runs : bool
        Whether it was learnt from runs.
    """

    recipe: Recipe
    features: tuple[str, ...]
    steps: tuple[FittedStep, ...]
    prepared: PreparedTable
    with_runs: bool = False

    def transform(self, table: MeasuredTable) -> PreparedTable:
        """Return samples prepared by what was learnt; each as if it were alone.

        Features are found by name: their order is free, features that training lacked are left out.
        Numbers in the account that describe samples (gaps, factors) are those of these samples.

        Raises
        ------
        InputError
            When a feature of the training table is not there, the table is not of this kind, or one of the two
        tables has a run sheet and the other has none.
        """
        if self.with_runs != (table.runs is not None):
            has = ("no run sheet", "one") if self.with_runs else ("a run sheet", "none")
            raise InputError(
                f"this table has {has[0]}, the preparation was learnt from a table with {has[1]}; give both or none"
            )
        table = _aligned(table, self.features)
        _check_kind(self.recipe, table)
        current, account = StepTable.of(table), list[StepAccount]()
        for step in self.steps:
            current, done = step.transform(current)
            account.append(done)
        return _prepared(current, tuple(account))


def _prepared(table: StepTable, account: tuple[StepAccount, ...]) -> PreparedTable:
    return PreparedTable(
        np.ascontiguousarray(table.values),
        table.imputed,
        table.samples,
        table.features,
        account,
        table.origins,
    )


def _check_kind(recipe: Recipe, table: MeasuredTable) -> None:
    text = [
        name for name, levels in zip(table.features, table.feature_levels, strict=True) if levels is not None
    ]
    if text and recipe.values != "mixed":
        raise InputError(
            f"text features in a block of `{recipe.values}`: {some(text)}; declare values = `mixed`"
        )
    recipe.check(table)
    if table.runs is not None:
        recipe.check_runs(table.run_rows())


def _check_features_left(table: StepTable, account: list[StepAccount], measured: int) -> None:
    if table.features:
        return
    lines = "; ".join(
        f"{step.step}: {len(step.dropped)} ({_first(step)})" for step in account if step.dropped
    )
    raise InputError(
        f"no feature is left of {measured}: {lines or 'the table has none'}; check the block's `values`"
    )


def _first(step: StepAccount) -> str:
    return next(chain(step.dropped.values(), [""]))


def _aligned(table: MeasuredTable, features: tuple[str, ...]) -> MeasuredTable:
    if table.features == features:
        return table
    place = {name: column for column, name in enumerate(table.features)}
    absent = [name for name in features if name not in place]
    if absent:
        raise InputError(
            f"{len(absent)} of the {len(features)} features that the preparation was learnt from are not in "
            f"the table: {some(absent)}; add their columns, empty where nothing was measured"
        )
    columns = [place[name] for name in features]
    levels = tuple(table.feature_levels[column] for column in columns)
    runs = None if table.runs is None else table.runs.with_columns(columns)
    return MeasuredTable(table.values[:, columns], table.samples, features, levels, runs)
