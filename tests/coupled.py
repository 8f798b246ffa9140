"""Two small blocks with shared modules, and each block's components as it would give them alone."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from workbench.engine import BlockPair, Limits
from workbench.engine.pairs.screen import pair_tiles
from workbench.engine.pairs.tiles import PairTiles


@dataclass(frozen=True, eq=False)
class Coupled:
    """Blocks (n, p) and (n, q), the module of every feature (-1: none), and components of unit length."""

    x: np.ndarray
    y: np.ndarray
    modules: tuple[np.ndarray, np.ndarray]
    u: np.ndarray
    v: np.ndarray

    def pair(self, **changes: object) -> BlockPair:
        """Return the pair of blocks, some of its fields changed."""
        return BlockPair(**({"name": "x and y", "x": self.x, "y": self.y} | changes))

    def tiles(self, **changes: object) -> PairTiles:
        """Return the pair of blocks ready to be screened, with its rows made."""
        tiles = pair_tiles(self.pair(**changes), "pearson", Limits())
        tiles.hold()
        return tiles

    def true_share(self, keys: np.ndarray) -> tuple[float, float]:
        """Return the share of the planted pairs that are among the keys, and of the keys that are none."""
        one, other = self.modules
        same = (one[:, None] == other) & (one >= 0)[:, None]
        right = same.ravel()[keys]
        return right.sum() / max(same.sum(), 1), 1.0 - right.sum() / max(keys.size, 1)


def coupled(seed: int, *, n: int = 60, modules: int = 1, strength: float = 1.0) -> Coupled:
    """Return blocks of 80 and 30 features of which 15 and 8 follow each module with random signs."""
    rng = np.random.default_rng(seed)
    factors = rng.normal(size=(n, modules))
    sides, places, scores = [], [], []
    for features, members in ((80, 15), (30, 8)):
        module = np.full(features, -1)
        module[: members * modules] = np.arange(members * modules) % max(modules, 1)
        loadings = np.zeros((features, modules))
        signs = rng.choice([-1.0, 1.0], features)
        for k in range(modules):
            loadings[module == k, k] = strength * signs[module == k]
        block = factors @ loadings.T + rng.normal(size=(n, features))
        block -= block.mean(axis=0)
        sums = block @ loadings
        sides.append(block)
        places.append(module)
        scores.append(sums / np.linalg.norm(sums, axis=0))
    return Coupled(sides[0], sides[1], (places[0], places[1]), scores[0], scores[1])
