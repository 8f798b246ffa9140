"""Findings about the data: what is wrong with them, where, and what to do."""

from .build import checked_block, study_data
from .data import CheckedBlock, StudyData, shared_rows
from .finding import Finding, finding_id, sorted_findings
from .registry import run_checks

__all__ = [
    "CheckedBlock",
    "Finding",
    "StudyData",
    "checked_block",
    "finding_id",
    "run_checks",
    "shared_rows",
    "sorted_findings",
    "study_data",
]
