"""What stands between the ids and the numbers of a table: annotations of features, attributes of samples."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field

import pandas as pd

from .faults import counted, listed
from .ids import check_unique
from .names import fit_score, match_names
from .raw import HEADER, ArrayBody, Cell, RawTable, TextBody, WrongCell, cell_text, split_line
from .tokens import MISSING, hint_for, is_comma_number, number_of
from .units import unit_of

# Names of numbers that tables give about features.
_ABOUT_FEATURES = re.compile(
    r"(m[/_ ]?z|rt|retention[ _]?time|(exact |mono\w* |molecular )?mass|length|start|end|pos(ition)?|charge|score|"
    r"entrez(_?id)?|\w*_id)([ _(\[].*)?",
    re.IGNORECASE,
)
LINES_LOOKED_AT = 10
_LEAST_HITS = 2
_ROLE = re.compile(
    r"(pool|pooled|qc|blank|blk|std|standard|ref|reference|nist|solvent|mix|empty|water)(?![a-z])",
    re.IGNORECASE,
)


@dataclass(frozen=True)
class SetApart:
    """A table without what is neither an id nor a measured value.

    Attributes
    ----------
    raw
        Ids and measured values; places are still those of the file.
    annotations
        DataFrame of text indexed by feature, a column for each annotation that stood in the table.
    attributes
        Names of lines about the samples, which are left out.
    notes
        What was set apart, one sentence each.
    """

    raw: RawTable
    annotations: pd.DataFrame
    attributes: tuple[str, ...] = ()
    notes: tuple[str, ...] = field(default=())


def set_apart(
    raw: RawTable,
    sample_ids: Sequence[str],
    samples_in: str | None = None,
    names: Mapping[str, str] | None = None,
    *,
    mixed: bool = False,
) -> SetApart:
    """Return a table without leading annotations and extra header lines.

    The rules, with "line" for a row or a column of the table, on either side:

    1. When the header names no sample, but one of the ten rows under it names two or more and at least half of
       its cells, that row is the header; rows above it are attributes of the samples.
    2. Lines that cross the samples, stand directly before the features and hold text in place of numbers (a
       group, a unit: no number, no missing token alone, no ``<LOD``) are attributes of the samples. Not in
       ``mixed`` tables, whose features may be text.
    3. Lines before the first sample that are no sample's are annotations of the features. They end at a line
       of numbers whose name is like the samples' (``X9`` beside ``S1``) or a pool's or blank's: that one is a
       sample which the sheet lacks. A row of numbers among samples in rows must have a name such as ``mz`` or
       ``length`` to be an annotation.

    Attributes of samples are left out and told, since the sample sheet is their place; annotations are kept.

    Parameters
    ----------
    sample_ids, samples_in, names
        As in `match_samples`.
    mixed
        Whether features may be text.
    """
    if isinstance(raw.body, ArrayBody) or not raw.columns or not raw.rows:
        return _nothing(raw)
    known = {*map(str, sample_ids), *(names or {})}
    raw, above = _with_header(raw, known)
    axis = _Axis.of(raw, sample_ids, known, samples_in)
    if axis is None:
        return _as_told(raw, above, {}, [])
    crossing = 0 if mixed else axis.leading_text()
    before = axis.leading_annotations(crossing)
    attributes = [*above, *axis.crossing_names(crossing)]
    annotations = {axis.annotation_name(k): axis.annotation(k, crossing) for k in range(before)}
    check_unique(raw.path, [axis.annotation_name(k) for k in range(before)], "annotation", axis.place)
    return _as_told(axis.core(before, crossing), attributes, annotations, axis.feature_ids(crossing))


def _nothing(raw: RawTable) -> SetApart:
    return SetApart(raw, pd.DataFrame())


def _as_told(
    raw: RawTable, attributes: Sequence[str], annotations: dict[str, list[str]], features: Sequence[str]
) -> SetApart:
    name, notes = raw.path.name, []
    if attributes:
        notes.append(
            f"{name}: {counted(len(attributes), 'line')} of text about the samples left out: "
            f"{listed(attributes)}; such things belong into the sample sheet"
        )
    if annotations:
        notes.append(f"{name}: kept as annotations of the features: {listed(list(annotations))}")
    units = [unit_of(feature) for feature in features]
    if "unit" not in annotations and 2 * sum(map(bool, units)) > len(units):
        annotations = {**annotations, "unit": units}
        notes.append(
            f"{name}: units found in {counted(sum(map(bool, units)), 'feature name')} and kept as annotation "
            "'unit'; the names stay as they are"
        )
    frame = pd.DataFrame(annotations, index=pd.Index(list(features), dtype="object"), dtype=object)
    return SetApart(raw, frame, tuple(attributes), tuple(notes))


def _with_header(raw: RawTable, known: set[str]) -> tuple[RawTable, list[str]]:
    """Return the table with the row that names the samples as its header, and the names of rows above it."""
    if known.intersection(raw.columns) or known.intersection(raw.rows) or raw.corner_lacks:
        return raw, []
    for i in range(min(LINES_LOOKED_AT, len(raw.rows) - 1)):
        cells = [cell_text(cell) for cell in raw.body.row(i)]
        hits = {cell for cell in cells if cell in known and number_of(cell) is None}
        if len(hits) >= _LEAST_HITS and 2 * len(hits) >= sum(map(bool, cells)):
            above = [raw.corner or _line(raw.place(HEADER, -1)), *(_row_name(raw, k) for k in range(i))]
            return raw.core(header=i, rows=i + 1), above
    return raw, []


def _line(place: str) -> str:
    return place.partition(",")[0]


def _row_name(raw: RawTable, i: int) -> str:
    return raw.rows[i].strip() or _line(raw.place(i, -1))


def _is_text(cell: Cell) -> bool:
    """Whether a cell holds words: no number in any writing, nothing missing, no value under a limit."""
    if isinstance(cell, WrongCell):
        return cell.kind == "date"
    text = cell.strip() if isinstance(cell, str) else ""
    return bool(text) and text not in MISSING and number_of(text) is None and not hint_for(text)


def _is_number(cell: Cell) -> bool:
    if isinstance(cell, str):
        text = cell.strip()
        return number_of(text) is not None or is_comma_number(text)
    return isinstance(cell, int | float)


def _all_text(cells: Sequence[Cell]) -> bool:
    held = [
        cell for cell in cells if not (cell is None or (isinstance(cell, str) and cell.strip() in MISSING))
    ]
    return bool(held) and all(map(_is_text, held))


def _shape(name: str) -> str:
    """Return the form of a name: letters and digits in runs, all else as it is (``S12`` is ``A9``)."""
    return re.sub(r"[^\W\d_]+", "A", re.sub(r"\d+", "9", name))


def _candidates(ids: Sequence[str], sample_ids: Sequence[str]) -> set[str]:
    """Return the names that may be a sample's, though they are written otherwise."""
    match = match_names(ids, sample_ids)
    alike = {delivered for delivered, _, _ in match.candidates}
    return alike.union(*(names for _, names in match.ambiguous))


