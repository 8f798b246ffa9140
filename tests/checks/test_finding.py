"""Ids of findings stay the same and tell names apart; lines for the settings are what the settings read."""

from __future__ import annotations

import re
import tomllib

from hypothesis import assume, given
from hypothesis import strategies as st

from workbench.checks import Finding, finding_id, sorted_findings
from workbench.checks.finding import accept_line, adjust_line, exclude_line

NAMES = st.text(st.characters(codec="utf-8", exclude_categories=["Cs", "Cc"]), min_size=1, max_size=12)


@given(NAMES, NAMES)
def test_two_names_have_two_ids_that_are_plain(one, other):
    assume(one != other)
    first, second = finding_id("outlier", "block", one), finding_id("outlier", "block", other)
    assert first != second
    assert re.fullmatch(r"[A-Za-z0-9._-]+", first)


@given(NAMES, NAMES)
def test_lines_for_the_settings_hold_any_name(sample, reason):
    # Two clauses: the table, then the key with its value.
    table, line = exclude_line("rna", [sample], reason).split(" ", 1)
    assert tomllib.loads(f"{table}\n{line}")["blocks"]["rna"]["exclude"] == {sample: reason}
    table, line = adjust_line("", [sample]).split(" ", 1)
    assert tomllib.loads(f"{table}\n{line}")["samples"]["adjust"] == [sample]
    table, line = accept_line(finding_id("outlier", sample), reason).split(" ", 1)
    assert tomllib.loads(f"{table}\n{line}")["check"]["accept"] == {finding_id("outlier", sample): reason}


def test_findings_are_sorted_by_severity_then_check_then_id():
    made = [
        Finding(identity, check, severity, "", "")
        for severity, check, identity in [
            ("note", "a", "a-1"),
            ("error", "b", "b-2"),
            ("warning", "a", "a-3"),
            ("error", "b", "b-1"),
        ]
    ]
    assert [finding.id for finding in sorted_findings(made)] == ["b-1", "b-2", "a-3", "a-1"]
