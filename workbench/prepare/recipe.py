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

from dataclasses import dataclass
from itertools import chain

import numpy as np

from workbench.errors import InputError
from workbench.prepare.account import Explanation, explain_step, explained
from workbench.prepare.kinds import Kind, check_names, kind_of
from workbench.prepare.refusal import VALUES, PrepareRefusal
from workbench.prepare.steps import FitContext, FittedStep, Step
from workbench.prepare.tables import MeasuredTable, PreparedTable, StepAccount, StepTable, some
from workbench.settings.prepare_schema import PrepareSettings, preparation_model

FEWEST_TRAINING_SAMPLES = 2


def recipe_for(layer: str, values: str, settings: PrepareSettings | None = None) -> Recipe:
    """Return the recipe of a layer and a kind of values.

    Parameters
    ----------
    layer : str
        ``transcripts``, ``metabolites`` ... or a name of the user's.
    values : {"counts", "intensities", "log", "proportions", "beta", "continuous", "mixed"}
        What the numbers are. Counts of the layer ``microbes`` are parts of a whole.
    settings : PrepareSettings, optional
        From :func:`workbench.settings.prepare_settings` of the same layer and values; None: the defaults.

    Raises
    ------
    InputError
        For unknown values, and for settings of another kind of values.
    """
    kind, model = kind_of(layer, values), preparation_model(layer, values)
    chosen = model() if settings is None or type(settings) is PrepareSettings else settings
    if not isinstance(chosen, model):
        raise InputError(
            f"the settings are for another kind than values `{values}` of layer '{layer}': "
            f"{type(chosen).__name__}; make them by prepare_settings(layer, values, ...)"
        )
    return Recipe(layer, values, kind.steps(chosen), kind, chosen)


@dataclass(frozen=True)
class Recipe:
    """A list of steps that has learnt nothing yet.

    Attributes
    ----------
    layer, values : str
        What the recipe is for.
    steps : tuple of Step
        In order.
    kind : Kind
        What it refuses.
    settings : PrepareSettings
        The choices that the steps follow.
    """

    layer: str
    values: str
    steps: tuple[Step, ...]
    kind: Kind
    settings: PrepareSettings

    def explain(self, *, with_runs: bool = True) -> tuple[Explanation, ...]:
        """Return what each step would do, why, after which paper, and how to change it.

        Parameters
        ----------
        with_runs : bool, default True
            Also the steps that need a run sheet.
        """
        steps = [step for step in self.steps if with_runs or not step.runs_only]
        return tuple(explain_step(step, self.layer, self.values, self.settings) for step in steps)

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
            account.append(explained(done, explain_step(step, self.layer, self.values, self.settings)))
            _check_features_left(current, account, len(table.features))
        prepared = _prepared(current, tuple(account))
        return FittedRecipe(self, table.features, tuple(fitted), prepared, table.runs is not None)

    def refusal(self, table: MeasuredTable) -> PrepareRefusal | None:
        """Return why these samples cannot be what they are declared to be, None where nothing speaks against it.

        Looks at the table alone and learns nothing; ``fit`` refuses for the same reasons.
        """
        try:
            self._check_values(table)
        except PrepareRefusal as refusal:
            return refusal
        return None

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
        self._check_values(table)

    def _check_values(self, table: MeasuredTable) -> None:
        _check_kind(self, table)
        if getattr(self.settings, "check_values", True):
            self.kind.fits(table)
        for key in ("transform_features", "ordered"):
            names = getattr(self.settings, key, ())
            if not isinstance(names, str):
                check_names(key, tuple(names), table.features)


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
        explanations = self.recipe.explain(with_runs=self.with_runs)
        for step, explanation in zip(self.steps, explanations, strict=True):
            current, done = step.transform(current)
            account.append(explained(done, explanation))
        return _prepared(current, tuple(account))


def _prepared(table: StepTable, account: tuple[StepAccount, ...]) -> PreparedTable:
    return PreparedTable(
        np.ascontiguousarray(table.values),
        table.imputed,
        table.samples,
        table.features,
        account,
        table.origins,
        table.scale,
    )


def _check_kind(recipe: Recipe, table: MeasuredTable) -> None:
    text = [
        name for name, levels in zip(table.features, table.feature_levels, strict=True) if levels is not None
    ]
    if text and recipe.values != "mixed":
        raise PrepareRefusal(
            f"text features in a block of `{recipe.values}`: {some(text)}", key=VALUES, fitting=("mixed",)
        )
    recipe.kind.check(table)
    if table.runs is not None:
        recipe.kind.check_runs(table.run_rows())


def _check_features_left(table: StepTable, account: list[StepAccount], measured: int) -> None:
    if table.features:
        return
    lines = "; ".join(
        f"{step.step}: {len(step.dropped)} ({_first(step)})" for step in account if step.dropped
    )
    raise PrepareRefusal(f"no feature is left of {measured}: {lines or 'the table has none'}", key=VALUES)


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
