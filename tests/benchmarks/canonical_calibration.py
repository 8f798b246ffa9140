"""Whether the test of canonical pairs keeps its level: p of the first pair, and false further pairs.

Each condition has 400 studies of 199 permutations, none stopped early. Where nothing is shared p of the first pair
is held against the uniform distribution (Kolmogorov-Smirnov); with one or two strong shared factors the share of
studies whose next pair has a cumulated p of 0.05 or less is held against 0.05 (one-sided binomial). Private factors
as strong as the noise of all features together lie on both sides throughout. At the end all conditions together, Holm
at 0.01.

Seen, seeds from 50,000, 400 studies or as told (share with p <= 0.05; Kolmogorov-Smirnov p, one-sided binomial p for
further pairs); Holm at 0.01 over all 35: all hold, the smallest is 0.011.

    24, p < n                       0.035  KS 0.85   24 differences, trend            0.068  KS 0.14
    24, p > n                       0.043  KS 0.85   24 differences, trend, nuisance  0.035  KS 0.26
    60, p < n                       0.035  KS 0.32   12 x 4 visits, p > n             0.052  KS 0.78
    60, p > n                       0.040  KS 0.96   12 x 4 visits, p < n             0.060  KS 0.78
    24, p > n, nuisance             0.043  KS 0.70   12 x 4 visits, trend             0.048  KS 0.70
    60, p < n, nuisance             0.062  KS 0.96   16 x 4 visits, 10 % lacking      0.058  KS 0.61
    60, p > n, nuisance             0.060  KS 0.70   12 x 4 visits, trend, nuisance   0.052  KS 0.45
    24, unequal blocks              0.043  KS 0.08   12 x 3 replicates                0.045  KS 0.21
    24, p > n, heavy tails          0.052  KS 0.05   12 x 3 replicates, nuisance      0.048  KS 0.21
    60, p < n, heavy, nuisance      0.043  KS 0.01   24 subjects' means of 3          0.043  KS 0.03
    24, p > n, heavy, nuisance      0.050  KS 0.32   second: 24 differences (200)     0.050  0.55
    second: 24, p < n               0.050  0.53      second: 12 x 4 visits (200)      0.025  0.97
    second: 24, p > n               0.055  0.35      second: 16 x 4 visits, p < n (200)  0.065  0.20
    second: 60, p < n               0.030  0.98      second: 12 x 3 replicates (200)  0.050  0.55
    second: 60, p > n (100)         0.070  0.23      third: 24, p > n                 0.035  0.94
    second: 24, p > n, nuisance     0.030  0.98      third: 60, p < n                 0.035  0.94
    second: 60, p > n, heavy (100)  0.020  0.96      third: 60, p > n (100)           0.040  0.74
                                                     third: 16 x 4 visits (200)       0.025  0.97

Visits with trend and nuisance, 3,200 further studies on four sets of seeds: 0.050. Removing earlier pairs at the ridge
of the test instead of at a tenth of the noise level: third pair, 60, p < n 0.165.

Run: python tests/benchmarks/canonical_calibration.py [--studies 400] [--only WORD]
"""

from __future__ import annotations

import argparse
import time
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.stats import binomtest, kstest

from workbench.engine import canonical_pair_test

FloatArray = NDArray[np.float64]
Draw = Callable[..., FloatArray]
PERMUTATIONS, LEVEL, HOLM = 199, 0.05, 0.01
STRONG = 3.0


@dataclass(frozen=True)
class Condition:
    """One kind of study: sizes, how many strong shared factors, and what else is in it."""

    name: str
    n: int
    p: int
    q: int
    shared: int = 0
    nuisance: int = 0
    heavy: bool = False
    blocks: tuple[int, ...] | None = None
    design: str = ""
    per_subject: int = 1
    trend: float = 0.0
    lacking: float = 0.0
    options: dict[str, Any] = field(default_factory=dict)


