"""From a delivered file to a checked table, samples x features, aligned to the sample sheet by id."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path

import numpy as np
import pandas as pd

from workbench.errors import InputError

from .apart import SetApart, set_apart
from .faults import counted, shown
from .ids import check_no_dates, check_present, check_unique, id_notes, refuse_broken
from .mixed import read_mixed
from .names import SAMPLES, Words
from .numbers import Numbers, read_numbers
from .orientation import Matching, match_samples, near_names
from .part import Part
from .ranges import check_range
from .raw import HEADER, RawTable
from .readers import read_delivered

_ONE_DIGIT = 0.95
VALUES = ("counts", "intensities", "log", "proportions", "beta", "continuous", "mixed")


@dataclass(frozen=True)
class DeliveredTable:
    """A delivered table, checked and aligned.

    Attributes
    ----------
    values
        DataFrame, samples (sheet order) x features (file order), float64, missing = NaN. For ``mixed`` a
        feature of text holds the positions of its levels.
    samples_in
        ``rows`` or ``columns``: where the samples stand in the file.
    matched
        Samples of the sheet that the table has, in sheet order: the rows of ``values``.
    only_sheet, only_table
        Ids that one side alone has.
    levels
        Levels of the text features of a ``mixed`` table, keyed by feature.
    notes
        What was found and accepted, one sentence each.
    annotations
        DataFrame of text, indexed by feature: columns of the table that stood before the first sample.
    under_limit
        For each feature that has some, the number of cells such as ``<LOD``, which count as missing.
    path
        The file.
    decimal, sheet, array
        What a rebuild must be told to read the same: the decimal mark where numbers are not written as
        ``1234.5``, the sheet of a workbook, the array of an .h5ad file; None where there is no choice.
    decisions
        The notes in at most five lines: file, samples, what was set apart, numbers, features.
    """

    values: pd.DataFrame
    samples_in: str
    matched: tuple[str, ...]
    only_sheet: tuple[str, ...]
    only_table: tuple[str, ...]
    notes: tuple[str, ...]
    levels: Mapping[str, tuple[str, ...]] = field(default_factory=dict)
    annotations: pd.DataFrame = field(default_factory=pd.DataFrame)
    under_limit: Mapping[str, int] = field(default_factory=dict)
    path: Path = Path()
    decimal: str | None = None
    sheet: str | None = None
    array: str | None = None
    decisions: tuple[str, ...] = ()


def delivered_table(
    path: str | Path,
    *,
    sample_ids: Sequence[str],
    values: str,
    samples_in: str | None = None,
    sheet: str | None = None,
    array: str | None = None,
    names: Mapping[str, str] | None = None,
    words: Words = SAMPLES,
    decimal: str | None = None,
) -> DeliveredTable:
    """Return the table of a delivered file, checked, and aligned to the samples of the sheet by id.

    Parameters
    ----------
    path
        TSV, CSV (also .gz), XLSX, .h5ad or Parquet.
    sample_ids
        Ids of the sample sheet, in its order.
    values
        One of ``VALUES``: what the numbers are.
    samples_in
        ``rows`` or ``columns``; found by matching the ids when left out.
    sheet, array
        Sheet of a workbook, array of an .h5ad file.
    names
        Accepted names: delivered name to sample. None: none were accepted, and names that are nearly those of
        the sheet are refused.
    words
        What the ids are called in messages: samples, or runs.
    decimal
        Decimal mark of text, ``.`` or ``,``; found when left out, where all numbers agree on one.

    Raises
    ------
    InputError
        For everything that would have to be guessed; the message names file, line and column (or cell),
        feature and sample, up to five places with the total count, and the way out.
    """
    if values not in VALUES:
        raise InputError(f"{path}: values is '{values}'; allowed: {', '.join(VALUES)}")
    if decimal not in (None, ".", ","):
        raise InputError(f"{path}: decimal is {decimal!r}; allowed: '.', ',', or left out")
    delivered = read_delivered(path, sheet=sheet, array=array)
    likely = near_names(delivered, sample_ids) if names is None else names
    apart = set_apart(delivered, sample_ids, samples_in, likely, mixed=values == "mixed")
    raw = apart.raw
    _check_ids_present(raw)
    matching = match_samples(raw, sample_ids, samples_in, names, words)
    part = _part(raw, matching)
    features = raw.rows if matching.samples_in == "columns" else raw.columns
    _check_features(raw, features, matching.samples_in)
    numbers, levels = _read(part, values, decimal)
    told = _told(raw, apart, matching, numbers)
    return DeliveredTable(
        values=pd.DataFrame(
            numbers.values,
            index=pd.Index(list(matching.matched), dtype="object"),
            columns=pd.Index(list(features), dtype="object"),
            copy=False,
        ),
        samples_in=matching.samples_in,
        matched=matching.matched,
        only_sheet=matching.only_sheet,
        only_table=matching.only_table,
        notes=tuple(note for group in told.values() for note in group),
        levels=levels,
        annotations=apart.annotations.reindex(pd.Index(list(features), dtype="object")),
        under_limit=numbers.under_limit,
        path=raw.path,
        decimal=None if numbers.marks.plain else numbers.marks.decimal,
        sheet=raw.sheet,
        array=raw.array,
        decisions=_decisions(raw, told),
    )


def _told(raw: RawTable, apart: SetApart, matching: Matching, numbers: Numbers) -> dict[str, Sequence[str]]:
    """Return the notes by what they are about."""
    features = raw.rows if matching.samples_in == "columns" else raw.columns
    return {
        "file": raw.notes,
        "set apart": apart.notes,
        "samples": matching.notes,
        "features": _feature_notes(raw, features),
        "numbers": [*numbers.notes, *_missing_note(raw, numbers.values)],
    }


def _decisions(raw: RawTable, told: Mapping[str, Sequence[str]]) -> tuple[str, ...]:
    """Return the notes, those about one thing in one line, without the name of the file."""
    start = f"{raw.path.name}: "
    return tuple(
        f"{about}: {'; '.join(note.removeprefix(start) for note in notes)}"
        for about, notes in told.items()
        if notes
    )


def _check_ids_present(raw: RawTable) -> None:
    if not raw.columns or not raw.rows:
        raise InputError(
            f"{raw.path}: the table is one column wide, {shown(raw.corner)}; it needs one for each sample "
            "(or feature) beside the ids, parted by tabs, commas or semicolons"
        )
    refuse_broken(raw, "row")
    check_present(raw.path, raw.columns, "column", lambda j: raw.place(HEADER, j))
    check_present(raw.path, raw.rows, "row", lambda i: raw.place(i, -1))


def _part(raw: RawTable, matching: Matching) -> Part:
    rows, columns = range(raw.body.shape[0]), range(raw.body.shape[1])
    if matching.samples_in == "columns":
        return Part(raw, "columns", rows, matching.positions)
    return Part(raw, "rows", matching.positions, columns)


def _feature_place(raw: RawTable, samples_in: str) -> Callable[[int], str]:
    if samples_in == "columns":
        return lambda i: raw.place(i, -1)
    return lambda j: raw.place(HEADER, j)


def _check_features(raw: RawTable, features: Sequence[str], samples_in: str) -> None:
    place = _feature_place(raw, samples_in)
    check_no_dates(raw.path, features, place)
    check_unique(raw.path, features, "feature", place)


def _feature_notes(raw: RawTable, features: Sequence[str]) -> list[str]:
    return [f"{raw.path.name}: {note}" for note in id_notes(features, "feature")]


def _read(part: Part, values: str, decimal: str | None) -> tuple[Numbers, Mapping[str, tuple[str, ...]]]:
    """Return the values, samples x features, and the levels of features of text."""
    if values == "mixed":
        mixed = read_mixed(part, decimal)
        stored = mixed.values if part.samples_in == "rows" else mixed.values.T
        check_range(part, stored, values)
        return Numbers(mixed.values, mixed.marks, mixed.under_limit, mixed.notes), mixed.levels
    numbers = read_numbers(part, decimal, whole=values == "counts")
    notes = (*numbers.notes, *check_range(part, numbers.values, values))
    upright = numbers.values.T if part.samples_in == "columns" else numbers.values
    return replace(numbers, values=np.ascontiguousarray(upright), notes=notes), {}


def _missing_note(raw: RawTable, numbers: np.ndarray) -> list[str]:
    missing = int(np.count_nonzero(np.isnan(numbers)))
    if not missing:
        return []
    share = 100 * missing / numbers.size
    told = f"{share:.1f}" if share >= _ONE_DIGIT else f"{share:.1g}"
    return [f"{raw.path.name}: {counted(missing, 'cell')} of {numbers.size:,} ({told} %) missing"]
