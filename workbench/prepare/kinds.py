"""Every kind of values: its settings, its steps, and what it refuses."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

from workbench.errors import InputError
from workbench.intake.faults import counted
from workbench.prepare.beta import beta_steps, check_beta
from workbench.prepare.compositions import (
    check_composition_counts,
    check_proportion_cells,
    check_proportions,
    composition_steps,
    count_composition_steps,
)
from workbench.prepare.continuous import continuous_steps
from workbench.prepare.counts import check_count_cells, check_counts, count_steps
from workbench.prepare.fits import check_logs, check_no_logs
from workbench.prepare.intensities import check_intensities, intensity_steps
from workbench.prepare.log_values import log_steps
from workbench.prepare.mixed import check_mixed, mixed_steps
from workbench.prepare.refusal import PrepareRefusal
from workbench.prepare.steps import Step
from workbench.prepare.tables import MeasuredTable
from workbench.settings.names import hint

Check = Callable[[MeasuredTable], None]


def anything(table: MeasuredTable) -> None:
    """Accept any finite number."""


def no_runs(table: MeasuredTable) -> None:  # noqa: ARG001
    """Refuse any run: text has no mean.

    Raises
    ------
    InputError
        Always.
    """
    raise PrepareRefusal(
        "a run sheet for `mixed` values: text of several runs cannot be averaged",
        key="runs",
        advice="leave the run sheet out",
    )


@dataclass(frozen=True)
class Kind:
    """One kind of values.

    Attributes
    ----------
    steps : callable
        Settings -> steps.
    check, check_runs : callable
        Refuse tables, and runs as the rows of a table, that cannot be of this kind.
    fits : callable
        Refuses training tables that do not look like this kind; the settings may trust them.
    """

    steps: Callable[[Any], tuple[Step, ...]]
    check: Check = anything
    check_runs: Check = anything
    fits: Check = anything


KINDS = {
    "counts": Kind(count_steps, check_counts, check_count_cells),
    "intensities": Kind(intensity_steps, check_intensities, check_intensities, check_no_logs),
    "log": Kind(log_steps, fits=check_logs),
    "proportions": Kind(composition_steps, check_proportions, check_proportion_cells),
    "beta": Kind(beta_steps, check_beta, check_beta),
    "continuous": Kind(continuous_steps),
    "mixed": Kind(mixed_steps, check_mixed, no_runs),
}
MICROBE_COUNTS = Kind(count_composition_steps, check_composition_counts, check_count_cells)


def kind_of(layer: str, values: str) -> Kind:
    """Return the kind of a layer's values.

    Raises
    ------
    InputError
        For values that are none.
    """
    if values not in KINDS:
        allowed = ", ".join(f"`{kind}`" for kind in KINDS)
        raise InputError(
            f"no preparation for values `{values}` of layer '{layer}'; allowed: {allowed}{hint(values, list(KINDS))}"
        )
    return MICROBE_COUNTS if (layer, values) == ("microbes", "counts") else KINDS[values]


def check_names(key: str, names: Sequence[str], features: Sequence[str]) -> None:
    """Refuse a key of the settings that names features which the table lacks.

    Raises
    ------
    InputError
        With the nearest spelling.
    """
    known = set(features)
    absent = [name for name in names if name not in known]
    if absent:
        near = hint(absent[0], list(features))
        raise PrepareRefusal(
            f"`{key}` names {counted(len(absent), 'feature')} that the block lacks, the first '{absent[0]}'{near}",
            key=f"prepare.{key}",
        )
