"""The run sheet of a block: which sample each assay run measured, in which role, when and in which batch."""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd

from workbench.errors import InputError
from workbench.settings.schema import BlockSettings

from .columns import NamedColumns, read_columns
from .faults import Faults, counted, listed, shown
from .ids import check_present, check_unique
from .kinds import present
from .names import OfferedNamesError, candidates_offered, match_names
from .run_words import column_places, role_of, word_notes
from .tokens import MISSING, number_of

_NAMES = ("run", "sample", "role")


@dataclass(frozen=True)
class RunSheet:
    """A run sheet.

    Attributes
    ----------
    frame
        DataFrame indexed by run (index name ``run``), in file order, with the columns ``sample`` (empty for
        pools and blanks), ``role``, ``order`` (float64, NaN where unknown), ``batch``, ``replicate`` and the
        file's further columns, as text, empty where missing. Runs without a sample of the sheet are left out.
    left_out
        Runs of role ``sample`` whose sample is not given, or is none of the sheet.
    notes
        What was understood, one sentence each.
    """

    frame: pd.DataFrame
    left_out: tuple[str, ...]
    notes: tuple[str, ...]


def read_run_sheet(
    path: str | Path, sample_ids: Sequence[str], names: Mapping[str, str] | None = None
) -> RunSheet:
    """Return the run sheet of a TSV, CSV or XLSX file.

    Columns: ``run`` and ``role`` (``sample``, ``pool`` or ``blank``) are needed; ``sample`` (left out: a run
    has the name of its sample), ``order`` (of injection, a number), ``batch`` and ``replicate`` are known;
    further ones are kept. Other words of laboratories for columns and roles (``File Name``, ``QC``) are listed
    in `workbench.intake.run_words`, taken, and told; names of runs and samples are taken as they are written.

    Parameters
    ----------
    path
        The file.
    sample_ids
        Ids of the sample sheet.
    names
        Accepted names: as the run sheet writes a sample, to its id. None: none were accepted.

    Raises
    ------
    InputError
        For missing columns, runs without a name or named twice, other roles, orders that are no numbers, and
        pools or blanks that are said to be a sample, with line and column; when no run is of a sample; and
        `OfferedNamesError` when samples are written nearly as in the sample sheet.
    """
    found = read_columns(path, "run sheet", ("run",))
    known = column_places(found.path, found.names)
    cells = {name: found.texts(column, names=name in _NAMES) for name, column in known.items()}
    runs = cells["run"]
    check_present(found.path, runs, "run", lambda row: found.place(row, known["run"]))
    check_unique(found.path, runs, "run", lambda row: found.place(row, known["run"]))
    roles = [role_of(cell) or "" for cell in cells["role"]]
    samples = _samples(cells.get("sample", runs), set(sample_ids), names or {})
    order = [number_of(cell) for cell in cells.get("order", [""] * len(runs))]
    read = _Read(roles, samples, order, set(sample_ids))
    _check_cells(found, known, cells, read)
    if names is None:
        _offer_names(found.path, samples, roles, sample_ids)
    frame = _frame(found, known, read)
    kept = _kept(frame, set(sample_ids))
    if not (frame["role"][kept] == "sample").any():
        raise InputError(
            f"{path}: no run is of a sample of the sample sheet: the runs' samples are {listed(samples, 3)}, the "
            f"sheet has {listed(list(sample_ids), 3)}; write the same ids in both"
        )
    words = (f"{found.path.name}: {told}" for told in word_notes(found.names, known, cells["role"]))
    notes = [*found.raw.notes, *words, *_notes(found.path.name, frame, kept)]
    return RunSheet(frame[kept], tuple(frame.index[~kept]), tuple(notes))


def run_columns(path: str | Path) -> tuple[str, ...]:
    """Return the columns of a run sheet that a block's ``adjust`` may name: all but run, sample and role."""
    found = read_columns(path, "run sheet", ("run",))
    known = {column: name for name, column in column_places(found.path, found.names).items()}
    names = [known.get(place, name) for place, name in enumerate(found.names)]
    return tuple(name for name in names if name not in ("run", "sample", "role"))


def run_columns_of(blocks: Mapping[str, BlockSettings], root: Path) -> dict[str, tuple[str, ...]]:
    """Return, for each block with a run sheet that is there, the columns that its ``adjust`` may name.

    This is what `workbench.settings.cross_check` takes; a run sheet that is not there is a fault that it tells.
    """
    sheets = {name: root / block.runs for name, block in blocks.items() if block.runs is not None}
    return {name: run_columns(path) for name, path in sheets.items() if path.is_file()}


def run_names(path: str | Path) -> tuple[str, ...]:
    """Return the names of the runs of a run sheet, as they are written."""
    found = read_columns(path, "run sheet", ("run",))
    return tuple(found.texts(column_places(found.path, found.names)["run"]))


