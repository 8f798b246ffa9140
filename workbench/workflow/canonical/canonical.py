"""The third stage: what the layers of an analysis share, tested, cross-validated and accounted for."""

from __future__ import annotations

from collections.abc import Sequence

from workbench.store import Change, table_bytes
from workbench.workflow.analysis_inputs import analysis_inputs
from workbench.workflow.analysis_stage import analysis_stage
from workbench.workflow.analysis_view import view_analysis
from workbench.workflow.fingerprints import columns_fingerprint, fingerprint
from workbench.workflow.reporting import Reporter
from workbench.workflow.stages import Stage
from workbench.workflow.state import ProjectState

FILES = ("components.tsv", "explained.tsv", "association.tsv", "model.h5", "canonical.txt")


def canonical_stage(state: ProjectState, name: str) -> Stage:
    """Return the stage that fits and tests canonical pairs, and writes model.h5 and its tables."""
    return analysis_stage(state, name, "integrate", FILES, _inputs, _work)


def _inputs(state: ProjectState, name: str) -> dict[str, str]:
    """Return what the stage depends on: that of any analysis, and the sheet that components are held against."""
    sheet = state.require_sheet()
    return {
        **analysis_inputs(state, name),
        "sample sheet": columns_fingerprint(sheet, list(sheet.columns)),
        "private variation": fingerprint(state.settings.analyses[name].network.remove_private),
    }


def _work(state: ProjectState, change: Change, reporter: Reporter, name: str) -> Sequence[str]:
    from workbench.figures.canonical import draw_canonical
    from workbench.workflow.canonical.canonical_drawings import canonical_view
    from workbench.workflow.canonical.canonical_fit import canonical_fit
    from workbench.workflow.canonical.canonical_tables import (
        association_table,
        components_table,
        explained_table,
        model_of,
    )
    from workbench.workflow.canonical.canonical_words import reading, summary
    from workbench.workflow.drawings import write_drawings
    from workbench.workflow.model_file import write_model

    fit = canonical_fit(view_analysis(state, name), reporter)
    folder = f"results/{name}"
    tables = {
        "components": components_table,
        "explained": explained_table,
        "association": association_table,
    }
    for file, table in tables.items():
        change.write_bytes(f"{folder}/{file}.tsv", table_bytes(table(fit)))
    write_model(change, f"{folder}/model.h5", model_of(fit))
    change.write_text(f"{folder}/canonical.txt", "\n".join(reading(fit)) + "\n")
    for line in summary(fit):
        reporter.say(f"  {line}")
    return write_drawings(change, f"{folder}/figures/canonical", draw_canonical(canonical_view(fit)))