CONDITIONS = (
    Condition("24, p < n", 24, 8, 5),
    Condition("24, p > n", 24, 200, 60),
    Condition("60, p < n", 60, 20, 10),
    Condition("60, p > n", 60, 400, 150),
    Condition("24, p > n, nuisance", 24, 200, 60, nuisance=3),
    Condition("60, p < n, nuisance", 60, 20, 10, nuisance=3),
    Condition("60, p > n, nuisance", 60, 400, 150, nuisance=3),
    Condition("24, unequal blocks", 24, 210, 60, blocks=(200, 10)),
    Condition("24, p > n, heavy tails", 24, 200, 60, heavy=True),
    Condition("60, p < n, heavy tails, nuisance", 60, 20, 10, nuisance=3, heavy=True),
    Condition("24, p > n, heavy tails, nuisance", 24, 200, 60, nuisance=3, heavy=True),
    Condition("second pair: 24, p < n", 24, 8, 5, shared=1),
    Condition("second pair: 24, p > n", 24, 200, 60, shared=1),
    Condition("second pair: 60, p < n", 60, 20, 10, shared=1),
    Condition("second pair: 60, p > n", 60, 400, 150, shared=1),
    Condition("second pair: 24, p > n, nuisance", 24, 200, 60, shared=1, nuisance=3),
    Condition("second pair: 60, p > n, heavy tails", 60, 400, 150, shared=1, heavy=True),
    Condition("third pair: 24, p > n", 24, 200, 60, shared=2),
    Condition("third pair: 60, p < n", 60, 20, 10, shared=2),
    Condition("third pair: 60, p > n", 60, 400, 150, shared=2),
    Condition("24 differences, trend", 24, 200, 60, design="pairs", per_subject=2, trend=3.0),
    Condition("24 differences, trend, nuisance", 24, 200, 60, design="pairs", per_subject=2, trend=3.0, nuisance=2),
    Condition("second pair: 24 differences, trend", 24, 200, 60, shared=1, design="pairs", per_subject=2, trend=3.0),
    Condition("12 x 4 visits, p > n", 12, 200, 60, design="visits", per_subject=4),
    Condition("12 x 4 visits, p < n", 12, 12, 6, design="visits", per_subject=4),
    Condition("12 x 4 visits, trend", 12, 200, 60, design="visits", per_subject=4, trend=3.0),
    Condition("16 x 4 visits, 10 % lacking", 16, 200, 60, design="visits", per_subject=4, trend=3.0, lacking=0.1),
    Condition("12 x 4 visits, trend, nuisance", 12, 200, 60, design="visits", per_subject=4, trend=3.0, nuisance=2),
    Condition("second pair: 12 x 4 visits, trend", 12, 200, 60, shared=1, design="visits", per_subject=4, trend=3.0),
    Condition("second pair: 16 x 4 visits, p < n", 16, 12, 6, shared=1, design="visits", per_subject=4, trend=3.0),
    Condition("third pair: 16 x 4 visits, trend", 16, 200, 60, shared=2, design="visits", per_subject=4, trend=3.0),
    Condition("12 x 3 replicates", 12, 200, 60, design="replicates", per_subject=3),
    Condition("12 x 3 replicates, nuisance", 12, 200, 60, design="replicates", per_subject=3, nuisance=2),
    Condition("second pair: 12 x 3 replicates", 12, 200, 60, shared=1, design="replicates", per_subject=3),
    Condition("24 subjects' means of 3", 24, 200, 60, design="means", per_subject=3),
)  # fmt: skip