@dataclass(frozen=True)
class _Axis:
    """The axis of a table that holds the samples, and what crosses it."""

    raw: RawTable
    samples_in: str
    positions: tuple[int, ...]

    @classmethod
    def of(
        cls, raw: RawTable, sample_ids: Sequence[str], known: set[str], samples_in: str | None
    ) -> _Axis | None:
        """Return the axis that fits the sheet, candidates counting where no id of it is there; None: unclear."""
        axes = {"columns": raw.columns, "rows": raw.rows}
        found = {axis: known.intersection(ids) for axis, ids in axes.items()}
        if not any(found.values()):
            found = {axis: _candidates(ids, sample_ids) for axis, ids in axes.items()}
        if samples_in not in axes:
            if len(found["columns"]) == len(found["rows"]):
                return None
            fits = {axis: fit_score(len(names), 0, axes[axis], sample_ids) for axis, names in found.items()}
            samples_in = max(fits, key=lambda axis: fits[axis])
        ids = axes[samples_in]
        taken = found[samples_in] | _candidates(ids, sample_ids)
        positions = tuple(i for i, name in enumerate(ids) if name in taken)
        return cls(raw, samples_in, positions) if found[samples_in] else None

    @property
    def ids(self) -> tuple[str, ...]:
        return self.raw.columns if self.samples_in == "columns" else self.raw.rows

    @property
    def other(self) -> tuple[str, ...]:
        return self.raw.rows if self.samples_in == "columns" else self.raw.columns

    def feature_ids(self, crossing: int) -> tuple[str, ...]:
        return self.other[crossing:]

    def leading_text(self) -> int:
        """Return how many lines that cross the samples stand first and hold text alone."""
        most = min(LINES_LOOKED_AT, len(self.other) - 1)
        if self.samples_in == "columns":
            return self._counted(most, lambda k: [self.raw.body.row(k)[j] for j in self.positions])
        starts = [_leading(self.raw, i, most) for i in self.positions]
        return self._counted(most, lambda k: [start[k] for start in starts])

    def _counted(self, most: int, cells: Callable[[int], Sequence[Cell]]) -> int:
        return next((k for k in range(most) if not _all_text(cells(k))), most)

    def leading_annotations(self, crossing: int) -> int:
        """Return how many lines before the first sample are annotations of the features."""
        if self.raw.corner_lacks:
            return 0
        shapes = {_shape(self.ids[i]) for i in self.positions}
        first = self.positions[0]
        for k in range(first):
            like_a_sample = _shape(self.ids[k]) in shapes or _ROLE.match(self.ids[k])
            if self.samples_in == "rows" and not _ABOUT_FEATURES.fullmatch(self.ids[k].strip()):
                like_a_sample = True
            if like_a_sample and any(map(_is_number, self._cells(k, crossing))):
                return k
        return first

    def _cells(self, k: int, crossing: int) -> list[Cell]:
        if self.samples_in == "rows":
            return list(self.raw.body.row(k))[crossing:]
        return [_leading(self.raw, i, k + 1)[k] for i in range(crossing, len(self.raw.rows))]

    def annotation(self, k: int, crossing: int) -> list[str]:
        return [cell_text(cell).strip() for cell in self._cells(k, crossing)]

    def annotation_name(self, k: int) -> str:
        return self.ids[k].strip() or (
            f"column {k + 2}" if self.samples_in == "columns" else _row_name(self.raw, k)
        )

    def crossing_names(self, crossing: int) -> list[str]:
        if self.samples_in == "columns":
            return [_row_name(self.raw, k) for k in range(crossing)]
        return [self.other[k].strip() or f"column {k + 2}" for k in range(crossing)]

    def place(self, k: int) -> str:
        return self.raw.place(HEADER, k) if self.samples_in == "columns" else self.raw.place(k, -1)

    def core(self, before: int, crossing: int) -> RawTable:
        if not before and not crossing:
            return self.raw
        if self.samples_in == "columns":
            return self.raw.core(rows=crossing, columns=before)
        return self.raw.core(rows=before, columns=crossing)


def _leading(raw: RawTable, i: int, k: int) -> Sequence[Cell]:
    """Return the first ``k`` cells of a row without taking the whole line apart."""
    body = raw.body
    if not isinstance(body, TextBody):
        return body.row(i)[:k]
    line = body.lines[i]
    fields = split_line(line, body.separator) if '"' in line else line.split(body.separator, body.before + k)
    return fields[body.before : body.before + k]
