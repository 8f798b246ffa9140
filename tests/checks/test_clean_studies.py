"""Clean studies get no error, and hardly ever a warning."""

from __future__ import annotations

import numpy as np
import pytest
from checks.studies import ALONE, checked
from simulated import Design, clinical, metabolites, proteins, simulate, transcripts

from workbench.checks import run_checks

PAIR = (transcripts(features=1000, group_effect=1.0), metabolites(group_effect=1.0))
FAMILIES = (
    *(Design(n=n, blocks=PAIR) for n in (12, 24, 48, 96)),
    Design(
        n=60, blocks=(transcripts(features=800, duplicates=20), metabolites(days=3, lacking=4), clinical())
    ),
    Design(n=36, groups=("a", "b", "c"), blocks=(proteins(), metabolites(gaps=0.1))),
)


def test_clean_studies_have_no_error_and_at_most_one_warning_at_the_median():
    warnings = []
    for k in range(12):
        found = run_checks(checked(simulate(FAMILIES[k % len(FAMILIES)], 500 + k)), checks=ALONE)
        assert [finding.id for finding in found if finding.severity == "error"] == []
        warnings.append(sum(finding.severity == "warning" for finding in found))
    assert np.median(warnings) <= 1
    assert np.mean(warnings) <= 1


def test_findings_are_the_same_twice_and_their_ids_differ():
    data = checked(simulate(FAMILIES[1], 7))
    one, two = run_checks(data, seed=3, checks=ALONE), run_checks(data, seed=3, checks=ALONE)
    assert [finding.id for finding in one] == [finding.id for finding in two]
    assert len({finding.id for finding in one}) == len(one)
    assert [finding.what for finding in one] == [finding.what for finding in two]


@pytest.mark.parametrize("n", [2, 3, 4, 6])
def test_hardly_any_samples_are_no_reason_to_fail(n):
    design = Design(
        n=n, blocks=(proteins(features=30, module_size=2), metabolites(features=20, module_size=2))
    )
    found = run_checks(checked(simulate(design, 1)))
    assert any(finding.check in ("degrees_of_freedom", "alignment", "tangled_design") for finding in found)
