"""The measured values of a block's samples: names accepted, runs combined, exchanged rows put right."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd

from workbench.errors import InputError
from workbench.settings.schema import BlockSettings

from .combine import combined_runs
from .faults import counted, listed
from .names import RUNS, SAMPLES, NameMatch, OfferedNamesError, Words, match_names
from .names_file import read_names
from .runs import read_run_sheet, run_names
from .swaps import owners
from .table import DeliveredTable, delivered_table


@dataclass(frozen=True)
class Measured:
    """What a block's files hold.

    Attributes
    ----------
    values
        DataFrame, the block's samples (sheet order) x features.
    table
        The delivered table; its rows are runs where there is a run sheet.
    runs
        The run sheet's rows that have values, in its order; None without a run sheet.
    run_values
        ndarray (runs, features); None without a run sheet.
    lines
        What was understood of the run sheet, a sentence each.
    """

    values: pd.DataFrame
    table: DeliveredTable
    runs: pd.DataFrame | None
    run_values: np.ndarray | None
    lines: tuple[str, ...]


@dataclass(frozen=True)
class _Names:
    """Accepted names of samples and of runs; None where none were accepted."""

    samples: Mapping[str, str] | None = None
    runs: Mapping[str, str] | None = None


def measured(settings: BlockSettings, root: Path, sample_ids: Sequence[str]) -> Measured:
    """Return the measured values of a block.

    Raises
    ------
    InputError
        When a file cannot be used as it is.
    """
    owner = owners(settings.swap, sample_ids)
    if settings.runs is not None:
        return _measured_runs(settings, root, root / settings.runs, sample_ids, owner)
    names = _accepted(settings, root, sample_ids, None)
    table = _table(settings, root, sample_ids, names.samples, SAMPLES)
    rows = table.values.rename(index=owner)
    return Measured(rows.loc[[name for name in sample_ids if name in rows.index]], table, None, None, ())


def _measured_runs(
    settings: BlockSettings, root: Path, path: Path, sample_ids: Sequence[str], owner: Mapping[str, str]
) -> Measured:
    """Return the values of a table of runs, combined by sample; ``path`` is that of the run sheet."""
    names = _accepted(settings, root, sample_ids, path)
    sheet = read_run_sheet(path, sample_ids, names.samples)
    table = _table(settings, root, list(sheet.frame.index), names.runs, RUNS)
    runs = sheet.frame.loc[list(table.matched)]
    runs = runs.assign(sample=[owner.get(name, name) for name in runs["sample"]])
    own = runs.loc[runs["role"] == "sample", "sample"]
    if own.empty:
        raise InputError(
            f"{table_path(settings, root)}: none of its runs is of a sample: {listed(list(runs.index), 3)} are pools "
            "and blanks; the runs of samples must have the same names in the table and in the run sheet"
        )
    held, total = set(own), settings.values == "counts"
    samples = [name for name in sample_ids if name in held]
    values = combined_runs(table.values.loc[own.index], own, samples, total=total)
    lines = (*sheet.notes, *_several_runs(path.name, own, total))
    return Measured(values, table, runs, table.values.to_numpy(dtype=np.float64), lines)


def table_path(settings: BlockSettings, root: Path) -> Path:
    """Return the path of the delivered table."""
    return root / settings.file


def _several_runs(file: str, own: pd.Series, total: bool) -> list[str]:
    """Return a sentence about samples with several runs."""
    several = own.value_counts()
    several = several[several > 1]
    if several.empty:
        return []
    how = "added up" if total else "averaged"
    return [f"{file}: {counted(len(several), 'sample')} with several runs, whose values are {how} here"]


def _accepted(settings: BlockSettings, root: Path, sample_ids: Sequence[str], runs: Path | None) -> _Names:
    """Return the names of the settings' table of names, those of samples and those of runs apart."""
    if settings.names is None:
        return _Names()
    accepted = read_names(root / settings.names)
    if runs is None:
        accepted.check_targets(sample_ids)
        return _Names(samples=accepted.of(sample_ids, "sample"))
    of_runs = run_names(runs)
    accepted.check_targets(sample_ids, of_runs)
    return _Names(accepted.of(sample_ids, "sample"), accepted.of(of_runs, "run"))


def _table(
    settings: BlockSettings, root: Path, ids: Sequence[str], names: Mapping[str, str] | None, words: Words
) -> DeliveredTable:
    return delivered_table(
        table_path(settings, root),
        sample_ids=ids,
        values=settings.values,
        samples_in=settings.samples_in,
        sheet=settings.sheet,
        array=settings.array,
        decimal=settings.decimal,
        names=names,
        words=words,
    )


def offered_names(settings: BlockSettings, root: str | Path, sheet: pd.DataFrame) -> NameMatch:
    """Return the names that accepting would take: those of the table, and of the run sheet where there is one.

    What `names_table` makes of it, written to the file that the settings name (``names``), is what `build_block`
    then uses. No candidates: the names match as they are.

    Parameters
    ----------
    settings
        The block's entry in ``project.toml``; its ``names`` are not looked at.
    root
        The project's folder.
    sheet
        Sample sheet, indexed by sample id.

    Raises
    ------
    InputError
        When the table or the run sheet cannot be read.
    """
    ids = [str(sample) for sample in sheet.index]
    if settings.runs is None:
        return _offered(settings, Path(root), ids, SAMPLES)
    path, of_samples = Path(root) / settings.runs, None
    try:
        runs = read_run_sheet(path, ids)
    except OfferedNamesError as offer:
        of_samples = offer.match
        runs = read_run_sheet(path, ids, {here: there for here, there, _ in of_samples.candidates})
    of_runs = _offered(settings, Path(root), list(runs.frame.index), RUNS)
    if of_samples is None:
        return of_runs
    return NameMatch(
        *(
            (*getattr(of_samples, part), *getattr(of_runs, part))
            for part in ("exact", "candidates", "only_table", "only_sheet", "ambiguous")
        )
    )


def _offered(settings: BlockSettings, root: Path, ids: Sequence[str], words: Words) -> NameMatch:
    try:
        table = _table(settings, root, ids, None, words)
    except OfferedNamesError as offer:
        return offer.match
    return match_names([*table.matched, *table.only_table], ids)
