"""The third stage with ``method = "multiblock_pls"``: the outcome explained by all blocks, validated and tested."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import h5py
import numpy as np

from workbench.engine.linear import column_correlations
from workbench.store import Change, table_bytes
from workbench.workflow.analysis_inputs import analysis_inputs
from workbench.workflow.analysis_stage import analysis_stage
from workbench.workflow.analysis_view import view_analysis
from workbench.workflow.drawings import write_drawings
from workbench.workflow.fingerprints import columns_fingerprint, fingerprint
from workbench.workflow.model_file import FORMAT
from workbench.workflow.reporting import Reporter
from workbench.workflow.stages import Stage
from workbench.workflow.state import ProjectState
from workbench.workflow.supervised.supervised_drawings import supervised_view
from workbench.workflow.supervised.supervised_fit import SupervisedResult, supervised_result
from workbench.workflow.supervised.supervised_tables import (
    components_table,
    explained_table,
    panel_table,
    performance_table,
    predictions_table,
)
from workbench.workflow.supervised.supervised_words import describe

VERSION = 2
TABLES = ("components.tsv", "performance.tsv", "panel.tsv", "explained.tsv", "predictions.tsv")
FILES = (*TABLES, "model.h5", "supervised.txt")


def supervised_stage(state: ProjectState, name: str) -> Stage:
    """Return the stage that fits, validates and tests multi-block PLS, and writes its tables and figures."""
    return analysis_stage(state, name, "integrate", FILES, supervised_inputs, _work)


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
    """Write model.h5 in the layout of all methods, with the super scores, VIP and the outcome beside.

    ``own`` is a feature's correlation with each super score, ``other`` with the fitted outcome. Features of different
    layers load on one and the same super score, so that the correlation of the "two sides" is 1: the correlation that
    the model implies for two features is ``sum_a corr(x, t_a) corr(y, t_a)``.
    """
    model, study = result.model, result.study
    count = model.n_components_
    fitted = result.values @ model.coef_.T
    own = column_correlations(result.values, model.x_scores_)
    other = np.repeat(column_correlations(result.values, fitted - fitted.mean(axis=0))[:, -1:], count, axis=1)
    text = h5py.string_dtype("utf-8")
    with h5py.File(path, "w") as file:
        file.attrs["format"] = FORMAT
        file.attrs["method"] = "multiblock_pls"
        file.attrs["outcome"] = study.name
        file.attrs["kind"] = study.kind
        file.attrs["alike"] = result.validation.alike
        file.create_dataset("units", data=list(study.units.names), dtype=text)
        file.create_dataset("levels", data=list(study.levels), dtype=text)
        file.create_dataset("scores", data=model.x_scores_)
        components = file.create_group("components")
        components.create_dataset("correlation", data=np.ones(count))
        components.create_dataset("correlation_cv", data=np.ones(count))
        components.create_dataset("explained", data=model.y_explained_)
        start = 0
        for block, part in zip(result.blocks, result.split.train, strict=True):
            inside = slice(start, start + part.shape[1])
            start += part.shape[1]
            group = file.create_group(f"blocks/{block}")
            group.attrs["layer"] = study.view.blocks[block].layer
            names = [feature for _, feature in result.features[inside]]
            group.create_dataset("feature", data=names, dtype=text)
            columns = {"own": own, "other": other, "weights": model.x_weights_, "vip": model.vip_}
            for name, values in columns.items():
                group.create_dataset(name, data=values[inside])
