"""The third stage: canonical pairs of the two layers of an analysis, tested and cross-validated."""

from __future__ import annotations

from dataclasses import dataclass

import h5py
import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.engine import (
    CrossValidation,
    Nuisance,
    PairTest,
    RegularisedCCA,
    SplitSource,
    canonical_pair_test,
    cross_validated_correlations,
)
from workbench.errors import NumericsError
from workbench.store import Change, table_bytes
from workbench.workflow.analysis_view import AnalysisView, Shared, blocks_of, factors_of, view_analysis
from workbench.workflow.fingerprints import block_header, columns_fingerprint, fingerprint
from workbench.workflow.reporting import Reporter
from workbench.workflow.sides import Side, fold_source, whole_side
from workbench.workflow.stages import Stage
from workbench.workflow.state import ProjectState

VERSION = 1
MOST_COMPONENTS = 5
FALLBACK_RIDGE = 1.0
ENGINE_KEYS = ("blocks", "method", "ridge", "components", "folds", "repeats", "permutations", "seed")


@dataclass(frozen=True, eq=False)
class CanonicalResult:
    """Fitted canonical pairs with their tests; ``without`` says what could not be computed and why."""

    shared: Shared
    sides: tuple[Side, Side]
    model: RegularisedCCA
    test: PairTest
    test_within: PairTest | None
    validation: CrossValidation | None
    without: str | None


def integrating_stage(state: ProjectState, name: str) -> Stage:
    """Return the stage that writes components.tsv, explained.tsv and model.h5 of an analysis."""
    blocks = blocks_of(state.settings, name)
    return Stage(
        kind="integrate",
        subject=name,
        needs=tuple(f"prepare:{block}" for block in blocks),
        outputs=tuple(f"results/{name}/{file}" for file in ("components.tsv", "explained.tsv", "model.h5")),
        inputs=lambda now: analysis_inputs(now, name),
        work=lambda now, change, reporter: _work(now, change, reporter, name),
    )


def has_canonical_pairs(state: ProjectState, name: str) -> bool:
    """Return whether the analysis has exactly two layers, and so two sides."""
    return len({state.settings.blocks[block].layer for block in blocks_of(state.settings, name)}) == 2


def analysis_inputs(state: ProjectState, name: str) -> dict[str, str]:
    """Return the hashes of what the engine works on: values, design columns and its own settings."""
    settings = state.settings.analyses[name]
    blocks = blocks_of(state.settings, name)
    engine = {key: getattr(settings, key) for key in ENGINE_KEYS}
    columns = design_columns_of(state, blocks)
    hashes = {
        "settings of the analysis": fingerprint([VERSION, engine, blocks]),
        "design": fingerprint(
            [
                columns_fingerprint(state.require_sheet(), columns),
                state.settings.samples.order,
                state.settings.samples.kinds,
                factors_of(state.settings),
                {block: state.settings.blocks[block].adjust for block in blocks},
                state.settings.samples.subject,
            ]
        ),
        "run sheets": fingerprint(
            {block: state.manifest.files.get(state.settings.blocks[block].runs or "", "") for block in blocks}
        ),
        "layers": fingerprint({block: state.settings.blocks[block].layer for block in blocks}),
    }
    for block in blocks:
        header = block_header(state.paths.prepared_block(block))
        hashes[f"block {block}"] = fingerprint([header["content_sha256"], header["measured_sha256"]])
    return hashes


def design_columns_of(state: ProjectState, blocks: list[str]) -> list[str]:
    """Return the sample-sheet columns that the design of some blocks uses; others are of a run sheet."""
    columns = factors_of(state.settings) + list(state.settings.samples.adjust)
    for block in blocks:
        columns += state.settings.blocks[block].adjust
    return [column for column in dict.fromkeys(columns) if column in state.require_sheet()]


def _work(state: ProjectState, change: Change, reporter: Reporter, name: str) -> None:
    view = view_analysis(state, name)
    result = canonical_pairs(view, reporter)
    folder = f"results/{name}"
    change.write_bytes(f"{folder}/components.tsv", table_bytes(components_table(result)))
    change.write_bytes(f"{folder}/explained.tsv", table_bytes(explained_table(result)))
    _write_model(change.new_file(f"{folder}/model.h5"), result)
    for line in describe(result):
        reporter.say(f"  {line}")


def canonical_pairs(view: AnalysisView, reporter: Reporter) -> CanonicalResult:
    """Fit, test and cross-validate the canonical pairs of the two layers of an analysis."""
    shared = view.shared(list(view.blocks))
    layers = view.layers
    first, second = (whole_side(view, layer, shared, shared.nuisance) for layer in layers)
    test = _test(view, first, second, shared.nuisance, reporter, "permutations")
    within = None
    if shared.groups is not None:
        x, y = (whole_side(view, layer, shared, shared.within) for layer in layers)
        within = _test(view, x, y, shared.within, reporter, "permutations within groups")
    count = components_to_fit(view, shared, first, second)
    validation, without = _validate(
        view, shared, fold_source(view, layers, shared, shared.nuisance), count, reporter
    )
    ridge = view.settings.ridge
    if ridge == "auto":
        chosen = None if validation is None else validation.choice
        ridge = FALLBACK_RIDGE if chosen is None else chosen.multiples
    model = RegularisedCCA(
        n_components=count,
        ridge=ridge,
        nuisance_rank=Nuisance.of(shared.nuisance, shared.n).rank,
        x_block_sizes=first.sizes,
        y_block_sizes=second.sizes,
    ).fit(first.values, second.values)
    return CanonicalResult(shared, (first, second), model, test, within, validation, without)


