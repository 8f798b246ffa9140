"""Cells and samples that a kind of measurement cannot have."""

from __future__ import annotations

import numpy as np

from workbench.intake.faults import counted
from workbench.prepare.refusal import VALUES, PrepareRefusal, without_value
from workbench.prepare.tables import MeasuredTable

OFF_BACKGROUND = "leave such cells empty where a background was taken off"


def check_not_negative(table: MeasuredTable, one: str, many: str, rule: str, advice: str = "") -> None:
    """Refuse negative cells; ``one`` and ``many`` name a value and several, ``rule`` says what they may be.

    Raises
    ------
    InputError
        Naming the first negative cell.
    """
    negative = table.values < 0
    if negative.any():
        raise PrepareRefusal(
            f"{counted(int(negative.sum()), f'{one} is', f'{many} are')} negative, the first at "
            f"{table.first_cell(negative)}; {rule}",
            key=VALUES,
            fitting=("log", "continuous"),
            advice=advice,
        )


def check_not_empty(table: MeasuredTable, lacking: str) -> None:
    """Refuse samples without a value above 0; ``lacking`` says in words what they do not have.

    Raises
    ------
    InputError
        Naming the samples.
    """
    empty = np.flatnonzero((table.values > 0).sum(axis=1) == 0)
    if empty.size and table.features:
        raise without_value(lacking, [table.samples[row] for row in empty], len(table.samples))
