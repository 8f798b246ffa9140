"""Which axis of a table holds the samples, found by the ids alone, and how they match the sample sheet."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from workbench.errors import InputError

from .faults import counted, listed, shown
from .ids import check_unique, near_pairs
from .raw import HEADER, RawTable

_THREE = 3


@dataclass(frozen=True)
class Matching:
    """How the sample axis of a table meets the sample sheet.

    Attributes
    ----------
    samples_in
        ``rows`` or ``columns``.
    matched
        Ids of both, in sheet order.
    positions
        Where the matched ids stand on the table's sample axis.
    only_sheet, only_table
        Ids of one side alone, each in its own order; an id that the table repeats stands there once.
    notes
        What was found, one sentence each.
    """

    samples_in: str
    matched: tuple[str, ...]
    positions: tuple[int, ...]
    only_sheet: tuple[str, ...]
    only_table: tuple[str, ...]
    notes: tuple[str, ...]


def match_samples(raw: RawTable, sample_ids: Sequence[str], samples_in: str | None = None) -> Matching:
    """Return the orientation of a table and its samples matched to the sheet, by exact id.

    The axis with more ids of the sheet holds the samples. ``samples_in`` overrules that, but its axis must
    hold at least one sample.

    Raises
    ------
    InputError
        When no id matches (three ids of each side are shown), both axes match equally, the axis named in
        ``samples_in`` matches nothing, or a matched sample occurs twice.
    """
    sheet = list(map(str, sample_ids))
    known = set(sheet)
    axes = {"columns": raw.columns, "rows": raw.rows}
    hits = {name: len(known.intersection(ids)) for name, ids in axes.items()}
    found = _choose(raw, sheet, hits, samples_in)
    ids = axes[found]
    _check_twice(raw, found, ids, known)
    _check_short_header(raw, found, known)
    where = {name: position for position, name in enumerate(ids)}
    matched = tuple(name for name in sheet if name in where)
    only_sheet = tuple(name for name in sheet if name not in where)
    only_table = tuple(dict.fromkeys(name for name in ids if name not in known))
    notes = [_orientation_note(raw, found, hits, len(sheet), samples_in)]
    notes += _side_notes(raw, only_sheet, only_table, Counter(ids))
    return Matching(
        found, matched, tuple(where[name] for name in matched), only_sheet, only_table, tuple(notes)
    )


def _choose(raw: RawTable, sheet: Sequence[str], hits: dict[str, int], samples_in: str | None) -> str:
    if not any(hits.values()):
        raise _no_match(raw, sheet)
    if samples_in is not None:
        if samples_in not in hits:
            raise InputError(
                f"{raw.path}: samples_in is '{samples_in}'; allowed: 'rows', 'columns', or left out"
            )
        if not hits[samples_in]:
            other = "rows" if samples_in == "columns" else "columns"
            raise InputError(
                f"{raw.path}: samples_in = '{samples_in}', but none of the {samples_in} is a sample of the "
                f"sheet, while {counted(hits[other], f'of the {other} is', f'of the {other} are')}; write "
                f"samples_in = '{other}', or leave it out"
            )
        return samples_in
    if hits["rows"] == hits["columns"]:
        raise InputError(
            f"{raw.path}: the rows and the columns match {counted(hits['rows'], 'sample')} of the sheet "
            "each, so the ids cannot tell which are the samples; say samples_in = 'rows' or samples_in = "
            "'columns'"
        )
    return max(hits, key=lambda name: hits[name])


def _no_match(raw: RawTable, sheet: Sequence[str]) -> InputError:
    near = near_pairs(sheet, raw.columns) + near_pairs(sheet, raw.rows)
    hint = f"; perhaps {_as_pairs(near)}" if near else ""
    return InputError(
        f"{raw.path}: no sample of the sheet is in the table: the sheet has {_some(sheet)}, the table's "
        f"columns are {_some(raw.columns)}, its rows {_some(raw.rows)}{hint}; use the same ids in both"
    )


def _some(ids: Sequence[str]) -> str:
    return listed(ids, _THREE) if ids else "none"


def _as_pairs(pairs: Sequence[tuple[str, str]]) -> str:
    text = ", ".join(f"'{here}' is '{there}' of the table" for here, there in pairs[:_THREE])
    return text if len(pairs) <= _THREE else f"{text} and {len(pairs) - _THREE} more"


def _check_twice(raw: RawTable, samples_in: str, ids: Sequence[str], known: set[str]) -> None:
    matched = [i for i, name in enumerate(ids) if name in known]

    def place(k: int) -> str:
        return raw.place(HEADER, matched[k]) if samples_in == "columns" else raw.place(matched[k], -1)

    check_unique(raw.path, [ids[i] for i in matched], "sample", place)


def _check_short_header(raw: RawTable, samples_in: str, known: set[str]) -> None:
    """Refuse a header one field short whose first name is no sample: it may be the name of the id column."""
    if raw.corner_lacks and samples_in == "columns" and raw.columns[0] not in known:
        raise InputError(
            f"{raw.path}: {raw.place(HEADER, 0)}: the header is one field short, and its first name "
            f"{shown(raw.columns[0])} is no sample of the sheet, so the values may stand one column off; "
            "give every column its name, that of the ids included"
        )


def _orientation_note(raw: RawTable, found: str, hits: dict[str, int], n: int, samples_in: str | None) -> str:
    other = "rows" if found == "columns" else "columns"
    why = "as samples_in says" if samples_in else "found by their ids"
    also = (
        f"; {counted(hits[other], 'of the ' + other + ' is', 'of the ' + other + ' are')} a sample id too"
        if hits[other]
        else ""
    )
    return f"{raw.path.name}: samples are in {found}, {why}: {hits[found]} of the sheet's {n} match{also}"


def _side_notes(
    raw: RawTable, only_sheet: Sequence[str], only_table: Sequence[str], times: Counter[str]
) -> list[str]:
    notes = []
    name = Path(raw.path).name
    if only_sheet:
        notes.append(f"{name}: {counted(len(only_sheet), 'sample')} only in the sheet: {listed(only_sheet)}")
    if only_table:
        again = [f"{n} ({times[n]} times)" if times[n] > 1 else n for n in only_table]
        notes.append(
            f"{name}: {counted(len(only_table), 'name')} only in the table, left out: {listed(again)}"
        )
    near = near_pairs(only_sheet, only_table)
    if near:
        notes.append(f"{name}: ids that differ only in how they are written: {_as_pairs(near)}")
    return notes