def draw_study(one: Condition, seed: int) -> tuple[FloatArray, FloatArray, dict[str, Any]]:
    """Return both sides, and what else the test is told."""
    rng = np.random.default_rng([seed, abs(hash_of(one.name))])
    draw: Draw = (
        (lambda *size: rng.standard_t(3, size)) if one.heavy else (lambda *size: rng.normal(size=size))
    )
    subject = np.repeat(np.arange(one.n), one.per_subject)
    visit = np.tile(np.arange(one.per_subject), one.n)
    rows = subject.size
    told: dict[str, Any] = dict(one.options)
    shared = draw(rows, one.shared)
    sides = [draw(rows, width) for width in (one.p, one.q)]
    columns = np.column_stack([np.arange(rows) % 2, draw(rows, max(one.nuisance - 1, 0))])
    for side in sides:
        width = side.shape[1]
        side += draw(rows, 2) @ rng.normal(size=(2, width))
        side += STRONG * shared @ rng.normal(size=(one.shared, width))
        if one.design:
            side += 2.0 * draw(one.n, width)[subject]
            side += autocorrelated(draw(rows, width), visit) if one.design == "visits" else 0.0
            side += one.trend * visit[:, None] * rng.normal(size=width)
        if one.nuisance:
            side += 3.0 * columns @ rng.normal(size=(columns.shape[1], width))
    if one.nuisance:
        told["nuisance"] = columns
    if one.design:
        told["subjects"] = subject
        told["times"] = None if one.design == "replicates" else visit
        told["level"] = "subjects" if one.design == "means" else "visits"
    if one.blocks:
        told["x_block_sizes"] = one.blocks
    keep = rng.random(rows) >= one.lacking
    for name in ("nuisance", "subjects", "times"):
        if told.get(name) is not None:
            told[name] = told[name][keep]
    return sides[0][keep], sides[1][keep], told


def autocorrelated(values: FloatArray, visit: NDArray[np.intp]) -> FloatArray:
    """Return values of which each keeps 0.7 of the one before, visit by visit."""
    out = values.copy()
    for row in np.flatnonzero(visit > 0):
        out[row] += 0.7 * out[row - 1]
    return out


def hash_of(text: str) -> int:
    """Return a number that depends on the text alone."""
    return int.from_bytes(text.encode()[:12], "big") % 2**31


def p_of(one: Condition, seed: int) -> float:
    """Return the cumulated p of the pair behind the shared ones."""
    x, y, told = draw_study(one, seed)
    pair = one.shared + 1
    test = canonical_pair_test(
        x,
        y,
        permutations=PERMUTATIONS,
        random_state=seed,
        early_stop=False,
        pairs=pair,
        stop_above=None,
        **told,
    )
    return float(test.p_by_pair[pair - 1]) if len(test.p_by_pair) >= pair else 1.0


def main() -> None:
    """Print one line for each condition, and the verdict over all."""
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument("--studies", type=int, default=400)
    parser.add_argument("--first", type=int, default=0, help="seed of the first study")
    parser.add_argument("--only", default="", help="conditions whose name holds this")
    parser.add_argument("--part", default="0/1", help="every how manieth condition, as 0/3")
    chosen = parser.parse_args()
    evidence: list[tuple[float, str]] = []
    part, parts = map(int, chosen.part.split("/"))
    for one in CONDITIONS[part::parts]:
        if chosen.only not in one.name:
            continue
        start = time.perf_counter()
        p = np.array([p_of(one, seed) for seed in range(chosen.first, chosen.first + chosen.studies)])
        found = int((p <= LEVEL).sum())
        if one.shared:
            fit, kind = binomtest(found, p.size, LEVEL, alternative="greater").pvalue, "binomial"
        else:
            fit, kind = kstest(p, "uniform").pvalue, "uniform"
        evidence.append((float(fit), one.name))
        print(
            f"{one.name:38s} p <= 0.05 in {found / p.size:.3f}, <= 0.1 in {(p <= 0.1).mean():.3f}, "
            f"<= 0.5 in {(p <= 0.5).mean():.3f}; {kind} {fit:.3f} ({time.perf_counter() - start:.0f} s)",
            flush=True,
        )
    evidence.sort()
    failed = [name for k, (fit, name) in enumerate(evidence) if fit <= HOLM / (len(evidence) - k)]
    print(f"Holm at {HOLM} over {len(evidence)} conditions: {failed or 'all hold'}")


if __name__ == "__main__":
    main()
