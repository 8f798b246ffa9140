"""The sample sheet as it stands beside the units of a canonical analysis."""

from __future__ import annotations

import numpy as np

from workbench.engine.look.association import SampleColumn
from workbench.look.view import BlockView, sample_columns
from workbench.workflow.analysis_view import AnalysisView
from workbench.workflow.canonical.canonical_units import Units
from workbench.workflow.subjects import subject_columns


def unit_columns(view: AnalysisView, units: Units) -> tuple[SampleColumn, ...]:
    """Return the columns that a component can be held against; of subjects only what is the same in all their samples.

    The subject's own column is left out: it tells every subject apart.
    """
    frame = view.sheet.loc[list(units.samples)]
    hidden = [column for column in subject_columns(view.study)[:1] if column in frame]
    frame = frame.drop(columns=hidden)
    if units.design is not None and units.kind in ("means", "differences"):
        subject = units.design.subject
        same = [column for column in frame if _constant(frame[column].astype(str).to_numpy(), subject)]
        frame = frame[same].loc[list(units.names)]
    if frame.shape[1] == 0:
        return ()
    every = BlockView(
        name="",
        layer="",
        values="",
        samples=tuple(map(str, frame.index)),
        features=(),
        prepared=np.empty((len(frame), 0)),
        columns=frame,
        kinds=view.study.samples.kinds,
    )
    return sample_columns(every)


def _constant(cells: np.ndarray, subject: np.ndarray) -> bool:
    return all(np.unique(cells[subject == code]).size == 1 for code in np.unique(subject))
