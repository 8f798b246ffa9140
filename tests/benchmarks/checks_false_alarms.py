"""Measures what the checks but the search for swaps say about 50 clean studies of eight families, and their speed.

Run: `python tests/benchmarks/checks_false_alarms.py [studies]`.
"""

import sys
import time
from collections import Counter
from dataclasses import replace
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parent.parent))

from checks.studies import ALONE, checked
from simulated import Design, clinical, metabolites, proteins, simulate, transcripts

from workbench.checks import run_checks
from workbench.checks.registry import CHECKS

PAIR = (transcripts(group_effect=1.0), metabolites(group_effect=1.0))
FAMILIES = (
    *(Design(n=n, blocks=PAIR) for n in (12, 24, 48, 96)),
    Design(n=60, blocks=(transcripts(duplicates=30), metabolites(days=3, lacking=4), clinical())),
    Design(n=36, groups=("a", "b", "c"), blocks=(proteins(), metabolites(gaps=0.1))),
    Design(n=48, blocks=(transcripts(tails=4.0), metabolites(tails=4.0)), run_days=1),
    Design(n=24, modules=0, blocks=(transcripts(features=1500), proteins(group_effect=1.5))),
)


def main(studies: int) -> None:
    warnings, kinds, errors = [], Counter(), 0
    for k in range(studies):
        found = run_checks(checked(simulate(FAMILIES[k % len(FAMILIES)], 3000 + k)), checks=ALONE)
        warned = [finding for finding in found if finding.severity == "warning"]
        errors += sum(finding.severity == "error" for finding in found)
        warnings.append(len(warned))
        kinds.update(finding.check for finding in warned)
        for finding in warned:
            print(f"  family {k % len(FAMILIES)}: {finding.id}: {finding.what}")
    print(f"{studies} clean studies: {errors} errors, warnings: median {np.median(warnings):g}, "
          f"mean {np.mean(warnings):.2f}, by check {dict(kinds)}")  # fmt: skip
    for n in (60, 300):
        data = checked(simulate(replace(FAMILIES[0], n=n), 1))
        for words, checks in (("all but swaps", ALONE), ("all", CHECKS)):
            start = time.perf_counter()
            run_checks(data, checks=checks)
            print(f"n = {n} x (3,000 + 250), {words}: {time.perf_counter() - start:.1f} s")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 50)
