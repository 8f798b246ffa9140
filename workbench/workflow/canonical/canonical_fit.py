"""Canonical components of an analysis, two sides or more layers: tested, cross-validated, fitted, accounted for."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from workbench.engine import (
    Nuisance,
    PairTest,
    RegularisedCCA,
    canonical_pair_test,
    cross_validated_correlations,
)
from workbench.engine.arrangements import Exchange
from workbench.engine.canonical.generalised_account import VarianceAccount, takes_part, variance_account
from workbench.engine.canonical.generalised_cca import GeneralisedCCA
from workbench.engine.canonical.generalised_components import PlacedBasis, mean_over
from workbench.engine.canonical.generalised_permutation import generalised_pair_test
from workbench.engine.canonical.generalised_validation import cross_validated_components
from workbench.engine.canonical.pair_null import null_correlations
from workbench.engine.linear import thin_basis
from workbench.engine.look.association import AssociationMap, SampleColumn, associate
from workbench.engine.private.private_removal import PrivateRemoval
from workbench.errors import NumericsError
from workbench.workflow.analysis_view import AnalysisView
from workbench.workflow.canonical.canonical_layers import (
    LayerMatrix,
    layer_matrix,
    layers_source,
    two_side_source,
    without_private,
)
from workbench.workflow.canonical.canonical_sheet import unit_columns
from workbench.workflow.canonical.canonical_units import Units, canonical_units
from workbench.workflow.reporting import Reporter

FloatArray = NDArray[np.float64]

MOST_COMPONENTS = 5
FALLBACK_RIDGE = 1.0
NULL_DRAWS = 99
TWO_SIDES = "ridge_cca"


@dataclass(frozen=True, eq=False)
class LayerFit:
    """What the components say about one layer.

    ``explained`` (n_components, n_blocks) is the share of each block's variance; ``accounts`` one for each block.
    """

    matrix: LayerMatrix
    variates: FloatArray
    weights: FloatArray
    own: FloatArray
    other: FloatArray
    explained: FloatArray
    ridge: float
    noise_level: float
    accounts: tuple[VarianceAccount, ...]


@dataclass(frozen=True, eq=False)
class Validated:
    """Out-of-sample correlations; ``with_others`` of each layer's variate with the others' mean, (k, n_layers)."""

    correlations: FloatArray
    errors: FloatArray
    with_others: FloatArray
    with_others_errors: FloatArray


@dataclass(frozen=True, eq=False)
class FreedTest:
    """Test of what layers share once each block is freed of its private variation; any group is removed as well.

    ``removals`` holds by block what it was freed of.
    """

    test: PairTest
    removals: dict[str, PrivateRemoval]


@dataclass(frozen=True, eq=False)
class CanonicalFit:
    """Everything that an analysis found out about what its layers share.

    Attributes
    ----------
    method : {"ridge_cca", "generalised_cca"}
    units : Units
    layers : tuple of LayerFit
    correlations : ndarray of shape (n_components,)
        In sample, mean over the pairs of layers.
    validated : Validated or None
        None where the samples do not allow one; ``without`` says why.
    test, test_within : PairTest
        ``test_within`` is None without a group to remove.
    freed : FreedTest or None
        The test with private variation removed; None where that is not asked for or not possible.
    null : ndarray of shape (draws, n_components)
        In-sample correlations of fits to rearranged rows.
    part : ndarray of bool, shape (n_components, n_layers)
        Which layer has which component, of those that the test found; none for the others.
    association : AssociationMap
        Components against the sample sheet.
    """

    method: str
    units: Units
    layers: tuple[LayerFit, ...]
    correlations: FloatArray
    validated: Validated | None
    without: str | None
    test: PairTest
    test_within: PairTest | None
    freed: FreedTest | None
    null: FloatArray
    part: NDArray[np.bool_]
    association: AssociationMap
    columns: tuple[SampleColumn, ...]

    @property
    def count(self) -> int:
        """Number of fitted components."""
        return int(self.correlations.size)

    @property
    def axes(self) -> int:
        """Number of components that the test tells from chance."""
        return self.test.axes()

    @property
    def scores(self) -> FloatArray:
        """Mean variate over the layers, (n_units, n_components)."""
        return mean_over([layer.variates for layer in self.layers])


def canonical_fit(view: AnalysisView, reporter: Reporter) -> CanonicalFit:
    """Fit, test and cross-validate what the layers of an analysis share."""
    method = method_of(view)
    units = canonical_units(view, two_sides=method == TWO_SIDES)
    layers = [layer_matrix(view, layer, units) for layer in view.layers]
    raw = [layer.raw for layer in layers]
    test = _test(view, units, layers, raw, units.test_nuisance, reporter, "permutations")
    within = None
    if units.test_within is not None:
        within = _test(view, units, layers, raw, units.test_within, reporter, "permutations within groups")
    freed = _freed_test(view, units, layers, reporter)
    count = components_to_fit(view, test)
    validated, choice, without = _validate(view, method, units, count, reporter)
    fitted, correlations = _fit(view, method, units, layers, count, choice)
    part = _parts(validated, test.axes(), [layer.variates for layer in fitted])
    accounted = tuple(_with_account(layers, fitted, part, units, k) for k in range(len(layers)))
    scores = mean_over([layer.variates for layer in accounted])
    columns = unit_columns(view, units)
    return CanonicalFit(
        method=method,
        units=units,
        layers=accounted,
        correlations=correlations,
        validated=validated,
        without=without,
        test=test,
        test_within=within,
        freed=freed,
        null=_null(units, accounted, count, view.settings.seed),
        part=part,
        association=associate(scores, columns),
        columns=columns,
    )


def method_of(view: AnalysisView) -> str:
    """Return the method by name; "auto" is ridge CCA for two layers and generalised CCA for more."""
    method = view.settings.method
    if method in (TWO_SIDES, "generalised_cca"):
        return method
    return TWO_SIDES if len(view.layers) == 2 else "generalised_cca"


def components_to_fit(view: AnalysisView, test: PairTest) -> int:
    """Return the number of components: as asked, or as many as the test tells from chance, at least one."""
    asked = view.settings.components
    return max(1, test.axes()) if asked == "auto" else int(asked)


def _test(
    view: AnalysisView,
    units: Units,
    layers: list[LayerMatrix],
    raw: list[FloatArray],
    nuisance: FloatArray,
    reporter: Reporter,
    label: str,
) -> PairTest:
    """Test values of the layers, with a nuisance to be removed, against what nothing shared gives."""
    settings = view.settings
    auto = settings.components == "auto"
    sizes = [layer.sizes for layer in layers]
    told: dict[str, Any] = {
        "permutations": settings.permutations,
        "nuisance": nuisance if nuisance.shape[1] else None,
        "subjects": units.design if units.kind == "deviations" else None,
        "stop_above": 0.05 if auto else None,
        "random_state": settings.seed,
    }
    count = MOST_COMPONENTS if auto else int(settings.components)
    with reporter.progress(label) as progress:
        if len(layers) == 2 and all(np.isfinite(one).all() for one in raw):
            return canonical_pair_test(
                raw[0], raw[1], pairs=count, progress=progress,
                x_block_sizes=sizes[0], y_block_sizes=sizes[1], **told,
            )  # fmt: skip
        return generalised_pair_test(raw, components=count, progress=progress, part_sizes=sizes, **told)


def _freed_test(
    view: AnalysisView, units: Units, layers: list[LayerMatrix], reporter: Reporter
) -> FreedTest | None:
    """Test with private variation removed; not of samples less their subject's mean, which are not independent."""
    if not view.settings.network.remove_private or units.kind == "deviations":
        return None
    nuisance = units.test_nuisance if units.test_within is None else units.test_within
    raw, removals = without_private(layers, nuisance, view.settings.seed)
    if any(one.off for one in removals.values()) or not any(one.weights.size for one in removals.values()):
        return None
    label = "permutations without private variation"
    return FreedTest(_test(view, units, layers, raw, nuisance, reporter, label), removals)


