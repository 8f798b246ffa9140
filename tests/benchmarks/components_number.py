"""How many components the rules find in blocks whose number of factors is known.

Run: python tests/benchmarks/components_number.py [blocks]. Prints, for 200 blocks (24 to 96 samples, 200 to
3,000 features, 0 to 8 factors, unequal noise of features, and by thirds normal noise, heavy tails or unequal
samples): the share of blocks with at most 2 components too many, and, of the blocks whose factors an oracle
sees that knows the noise, the share with at most 1 too few.
"""

from __future__ import annotations

import sys
from collections.abc import Callable
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

from factor_blocks import NOISES, FactorBlock, factor_block, oracle_sees, scaled

from workbench.engine.look.component_number import ComponentNumber, choose_number

RULES: dict[str, Callable[[ComponentNumber], int]] = {
    "the number": lambda found: found.number,
    "parallel analysis": lambda found: found.parallel.number,
    "cross-validation": lambda found: found.cross_validated.number,
    "elbow": lambda found: found.elbow.number,
}


def measure(count: int) -> tuple[list[FactorBlock], np.ndarray, dict[str, np.ndarray]]:
    """Return the blocks, which of them the oracle sees, and each rule's error (found less true) per block."""
    blocks = [factor_block(seed) for seed in range(count)]
    seen = np.array([oracle_sees(block, seed) for seed, block in enumerate(blocks)])
    found = [choose_number(scaled(block.x), random_state=seed) for seed, block in enumerate(blocks)]
    errors = {
        rule: np.array([read(one) - block.truth for one, block in zip(found, blocks, strict=True)])
        for rule, read in RULES.items()
    }
    return blocks, seen, errors


def shares(errors: np.ndarray, seen: np.ndarray, among: np.ndarray) -> str:
    """Return one row's figures for some of the blocks."""
    chosen, visible = errors[among], errors[among & seen]
    return (
        f"{np.mean(chosen <= 2):>9.1%} {np.mean(chosen <= 0):>9.1%} {chosen.max():>6d} "
        f"{np.mean(visible >= -1):>9.1%} {np.mean(visible == 0):>9.1%}"
    )


def main(count: int) -> None:
    """Print the table."""
    blocks, seen, errors = measure(count)
    noise = np.array([block.noise for block in blocks])
    truth = np.array([block.truth for block in blocks])
    print(f"{count} blocks, all factors seen by the oracle in {seen.sum()}")
    print(f"{'rule':<18} {'blocks':<16} {'<= +2':>9} {'<= 0':>9} {'worst':>6} {'seen >= -1':>9} {'exact':>8}")
    everywhere = np.ones(count, dtype=bool)
    for rule, found in errors.items():
        print(f"{rule:<18} {'all':<16} {shares(found, seen, everywhere)}")
        for kind in NOISES:
            print(f"{'':<18} {kind:<16} {shares(found, seen, noise == kind)}")
        print(f"{'':<18} {'no factor':<16} {shares(found, seen, truth == 0)}")
    samples = np.array([block.x.shape[0] for block in blocks])
    every = errors["the number"] + truth >= samples - 1
    print(f"blocks in which the number is all components: {every.sum()}")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 200)
