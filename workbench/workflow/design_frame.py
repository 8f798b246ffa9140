"""The design of some blocks: columns of the sample sheet, and of the run sheets of their own assays."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import pandas as pd

from workbench.intake import missing_samples
from workbench.settings import Settings
from workbench.workflow.loaded_block import LoadedBlock


@dataclass(frozen=True)
class DesignFrame:
    """Nuisance columns of some blocks beside the sample sheet.

    ``columns`` names them in ``frame``; a column of a block's run sheet is called ``batch (metabolites)``.
    ``kinds`` says of each that could be either how it is read.
    """

    frame: pd.DataFrame
    columns: tuple[str, ...]
    kinds: dict[str, str]

    def lacking(self, factors: Sequence[str], samples: Sequence[str]) -> dict[str, str]:
        """Return those of the samples that lack a value of the design, with the reason."""
        found = missing_samples(self.frame.loc[list(samples)], [*factors, *self.columns])
        return {
            sample: f"no value in column '{column}'" for column, names in found.items() for sample in names
        }


def design_frame(sheet: pd.DataFrame, settings: Settings, blocks: Sequence[LoadedBlock]) -> DesignFrame:
    """Return the nuisance of the study and of the named blocks' assays, each column once."""
    frame = sheet.copy()
    columns = list(settings.samples.adjust)
    kinds: dict[str, str] = dict(settings.samples.kinds)
    for block in blocks:
        for column in block.settings.adjust:
            label = column
            if column in block.run_columns:
                label = f"{column} ({block.name})"
                frame[label] = block.run_columns[column].reindex(frame.index)
                if column in settings.samples.kinds:
                    kinds[label] = settings.samples.kinds[column]
            columns.append(label)
    return DesignFrame(frame, tuple(dict.fromkeys(columns)), kinds)