def _validate(
    view: AnalysisView, method: str, units: Units, count: int, reporter: Reporter
) -> tuple[Validated | None, Any, str | None]:
    """Return the cross-validation and the ridge chosen on all units, or why these do not allow one."""
    settings = view.settings
    told: dict[str, Any] = {
        "n_components": count,
        "ridge": settings.ridge,
        "folds": settings.folds,
        "repeats": settings.repeats,
        "seed": settings.seed,
        "subjects": units.subjects,
    }
    labels = fold_labels(units)
    with reporter.progress("cross-validation") as progress:
        try:
            if method == TWO_SIDES:
                source = two_side_source(view, units)
                found = cross_validated_correlations(source, units.n, labels, progress=progress, **told)
                both, errors = (
                    np.repeat(one[:, None], 2, axis=1) for one in (found.correlations, found.standard_errors)
                )
                choice = None if found.choice is None else found.choice.multiples
                return Validated(found.correlations, found.standard_errors, both, errors), choice, None
            every = layers_source(view, units)
            more = cross_validated_components(every, units.n, labels, progress=progress, **told)
        except NumericsError as error:
            return None, None, f"no out-of-sample correlation: {error}"
    chosen = None if more.choice is None else more.choice.multiple
    return (
        Validated(more.correlations, more.standard_errors, more.with_others, more.with_others_errors),
        chosen,
        None,
    )


def fold_labels(units: Units) -> FloatArray | None:
    """Return the columns whose levels are to be spread over the folds: nuisance classes and groups."""
    columns = [column for column in units.nuisance.T if np.isin(column, (0.0, 1.0)).all()]
    if units.groups is not None:
        columns.append(units.groups.codes.astype(np.float64))
    return np.column_stack(columns) if columns else None


