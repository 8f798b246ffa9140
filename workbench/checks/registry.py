"""All checks, and the run over them."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace

from workbench.checks.alignment import check_alignment
from workbench.checks.batches import unnamed_batches
from workbench.checks.data import StudyData
from workbench.checks.depth import check_depth
from workbench.checks.duplicates import check_duplicates
from workbench.checks.finding import Finding, sorted_findings
from workbench.checks.gap_patterns import gap_patterns
from workbench.checks.identifier_columns import check_identifier_columns
from workbench.checks.identifiers import check_identifiers
from workbench.checks.kinds import check_kinds
from workbench.checks.outlying import outlying_samples
from workbench.checks.personal import personal_data
from workbench.checks.rare_levels import rare_levels
from workbench.checks.run_quality import check_runs
from workbench.checks.swapped import swapped_samples
from workbench.checks.tangled import check_design

Check = Callable[[StudyData], list[Finding]]

CHECKS: tuple[Check, ...] = (
    check_alignment,
    check_design,
    check_identifiers,
    check_identifier_columns,
    check_kinds,
    check_duplicates,
    check_depth,
    gap_patterns,
    outlying_samples,
    swapped_samples,
    unnamed_batches,
    check_runs,
    rare_levels,
    personal_data,
)


def run_checks(
    data: StudyData, seed: int | None = None, checks: Sequence[Check] = CHECKS
) -> tuple[Finding, ...]:
    """Return what all checks find, errors first, then by check and id.

    Parameters
    ----------
    data : StudyData
    seed : int, optional
        Of all draws; that of ``data`` when left out. Equal seeds give equal findings.
    checks : sequence of functions
        All of them when left out.
    """
    if seed is not None:
        data = replace(data, seed=seed)
    return sorted_findings(finding for check in checks for finding in check(data))