@dataclass(frozen=True)
class _Read:
    """The cells of a run sheet that have been read, by row."""

    roles: list[str]
    samples: list[str]
    order: list[float | None]
    ids: Collection[str]


def _samples(cells: Sequence[str], ids: Collection[str], names: Mapping[str, str]) -> list[str]:
    """Return the sample of each run as it is written or by its accepted name, empty where none is given."""
    return ["" if cell.strip() in MISSING and cell not in ids else names.get(cell, cell) for cell in cells]


def _check_cells(
    found: NamedColumns, known: Mapping[str, int], cells: Mapping[str, Sequence[str]], read: _Read
) -> None:
    faults = Faults(found.path)
    for row, run in enumerate(cells["run"]):
        for column, told in _cell_faults(cells, read, row).items():
            faults.add(f"{found.place(row, known.get(column, known['run']))} (run {shown(run)}): {told}")
    if faults.total:
        raise faults.error(
            f"{counted(faults.total, 'cell')} of the run sheet cannot be used",
            "roles are sample, pool and blank; an order is a number, or empty",
        )


def _cell_faults(cells: Mapping[str, Sequence[str]], read: _Read, row: int) -> dict[str, str]:
    """Return what is wrong with the cells of a row, by column."""
    faults = {}
    role = read.roles[row]
    if not role:
        faults["role"] = f"the role is {shown(cells['role'][row])}"
    if role in ("pool", "blank") and "sample" in cells and read.samples[row] in read.ids:
        faults["sample"] = f"a {role}, and yet the sample {shown(read.samples[row])} of the sample sheet"
    number, cell = read.order[row], cells["order"][row] if "order" in cells else ""
    if not (cell.strip() in MISSING if number is None else np.isfinite(number)):
        faults["order"] = f"the order is {shown(cell)}"
    return faults


def _offer_names(path: Path, samples: Sequence[str], roles: Sequence[str], ids: Sequence[str]) -> None:
    written = dict.fromkeys(
        name for name, role in zip(samples, roles, strict=True) if role == "sample" and name
    )
    match = match_names(written, ids)
    if match.candidates:
        raise OfferedNamesError(candidates_offered(path, match), match)


def _frame(found: NamedColumns, known: Mapping[str, int], read: _Read) -> pd.DataFrame:
    index = pd.Index(found.texts(known["run"]), dtype=object, name="run")
    samples = [name if role == "sample" else "" for name, role in zip(read.samples, read.roles, strict=True)]
    data: dict[str, object] = {
        "sample": samples,
        "role": read.roles,
        "order": np.array([np.nan if n is None else n for n in read.order], dtype=np.float64),
    }
    for name in ("batch", "replicate"):
        data[name] = _filled(found.texts(known[name], names=False)) if name in known else [""] * len(index)
    for place, name in enumerate(found.names):
        if place not in known.values():
            data[name] = _filled(found.texts(place, names=False))
    frame = pd.DataFrame(data, index=index)
    return frame.astype({name: object for name in frame if name != "order"})


def _filled(cells: Sequence[str]) -> list[str]:
    """Return cells without blanks at their ends, empty where a missing token stands."""
    column = pd.Series(list(cells), dtype=object)
    return list(present(column).reindex(column.index).fillna(""))


def _kept(frame: pd.DataFrame, ids: Collection[str]) -> pd.Series:
    return (frame["role"] != "sample") | frame["sample"].isin(ids)


def _notes(file: str, frame: pd.DataFrame, kept: pd.Series) -> list[str]:
    """Return the sentences about a run sheet: what it holds, what is left out, what is odd."""
    used, lost = frame[kept], frame[~kept]
    roles = used["role"].value_counts()
    of = used.loc[used["role"] == "sample", "sample"].nunique()
    parts = [f"{counted(int(roles['sample']), 'run')} of {counted(of, 'sample')}"]
    parts += [counted(int(roles[role]), role) for role in ("pool", "blank") if role in roles]
    notes = [f"{file}: {', '.join(parts)}"]
    if len(lost):
        names = [
            f"{run} ({sample or 'none'})" for run, sample in zip(lost.index, lost["sample"], strict=True)
        ]
        notes.append(
            f"{file}: {counted(len(lost), 'run')} without a sample of the sample sheet, left out: {listed(names)}"
        )
    return [*notes, *(f"{file}: {told}" for told in _odd_order(used))]


def _odd_order(frame: pd.DataFrame) -> list[str]:
    """Return what is odd about the order of injection."""
    known = frame["order"].notna()
    told = []
    if known.any() and not known.all():
        told.append(
            f"{counted(int((~known).sum()), 'run')} without an order: {listed(list(frame.index[~known]))}"
        )
    again = frame[known & frame.duplicated(["batch", "order"], keep=False)]
    if len(again):
        told.append(
            f"{counted(len(again), 'run')} share an order within a batch: {listed(list(again.index))}"
        )
    return told