def _fit(
    view: AnalysisView, method: str, units: Units, layers: list[LayerMatrix], count: int, choice: Any
) -> tuple[list[LayerFit], FloatArray]:
    """Return the fit of all units, layer by layer, and the in-sample correlations."""
    ridge: Any = view.settings.ridge
    if ridge == "auto":
        ridge = FALLBACK_RIDGE if choice is None else choice
    rank = Nuisance.of(units.nuisance, units.n).rank
    if method == TWO_SIDES:
        x, y = layers
        model = RegularisedCCA(
            count, ridge=ridge, nuisance_rank=rank, x_block_sizes=x.sizes, y_block_sizes=y.sizes
        ).fit(x.values, y.values)
        return [
            LayerFit(
                matrix,
                getattr(model, f"{letter}_scores_"),
                getattr(model, f"{letter}_weights_"),
                getattr(model, f"{letter}_correlations_"),
                getattr(model, f"{letter}_cross_correlations_"),
                getattr(model, f"{letter}_explained_"),
                model.ridge_[k],
                model.noise_level_[k],
                (),
            )
            for k, (letter, matrix) in enumerate(zip("xy", layers, strict=True))
        ], model.correlations_
    widths = [layer.values.shape[1] for layer in layers]
    several = GeneralisedCCA(
        count,
        ridge=list(ridge) if isinstance(ridge, tuple) else ridge,
        block_sizes=widths,
        nuisance_rank=rank,
        part_sizes=[layer.sizes for layer in layers],
    ).fit(np.hstack([layer.values for layer in layers]))
    return [
        LayerFit(
            matrix,
            several.variates_[k],
            several.weights_[inside],
            several.own_correlations_[inside],
            several.other_correlations_[inside],
            block_shares(matrix, several.variates_[k]),
            float(several.ridge_[k]),
            float(several.noise_level_[k]),
            (),
        )
        for k, (inside, matrix) in enumerate(zip(several.slices_, layers, strict=True))
    ], several.correlations_


def block_shares(matrix: LayerMatrix, variates: FloatArray) -> FloatArray:
    """Return the share of each block's variance that each variate explains beyond those before it."""
    held = matrix.held
    steps = np.linalg.qr(variates[held])[0]
    parts = np.split(matrix.values[held], np.cumsum(matrix.sizes)[:-1], axis=1)
    return np.array([[np.sum((step @ part) ** 2) / np.sum(part**2) for part in parts] for step in steps.T])


def _parts(validated: Validated | None, axes: int, variates: list[FloatArray]) -> NDArray[np.bool_]:
    part = np.ones((variates[0].shape[1], len(variates)), dtype=np.bool_)
    if validated is not None and len(variates) > 2:
        part = takes_part(validated.with_others, validated.with_others_errors, variates)
    part[axes:] = False
    return part


def _with_account(
    layers: list[LayerMatrix], fitted: list[LayerFit], part: NDArray[np.bool_], units: Units, own: int
) -> LayerFit:
    """Return a layer's fit with the account of each of its blocks."""
    layer = fitted[own]
    variates = [one.variates for one in fitted]
    rank = Nuisance.of(units.nuisance, units.n).rank
    if units.subjects is not None:
        rank += np.unique(units.subjects).size - 1
    blocks = np.split(layers[own].values, np.cumsum(layers[own].sizes)[:-1], axis=1)
    accounts = tuple(variance_account(block, variates, part, own, rank) for block in blocks)
    return LayerFit(
        layer.matrix, layer.variates, layer.weights, layer.own, layer.other, layer.explained, layer.ridge,
        layer.noise_level, accounts,
    )  # fmt: skip


def _null(units: Units, layers: tuple[LayerFit, ...], count: int, seed: int) -> FloatArray:
    placed, exchanges = [], []
    for layer in layers:
        held = layer.matrix.held
        widths = np.concatenate([np.full(size, 1.0 / np.sqrt(size)) for size in layer.matrix.sizes])
        scale = np.sqrt(sum(layer.matrix.sizes) / len(layer.matrix.sizes))
        placed.append(PlacedBasis(thin_basis(layer.matrix.values[held] * widths * scale), held, units.n))
        exchanges.append(_exchange(units, held))
    return null_correlations(
        placed, exchanges, [layer.ridge for layer in layers], count, draws=NULL_DRAWS, seed=seed
    )


def _exchange(units: Units, held: NDArray[np.intp]) -> Exchange:
    if units.kind != "deviations" or units.design is None:
        return Exchange.of_rows(held.size)
    design = units.design.take(held)
    return Exchange.of_subjects(design) if design.kind == "visits" else Exchange.within_subjects(design)
