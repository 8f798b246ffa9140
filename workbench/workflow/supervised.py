"""The third stage with ``method = "multiblock_pls"``: the outcome explained by all blocks, validated and tested."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import h5py
import numpy as np
import pandas as pd

from workbench.engine.linear import column_correlations
from workbench.store import Change, table_bytes
from workbench.workflow.analysis_view import blocks_of, view_analysis
from workbench.workflow.canonical import analysis_inputs
from workbench.workflow.drawings import write_drawings
from workbench.workflow.fingerprints import columns_fingerprint, fingerprint
from workbench.workflow.reporting import Reporter
from workbench.workflow.stages import Stage
from workbench.workflow.state import ProjectState
from workbench.workflow.supervised_drawings import supervised_view
from workbench.workflow.supervised_fit import SupervisedResult, supervised_result
from workbench.workflow.supervised_tables import (
    components_table,
    describe,
    explained_table,
    panel_table,
    performance_table,
    predictions_table,
)

VERSION = 1
FORMAT = 1
TABLES = ("components.tsv", "performance.tsv", "panel.tsv", "explained.tsv", "predictions.tsv")
FILES = (*TABLES, "model.h5", "supervised.txt")


def supervised_stage(state: ProjectState, name: str) -> Stage:
    """Return the stage that fits, validates and tests multi-block PLS, and writes its tables and figures."""
    blocks = blocks_of(state.settings, name)
    return Stage(
        kind="integrate",
        subject=name,
        needs=tuple(f"prepare:{block}" for block in blocks),
        outputs=tuple(f"results/{name}/{file}" for file in FILES),
        inputs=lambda now: supervised_inputs(now, name),
        work=lambda now, change, reporter: _work(now, change, reporter, name),
    )


def supervised_inputs(state: ProjectState, name: str) -> dict[str, str]:
    """Return the hashes of what the analysis works on: those of any analysis, and the outcome."""
    settings = state.settings.analyses[name]
    hashes = analysis_inputs(state, name)
    columns = [column for column in (settings.outcome, state.settings.samples.time) if column is not None]
    sheet = state.require_sheet()
    hashes["outcome"] = fingerprint(
        [
            VERSION,
            settings.outcome,
            settings.outcome_kind,
            settings.level,
            columns_fingerprint(sheet, [column for column in columns if column in sheet]),
        ]
    )
    return hashes


def _work(state: ProjectState, change: Change, reporter: Reporter, name: str) -> Sequence[str]:
    from workbench.figures.supervised_pages import draw_supervised

    result = supervised_result(view_analysis(state, name), reporter)
    folder = f"results/{name}"
    tables = (components_table, performance_table, panel_table, explained_table, predictions_table)
    for file, table in zip(TABLES, tables, strict=True):
        change.write_bytes(f"{folder}/{file}", table_bytes(table(result)))
    lines = describe(result)
    change.write_text(f"{folder}/supervised.txt", "\n".join(lines) + "\n")
    write_supervised_model(change.new_file(f"{folder}/model.h5"), result)
    for line in lines:
        reporter.say(f"  {line}")
    return write_drawings(change, f"{folder}/figures/supervised", draw_supervised(supervised_view(result)))


def write_supervised_model(path: Path, result: SupervisedResult) -> None:
    """Write model.h5: weights and correlations of every feature with the super scores, VIP, and the regression."""
    model, study = result.model, result.study
    scores = model.x_scores_
    predicted = result.values @ model.coef_.T
    correlations = column_correlations(result.values, scores)
    others = column_correlations(result.values, predicted - predicted.mean(axis=0))
    text = h5py.string_dtype("utf-8")
    with h5py.File(path, "w") as file:
        file.attrs["format"] = FORMAT
        file.attrs["method"] = "multiblock_pls"
        file.attrs["outcome"] = study.name
        file.attrs["kind"] = study.kind
        file.create_dataset("units", data=list(study.units.names), dtype=text)
        file.create_dataset("scores", data=scores)
        file.create_dataset("levels", data=list(study.levels), dtype=text)
        start = 0
        for block, part in zip(study.predictors, result.split.train, strict=True):
            inside = slice(start, start + part.shape[1])
            start += part.shape[1]
            group = file.create_group(f"blocks/{block}")
            names = [feature for _, feature in result.features[inside]]
            group.create_dataset("feature", data=names, dtype=text)
            group.create_dataset("own", data=correlations[inside])
            group.create_dataset("other", data=np.repeat(others[inside, -1:], scores.shape[1], axis=1))
            group.create_dataset("weights", data=model.x_weights_[inside])
            group.create_dataset("vip", data=model.vip_[inside])
        components = file.create_group("components")
        components.create_dataset("explained", data=model.y_explained_)


def super_score_correlations(root: Path, analysis: str) -> pd.DataFrame:
    """Return the features of a multi-block PLS by (block, feature): ``component1_own`` ..., and ``vip``."""
    parts = []
    with h5py.File(root / f"results/{analysis}/model.h5", "r") as file:
        for block in file["blocks"]:
            group = file[f"blocks/{block}"]
            index = pd.MultiIndex.from_product([[block], group["feature"].asstr()[()]])
            own = group["own"][()]
            columns = {f"component{k + 1}_own": own[:, k] for k in range(own.shape[1])}
            parts.append(pd.DataFrame({**columns, "vip": group["vip"][()]}, index=index))
    return pd.concat(parts)


def implied_by_super_scores(edges: pd.DataFrame, features: pd.DataFrame) -> pd.DataFrame:
    """Return ``model_r`` and ``component`` of each edge: the correlation that the super scores imply.

    ``model_r = sum_a corr(x, t_a) corr(y, t_a)``: super scores do not correlate with each other. ``component`` carries
    most of it. Features that the model does not have (the outcome's own) have none.

    Parameters
    ----------
    edges : DataFrame
        With ``source``, ``source_block``, ``target``, ``target_block``.
    features : DataFrame
        Of :func:`super_score_correlations`.
    """
    own = features[[column for column in features if str(column).endswith("_own")]]
    first, second = (
        own.reindex(pd.MultiIndex.from_frame(edges[[f"{end}_block", end]])).to_numpy()
        for end in ("source", "target")
    )
    terms = first * second
    known = np.isfinite(terms).all(axis=1)
    carried = np.abs(np.nan_to_num(terms)).argmax(axis=1) + 1 if len(edges) else np.zeros(0, dtype=int)
    component = pd.array(np.where(known, carried, 0), dtype="Int64")
    component[~known] = pd.NA
    return pd.DataFrame({"model_r": terms.sum(axis=1), "component": component}, index=edges.index)
