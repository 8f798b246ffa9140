"""Run every check of the repository: format, lint, types, tests with doctests and coverage.

``python tests/everything.py`` runs all; further arguments go to pytest (``-k name``, a path).
"""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent
LEAST_COVERAGE = 85
THREADS = dict.fromkeys(("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS"), "1")


def steps(arguments: list[str]) -> list[list[str]]:
    """Return the commands in the order in which they are cheapest to fail."""
    workers = str(min(4, os.cpu_count() or 1))
    coverage = [] if arguments else ["--cov", "--cov-report=term", f"--cov-fail-under={LEAST_COVERAGE}"]
    return [
        ["ruff", "format", "--check", "."],
        ["ruff", "check", "."],
        ["mypy"],
        ["pytest", "-n", workers, "--dist", "worksteal", "-q", *coverage, *arguments],
    ]


def main() -> int:
    """Run the steps; stop at the first that fails and return its exit code."""
    for step in steps(sys.argv[1:]):
        print("+", *step, flush=True)
        done = subprocess.run(
            [sys.executable, "-m", *step], cwd=ROOT, env={**os.environ, **THREADS}, check=False
        )
        if done.returncode:
            return done.returncode
    return 0


if __name__ == "__main__":
    sys.exit(main())