def _validate(
    view: AnalysisView, shared: Shared, source: SplitSource, count: int, reporter: Reporter
) -> tuple[CrossValidation | None, str | None]:
    """Return the cross-validation, or why these samples do not allow one."""
    with reporter.progress("cross-validation") as progress:
        try:
            found = cross_validated_correlations(
                source,
                shared.n,
                _factors(shared),
                n_components=count,
                ridge=view.settings.ridge,
                folds=view.settings.folds,
                repeats=view.settings.repeats,
                seed=view.settings.seed,
                progress=progress,
            )
        except NumericsError as error:
            return None, f"no out-of-sample correlation: {error}"
    return found, None


def components_to_fit(view: AnalysisView, shared: Shared, first: Side, second: Side) -> int:
    """Return the number of pairs to fit: as asked, or up to five as far as the samples support them."""
    if view.settings.components != "auto":
        return int(view.settings.components)
    room = shared.n - shared.nuisance.shape[1] - 1
    smallest = min(room, first.values.shape[1], second.values.shape[1])
    return int(max(1, min(MOST_COMPONENTS, smallest, room // 10)))


def _test(
    view: AnalysisView,
    first: Side,
    second: Side,
    nuisance: NDArray[np.float64],
    reporter: Reporter,
    label: str,
) -> PairTest:
    with reporter.progress(label) as progress:
        return canonical_pair_test(
            first.values,
            second.values,
            permutations=view.settings.permutations,
            nuisance=nuisance,
            random_state=view.settings.seed,
            progress=progress,
            x_block_sizes=first.sizes,
            y_block_sizes=second.sizes,
        )


def _factors(shared: Shared) -> NDArray[np.float64] | None:
    """Return the columns whose levels are to be spread over the folds: nuisance classes and groups."""
    columns = [column for column in shared.nuisance.T if np.isin(column, (0.0, 1.0)).all()]
    if shared.groups is not None:
        columns.append(shared.groups.codes.astype(np.float64))
    return np.column_stack(columns) if columns else None


def components_table(result: CanonicalResult) -> pd.DataFrame:
    """Return components.tsv: in-sample and out-of-sample correlation of each pair, p of the first."""
    model, count = result.model, result.model.n_components_
    validation = result.validation
    table = pd.DataFrame(
        {
            "component": np.arange(1, count + 1),
            "correlation": model.correlations_,
            "correlation_cv": np.full(count, np.nan) if validation is None else validation.correlations,
            "p": _first(result.test, count),
        }
    )
    if result.test_within is not None:
        table["p_within"] = _first(result.test_within, count)
    return table


def _first(test: PairTest, count: int) -> list[float]:
    """Return the p of the first pair; further pairs are not tested."""
    return [np.nan if test.p is None else test.p, *[np.nan] * (count - 1)]


def explained_table(result: CanonicalResult) -> pd.DataFrame:
    """Return explained.tsv: share of each block's adjusted variance that each own variate explains."""
    rows = []
    for side, shares in zip(
        result.sides, (result.model.x_explained_, result.model.y_explained_), strict=True
    ):
        rows += [
            (k + 1, block, "component", share)
            for k, component in enumerate(shares)
            for block, share in zip(side.blocks, component, strict=True)
        ]
    table = pd.DataFrame(rows, columns=["component", "block", "part", "share"])
    return table.sort_values("component", kind="stable", ignore_index=True)


def describe(result: CanonicalResult) -> list[str]:
    """Return the first canonical pair in a few plain sentences."""
    if result.test.p is None:
        lines = [f"first canonical pair: p withheld, {result.test.withheld}"]
    else:
        lines = [
            f"first canonical pair: p = {result.test.p:.3g} for shared variation, {result.test.permutations} "
            f"permutations on {result.shared.n} samples"
        ]
    if result.test_within is not None and result.test_within.p is not None:
        lines.append(f"within groups: p = {result.test_within.p:.3g}")
    if result.validation is not None:
        lines.append(
            f"correlation of its variates {result.model.correlations_[0]:.2f} in sample, "
            f"{result.validation.correlations[0]:.2f} out of sample (the one to trust)"
        )
    if result.without is not None:
        lines.append(result.without)
    return lines


def _write_model(path: object, result: CanonicalResult) -> None:
    model = result.model
    text = h5py.string_dtype("utf-8")
    with h5py.File(path, "w") as file:
        file.attrs["format"] = 1
        file.attrs["method"] = "ridge_cca"
        file.create_dataset("samples", data=list(result.shared.samples), dtype=text)
        file.create_dataset("ridge", data=np.asarray(model.ridge_, dtype=np.float64))
        file.create_dataset("noise_level", data=np.asarray(model.noise_level_, dtype=np.float64))
        file.create_dataset("correlations", data=model.correlations_)
        if result.validation is not None:
            file.create_dataset("correlations_cv", data=result.validation.correlations)
        letters = (("x", result.sides[0]), ("y", result.sides[1]))
        for letter, side in letters:
            part = file.create_group(letter)
            part.attrs["layer"] = side.layer
            part.create_dataset("block", data=side.feature_block, dtype=text)
            part.create_dataset("feature", data=list(side.features), dtype=text)
            part.create_dataset("scores", data=getattr(model, f"{letter}_scores_"))
            part.create_dataset("weights", data=getattr(model, f"{letter}_weights_"))
            part.create_dataset("own", data=getattr(model, f"{letter}_correlations_"))
            part.create_dataset("other", data=getattr(model, f"{letter}_cross_correlations_"))
