"""All checks, and the run over them."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

from workbench.checks.data import StudyData
from workbench.checks.finding import Finding, sorted_findings

Check = Callable[[StudyData], list[Finding]]

CHECKS: tuple[Check, ...] = ()


def run_checks(data: StudyData, seed: int | None = None) -> tuple[Finding, ...]:
    """Return what all checks find, errors first, then by check and id.

    Parameters
    ----------
    data : StudyData
    seed : int, optional
        Of all draws; that of ``data`` when left out. Equal seeds give equal findings.
    """
    if seed is not None:
        data = replace(data, seed=seed)
    return sorted_findings(finding for check in CHECKS for finding in check(data))
