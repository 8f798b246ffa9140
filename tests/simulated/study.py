"""A simulated study: the delivered tables, and the truth about them."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd

from .biology import Signal, block_signal, gamma_share, shared_scores
from .design import Block, Design
from .measure import delivered_values
from .sheet import sample_sheet, stream

PairName = tuple[str, str]


@dataclass(frozen=True)
class Truth:
    """What was put into a study; features are columns of the delivered tables, counted from 0.

    Parameters
    ----------
    pairs
        For each two blocks of different layers the true pairs, shape (k, 2): features that follow one module.
    modules
        For each block the module that every feature follows most, -1: none.
    loadings
        For each block the signed loadings, shape (features, modules), in noise standard deviations.
    shared, private
        Scores of the shared modules, and of each block's private factors, indexed by sample.
    group_effects
        For each block the effect of every group against the first, shape (features, groups - 1).
    copies
        For each block the near copies, shape (duplicates, 2): a copy and its original.
    swaps
        For each block the cycles of exchanged samples: each name's row belongs to the next one, the last's to
        the first.
    odd, lacking
        For each block the samples that went wrong, and those that it lacks.
    """

    pairs: dict[PairName, np.ndarray]
    modules: dict[str, np.ndarray]
    loadings: dict[str, np.ndarray]
    shared: pd.DataFrame
    private: dict[str, pd.DataFrame]
    group_effects: dict[str, np.ndarray]
    copies: dict[str, np.ndarray]
    swaps: dict[str, tuple[tuple[str, ...], ...]]
    odd: dict[str, tuple[str, ...]]
    lacking: dict[str, tuple[str, ...]]


@dataclass(frozen=True)
class Study:
    """A study as delivered: `samples` (the sample sheet) and `blocks`, tables of samples x features.

    Every table has the samples in an order of its own, and lacks some of them where the design says so.
    """

    design: Design
    seed: int
    samples: pd.DataFrame
    blocks: dict[str, pd.DataFrame]
    truth: Truth

    def aligned(self, name: str) -> pd.DataFrame:
        """Return a block's table with its samples in the order of the sample sheet."""
        table = self.blocks[name]
        return table.loc[[sample for sample in self.samples.index if sample in table.index]]

    def common_samples(self, *names: str) -> pd.Index:
        """Return the samples that all named blocks have, in the order of the sample sheet."""
        everywhere = [set(self.blocks[name].index) for name in names]
        return pd.Index(
            [sample for sample in self.samples.index if all(sample in some for some in everywhere)]
        )

    def positions(self, name: str, features: Iterable[str]) -> np.ndarray:
        """Return the columns of named features in a block's delivered table."""
        places = self.blocks[name].columns.get_indexer(pd.Index(features))
        if (places < 0).any():
            raise KeyError(f"block {name!r} has no feature {pd.Index(features)[int(np.argmin(places))]!r}")
        return np.asarray(places)

    def write(self, folder: Path) -> dict[str, Path]:
        """Write `samples.tsv` and every table into a folder; return the files by block (`"samples"`: the sheet).

        A `.tsv` table has features in rows, a `.csv` samples in rows; gaps are empty cells.
        """
        folder.mkdir(parents=True, exist_ok=True)
        files = {"samples": folder / "samples.tsv"}
        self.samples.to_csv(files["samples"], sep="\t")
        for block in self.design.blocks:
            files[block.name] = folder / _file_name(block)
            _write_table(self.blocks[block.name], files[block.name])
        return files


def _file_name(block: Block) -> str:
    return block.file or f"{block.name}.{'tsv' if block.counted else 'csv'}"


def _write_table(table: pd.DataFrame, path: Path) -> None:
    if path.suffix == ".tsv":
        table.T.rename_axis("feature").to_csv(path, sep="\t")
    else:
        table.rename_axis("sample").to_csv(path)


def simulate(design: Design, seed: int) -> Study:
    """Return the study of a design and a seed.

    One seed gives one study. Each part is drawn from a stream of its own, so that two designs that differ in one
    part (a swap, say) give the same study but for that part.
    """
    sheet = sample_sheet(design, seed)
    shared = shared_scores(design, seed)
    blocks, signals, swaps, lacking = {}, {}, {}, {}
    for place, block in enumerate(design.blocks):
        signal = block_signal(design, place, sheet, shared, seed)
        values = delivered_values(block, signal, gamma_share(block, design), stream(seed, place + 1, 30))
        values.index = sheet.index
        signals[block.name] = signal
        swaps[block.name], lacking[block.name] = _mishaps(
            block, sheet.index, signal, stream(seed, place + 1, 31)
        )
        blocks[block.name] = _delivered(
            values, swaps[block.name], lacking[block.name], stream(seed, place + 1, 32)
        )
    return Study(design, seed, sheet, blocks, _truth(design, sheet.index, shared, signals, swaps, lacking))


def _mishaps(
    block: Block, names: pd.Index, signal: Signal, rng: np.random.Generator
) -> tuple[tuple[tuple[str, ...], ...], tuple[str, ...]]:
    """Return the cycles of exchanged samples and the lacking samples, none of them odd, none both."""
    free = rng.permutation(np.delete(names.to_numpy(), signal.odd)).tolist()
    cycles = tuple(tuple(free.pop(0) for _ in range(length)) for length in block.swaps)
    return cycles, tuple(sorted(free[len(free) - block.lacking :]))


def _delivered(
    values: pd.DataFrame,
    swaps: tuple[tuple[str, ...], ...],
    lacking: tuple[str, ...],
    rng: np.random.Generator,
) -> pd.DataFrame:
    """Return the table under the labels of the tubes, without the lacking samples, in an order of its own."""
    label = {owner: name for cycle in swaps for name, owner in zip(cycle, cycle[1:] + cycle[:1], strict=True)}
    table = values.rename(index=label)
    order = rng.permutation(values.index.to_numpy())
    return table.loc[[name for name in order if name not in lacking]].rename_axis("sample")


def _truth(
    design: Design,
    names: pd.Index,
    shared: np.ndarray,
    signals: dict[str, Signal],
    swaps: dict[str, tuple[tuple[str, ...], ...]],
    lacking: dict[str, tuple[str, ...]],
) -> Truth:
    modules = {name: _module_of(signal.loadings) for name, signal in signals.items()}
    two = [(design.blocks[a].name, design.blocks[b].name) for a, b in design.block_pairs()]
    return Truth(
        pairs={(a, b): _true_pairs(signals[a].loadings, signals[b].loadings) for a, b in two},
        modules=modules,
        loadings={name: signal.loadings for name, signal in signals.items()},
        shared=pd.DataFrame(shared, index=names),
        private={name: pd.DataFrame(signal.private, index=names) for name, signal in signals.items()},
        group_effects={name: signal.group_effects for name, signal in signals.items()},
        copies={name: signal.copies for name, signal in signals.items()},
        swaps=swaps,
        odd={name: tuple(names[signal.odd]) for name, signal in signals.items()},
        lacking=lacking,
    )


def _module_of(loadings: np.ndarray) -> np.ndarray:
    """Return the module of every feature, -1: none."""
    inside = (loadings != 0).any(axis=1)
    module = np.full(len(loadings), -1)
    if loadings.shape[1]:
        module[inside] = np.abs(loadings[inside]).argmax(axis=1)
    return module


def _true_pairs(one: np.ndarray, other: np.ndarray) -> np.ndarray:
    """Return the pairs of features that follow a module together, from their loadings; shape (k, 2), sorted."""
    return np.argwhere((one != 0).astype(int) @ (other != 0).astype(int).T > 0)
