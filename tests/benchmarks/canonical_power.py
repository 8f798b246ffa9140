"""How often the test of the first canonical pair finds weak shared factors that private ones bury.

Each study has 60 samples, 2,000 and 200 features. Private factors load on every feature of their own side;
each shared factor loads on 60 and 12 features. Prints the share of studies with p at most 0.05, for the test
as a whole and for each statistic at each ridge, with shared factors and without any.

Seen, 100 studies, 199 permutations, three shared factors at strength 1.0: p at most 0.05 in 0.94.

Run: python tests/benchmarks/canonical_power.py [--studies 50] [--permutations 199] [--strength 1.0]
"""

from __future__ import annotations

import argparse
import time

import numpy as np
from numpy.typing import NDArray

from workbench.engine import canonical_pair_test

FloatArray = NDArray[np.float64]

N, P, Q = 60, 2000, 200
PRIVATE = (5, 3)
LOADED = (60, 12)


def draw_study(seed: int, shared: int, strength: float, private: float) -> tuple[FloatArray, FloatArray]:
    """Return both sides of one study; noise has unit variance, loadings are ``strength`` and N(0, private^2)."""
    rng = np.random.default_rng(seed)
    factors = rng.normal(size=(N, shared))
    sides = []
    for width, buried, loaded in zip((P, Q), PRIVATE, LOADED, strict=True):
        values = rng.normal(size=(N, width))
        values += private * rng.normal(size=(N, buried)) @ rng.normal(size=(buried, width))
        for factor in factors.T:
            values[:, rng.choice(width, loaded, replace=False)] += strength * factor[:, None]
        sides.append(values)
    return sides[0], sides[1]


def rejection_rates(
    studies: int, permutations: int, shared: int, strength: float, private: float
) -> tuple[float, FloatArray]:
    """Return the share of studies rejected at 0.05, by the whole test and by (statistic, ridge)."""
    whole, parts = [], []
    for seed in range(studies):
        x, y = draw_study(seed, shared, strength, private)
        test = canonical_pair_test(x, y, permutations=permutations, random_state=seed, early_stop=False)
        whole.append(test.p is not None and test.p <= 0.05)
        parts.append(test.p_by_ridge <= 0.05)
    return float(np.mean(whole)), np.mean(parts, axis=0)


def main() -> None:
    """Print the table."""
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument("--studies", type=int, default=50)
    parser.add_argument("--permutations", type=int, default=199)
    parser.add_argument("--strength", type=float, default=1.0, help="loading of a shared factor")
    parser.add_argument("--private", type=float, default=1.0, help="spread of a private factor's loadings")
    chosen = parser.parse_args()
    for shared in (3, 1, 0):
        start = time.perf_counter()
        whole, parts = rejection_rates(
            chosen.studies, chosen.permutations, shared, chosen.strength, chosen.private
        )
        print(f"{shared} shared factors: p <= 0.05 in {whole:.2f} of {chosen.studies} studies", end="")
        print(f" ({time.perf_counter() - start:.0f} s)")
        for name, row in zip(("wilks", "largest root"), parts, strict=True):
            print(f"  {name:13s}" + " ".join(f"{rate:5.2f}" for rate in row))


if __name__ == "__main__":
    main()
