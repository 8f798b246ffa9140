"""Whether several blocks share anything, and how many components of it: a permutation test component by component."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from functools import reduce
from typing import Any

import numpy as np
from numpy.typing import NDArray

from workbench.engine.arrangements import Exchange
from workbench.engine.canonical.generalised_blocks import held_rows
from workbench.engine.canonical.generalised_components import PlacedBasis, generalised_components
from workbench.engine.canonical.pair_levels import BATCH_NUMBERS, NARROW, REMOVAL_RIDGE, orthonormal
from workbench.engine.canonical.pair_rows import Level, design_of, exchangeable_rows
from workbench.engine.canonical.pair_statistics import TEST_PATH, largest_roots, wilks_statistics
from workbench.engine.canonical.permutation import LEVEL, PairTest, level_test
from workbench.engine.canonical.turned_rows import TurnedRows
from workbench.engine.linear import RANK_TOLERANCE, ThinBasis, thin_basis, thin_svd
from workbench.engine.subjects import SubjectDesign, differences, subject_means
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]


@dataclass(frozen=True, eq=False)
class MovedBlock:
    """A block in sample space as a test rearranges it.

    ``carried`` is taken out of rearranged rows again, ``invariant`` no arrangement brings back.
    """

    placed: PlacedBasis
    noise_level: float
    carried: FloatArray
    invariant: FloatArray
    exchange: Exchange

    def rows(self, turned: TurnedRows, vectors: FloatArray) -> FloatArray:
        """Rearranged rows of vectors placed among all samples, (n_arrangements, n_samples, n_columns)."""
        every = np.zeros((len(turned.order), self.placed.n, vectors.shape[1]))
        every[:, self.placed.rows] = turned.rows(vectors)
        return every

    def kernels(self, turned: TurnedRows) -> FloatArray:
        """Kernel of rearranged rows in units of the noise level, (n_arrangements, n_samples, n_samples)."""
        basis, rows = self.placed.basis, self.placed.rows
        every = np.zeros((len(turned.order), self.placed.n, self.placed.n))
        every[:, rows[:, None], rows] = turned.kernels(
            basis.vectors * (basis.lengths / np.sqrt(self.noise_level))
        )
        return every

    def without(self, columns: FloatArray, moves: bool) -> MovedBlock | None:
        """Return the block with further columns removed; None where nothing is left."""
        columns = columns - self.invariant @ (self.invariant.T @ columns)
        removed = orthonormal([self.carried, columns])
        basis = self.placed.basis
        left = basis.vectors * basis.lengths
        left = left - removed @ (removed.T @ left)
        vectors, lengths, _ = thin_svd(left)
        rank = int(np.count_nonzero(lengths**2 > RANK_TOLERANCE * basis.lengths[0] ** 2))
        if rank == 0:
            return None
        thin = ThinBasis(vectors[:, :rank], lengths[:rank], basis.n_features)
        exchange = self.exchange if moves else self.exchange.staying()
        return MovedBlock(
            replace(self.placed, basis=thin), self.noise_level, removed, self.invariant, exchange
        )


@dataclass(frozen=True, eq=False)
class GeneralisedLevel:
    """Blocks as they stand before the next component; the first stays, each other one is rearranged on its own."""

    blocks: tuple[MovedBlock, ...]
    freedom: int

    @property
    def exchange(self) -> Exchange:
        """Arrangements of all blocks' rows, one block after the other."""
        return Exchange.side_by_side([block.exchange for block in self.blocks])

    @property
    def path(self) -> FloatArray:
        """Ridges of the test, in multiples of each block's noise level."""
        return TEST_PATH

    @property
    def batch(self) -> int:
        """Arrangements at a time, so many that their matrices take some megabytes, from 1 to 100."""
        size = max(sum(block.placed.basis.rank for block in self.blocks), self.blocks[0].placed.n)
        return int(np.clip(BATCH_NUMBERS // size**2, 1, 100))

    def statistics_of(self, arrangements: IndexArray) -> FloatArray:
        """``-log det R`` and the largest root of ``R`` at every ridge, shape (n_arrangements, 10).

        From the eigenvalues of ``R`` where the blocks have few directions, else by
        :mod:`workbench.engine.canonical.pair_statistics`.
        """
        turned, start = [], 0
        for block in self.blocks:
            order = arrangements[:, start : start + block.placed.rows.size] - start
            turned.append(TurnedRows.of(order, block.carried))
            start += block.placed.rows.size
        bases = [block.placed.basis for block in self.blocks]
        if sum(basis.rank for basis in bases) <= 2 * NARROW:
            return self._narrow(turned)
        kernels = sum(block.kernels(one) for block, one in zip(self.blocks, turned, strict=True))
        wilks = wilks_statistics(np.asarray(kernels), bases, [block.noise_level for block in self.blocks])
        roots = [self._roots(turned, multiple) for multiple in TEST_PATH.tolist()]
        return np.column_stack([wilks, *roots])

    def _narrow(self, turned: Sequence[TurnedRows]) -> FloatArray:
        together = np.concatenate(
            [
                block.rows(one, block.placed.basis.vectors)
                for block, one in zip(self.blocks, turned, strict=True)
            ],
            axis=2,
        )
        products = together.transpose(0, 2, 1) @ together
        ranks = [block.placed.basis.rank for block in self.blocks]
        owner = np.repeat(np.arange(len(ranks)), ranks)
        products[:, owner[:, None] == owner] = 0.0
        wilks, roots = np.empty((2, len(products), TEST_PATH.size))
        for k, multiple in enumerate(TEST_PATH.tolist()):
            g = np.concatenate(self._shrinkages(multiple))
            values = np.linalg.eigvalsh(g[:, None] * products * g)
            wilks[:, k] = -np.log(np.maximum(1.0 + values, np.finfo(float).eps)).sum(axis=1)
            roots[:, k] = 1.0 + values[:, -1]
        return np.hstack([wilks, roots])

    def _roots(self, turned: Sequence[TurnedRows], multiple: float) -> FloatArray:
        """Largest eigenvalue of ``R`` at one ridge: 1 more than that of its blocks ``A_b'A_c`` alone."""
        shrunk = [
            block.placed.basis.vectors * g
            for block, g in zip(self.blocks, self._shrinkages(multiple), strict=True)
        ]
        ends = np.cumsum([one.shape[1] for one in shrunk])

        def others(columns: FloatArray) -> FloatArray:
            variates = [
                block.placed.placed(one.forward(a @ w))
                for block, one, a, w in zip(
                    self.blocks, turned, shrunk, np.split(columns, ends[:-1]), strict=True
                )
            ]
            total = np.sum(variates, axis=0)
            return np.vstack(
                [
                    a.T @ one.backward((total - own)[block.placed.rows])
                    for block, one, a, own in zip(self.blocks, turned, shrunk, variates, strict=True)
                ]
            )

        return 1.0 + largest_roots(others, int(ends[-1]), len(turned[0].order))

    def _shrinkages(self, multiple: float) -> list[FloatArray]:
        return [block.placed.basis.shrinkage(multiple * block.noise_level) for block in self.blocks]

    def without(self, components: int) -> GeneralisedLevel | None:
        """Return the level behind the first components: all blocks' variates removed from every block."""
        ridges = [REMOVAL_RIDGE * block.noise_level for block in self.blocks]
        try:
            found = generalised_components([block.placed for block in self.blocks], ridges, components)
        except NumericsError:
            return None
        columns = np.hstack(found.variates)
        left = [block.without(columns[block.placed.rows], moves=k > 0) for k, block in enumerate(self.blocks)]
        kept = tuple(block for block in left if block is not None)
        return GeneralisedLevel(kept, self.freedom - columns.shape[1]) if len(kept) == len(left) else None


def generalised_pair_test(
    blocks: Sequence[FloatArray],
    *,
    permutations: int = 1000,
    nuisance: FloatArray | None = None,
    subjects: NDArray[Any] | SubjectDesign | None = None,
    times: NDArray[Any] | None = None,
    level: Level = "visits",
    components: int = 1,
    stop_above: float | None = LEVEL,
    random_state: int | None = None,
    early_stop: bool = True,
    part_sizes: Sequence[Sequence[int] | None] | None = None,
    progress: Callable[[int, int], None] | None = None,
) -> PairTest:
    """Test that no two of several blocks share anything, against a first component, then a second, and so on.

    Each block but the first is rearranged on its own, within the samples that it has; ``-log det R`` and the largest
    root of ``R`` are recomputed at 5 ridges over four decades, and p is the permutation p of the smallest of the 10
    p. A nuisance, and for component ``k`` the variates of all blocks of the components before it (at a tenth of the
    noise level), are removed from every block; rearranged rows are turned out of them again by the smallest rotation.
    Further components are tested on the samples that all blocks have (not at all where those are too few): filling in
    the variates of lacking ones left a false second component in 11 of 40 studies. Subjects as in
    :func:`workbench.engine.canonical.permutation.canonical_pair_test`.

    Parameters
    ----------
    blocks : sequence of ndarray of shape (n_samples, p_b)
        Rows of NaN for a sample that the block lacks; at least two blocks.
    part_sizes : sequence of (sequence of int or None), optional
        Features of each part of each block.

    Raises
    ------
    NumericsError
        When there are fewer than two blocks, values are not finite, or a block has no variation left.

    Examples
    --------
    >>> rng = np.random.default_rng(0)
    >>> shared = rng.normal(size=(30, 1))
    >>> blocks = [shared + rng.normal(size=(30, p)) for p in (50, 40, 30)]
    >>> generalised_pair_test(blocks, permutations=199, random_state=0).p
    0.005
    """
    if len(blocks) < 2:
        raise NumericsError(f"{len(blocks)} block(s); a test of what blocks share needs two")
    design = design_of(subjects, times)
    sizes = list(part_sizes) if part_sizes is not None else [None] * len(blocks)
    first = _first_level(blocks, nuisance, design, level, sizes)
    entropy = np.random.SeedSequence(random_state).entropy
    tests: list[PairTest] = []
    for k in range(components):
        if k == 1 and any(np.isnan(block[:, 0]).any() for block in blocks):
            try:
                first = _first_level(blocks, nuisance, design, level, sizes, common=True)
            except NumericsError:
                break
        here = first if k == 0 else first.without(k)
        if here is None or here.freedom < 1:
            break
        seed = np.random.SeedSequence(entropy, spawn_key=(k,) if k else ())
        tests.append(level_test(here, "rows of each block", permutations, seed, early_stop, progress))
        alone = tests[-1].p
        if alone is None or (stop_above is not None and alone > stop_above):
            break
    return replace(tests[0], further=tuple(tests[1:]))


def _first_level(
    blocks: Sequence[FloatArray],
    nuisance: FloatArray | None,
    design: SubjectDesign | None,
    level: Level,
    sizes: Sequence[Sequence[int] | None],
    common: bool = False,
) -> GeneralisedLevel:
    """Level of the first component; changes and means of subjects are formed first, where both samples are there."""
    if design is not None and (level == "subjects" or design.kind == "pairs"):
        how = subject_means if level == "subjects" else differences
        blocks = [how(design, np.asarray(block, dtype=np.float64)) for block in blocks]
        nuisance = None if nuisance is None else how(design, nuisance)
        design = None
    moved, freedom = [], 0
    held = [held_rows(block, str(k + 1)) for k, block in enumerate(blocks)]
    if common:
        held = [reduce(np.intersect1d, held)] * len(held)
    for k, (block, parts, rows) in enumerate(zip(blocks, sizes, held, strict=True)):
        inside = None if design is None else design.take(rows)
        if inside is not None:
            rows = rows[inside.repeated]
            inside = inside.take(np.flatnonzero(inside.repeated))
        columns = None if nuisance is None else nuisance[rows]
        one = exchangeable_rows([block[rows]], columns, inside, level, [parts], turned=False)
        basis = thin_basis(one.sides[0])
        exchange = one.exchange if k else one.exchange.staying()
        placed = PlacedBasis(basis, rows, len(block))
        moved.append(MovedBlock(placed, basis.noise_level, one.carried, one.invariant, exchange))
        freedom = max(freedom, one.freedom)
    return GeneralisedLevel(tuple(moved), freedom)
