"""Which axis of a table holds the samples, found by the ids alone, and how they match the sample sheet."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

from workbench.errors import InputError

from .faults import counted, listed, shown
from .ids import check_unique
from .names import (
    SAMPLES,
    NameMatch,
    OfferedNamesError,
    Words,
    ambiguous_lines,
    candidates_offered,
    fit_score,
    match_names,
)
from .raw import HEADER, RawTable, cell_text

_THREE = 3
_TOP = 10
_SAY = "say samples_in = 'rows' or samples_in = 'columns' (--samples-in)"


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


def match_samples(
    raw: RawTable,
    sample_ids: Sequence[str],
    samples_in: str | None = None,
    names: Mapping[str, str] | None = None,
    words: Words = SAMPLES,
) -> Matching:
    """Return the orientation of a table and its samples matched to the sheet, by exact id.

    The axis that fits the sheet better by its ids holds the samples, where it has at least half of them, or at
    least half of its names are such ids. Else names that only resemble those of the sheet count as well, half
    as much, and the axis that fits the sheet better as a whole holds the samples (see `fit_score`): a few of
    many features may look like samples. ``samples_in`` overrules that, but its axis must hold at least one
    sample.

    Parameters
    ----------
    raw
        The table.
    sample_ids
        Ids of the sheet, in its order.
    samples_in
        ``rows`` or ``columns``.
    names
        Accepted names: delivered name to id of the sheet.
    words
        What the ids are called in messages.

    Raises
    ------
    InputError
        When no id matches (three ids of each side are shown), both axes match equally, or the one by its ids
        and the other one to one by what resembles them, the axis named in ``samples_in`` matches nothing, a
        matched sample occurs twice, or an accepted name is not there;
        `OfferedNamesError` when names are nearly those of the sheet and no names are accepted.
    """
    sheet = list(map(str, sample_ids))
    known = set(sheet)
    axes = _axes(raw, names)
    hits = {name: len(known.intersection(ids)) for name, ids in axes.items()}
    found = _choose(raw, sheet, axes, samples_in, words)
    ids = axes[found]
    _check_accepted(raw, found, names or {}, ids, words)
    _check_twice(raw, found, ids, known)
    _check_short_header(raw, found, known, words)
    match = match_names(ids, sheet)
    if names is None and match.candidates:
        raise OfferedNamesError(candidates_offered(raw.path, match, words), match)
    where = {name: position for position, name in enumerate(ids)}
    matched = tuple(name for name in sheet if name in where)
    only_sheet = tuple(name for name in sheet if name not in where)
    only_table = tuple(dict.fromkeys(name for name in ids if name not in known))
    notes = [_orientation_note(raw, found, hits, len(sheet), samples_in, words)]
    notes += _side_notes(raw, only_sheet, only_table, Counter(ids), words)
    notes += _near_notes(raw, match, len(names or {}), words)
    return Matching(
        found, matched, tuple(where[name] for name in matched), only_sheet, only_table, tuple(notes)
    )


def near_names(raw: RawTable, sample_ids: Sequence[str]) -> dict[str, str]:
    """Return the candidates of the line that looks most like the samples', where no line names one exactly.

    Looked at are the header, the id column and the first ten rows: the header may stand under titles. None are
    returned when less than a quarter of that line resembles the sheet.
    """
    known = set(map(str, sample_ids))
    top = [list(map(cell_text, raw.body.row(i))) for i in range(min(_TOP, raw.body.shape[0]))]
    lines = [raw.columns, raw.rows, *top]
    if any(known.intersection(line) for line in lines):
        return {}
    matches = [(line, match_names(line, sample_ids).candidates) for line in lines]
    fits = [fit_score(0, len(found), line, sample_ids) for line, found in matches]
    best = max(range(len(lines)), key=lambda k: fits[k])
    return {delivered: sample for delivered, sample, _ in matches[best][1]} if fits[best] else {}


Axes = Mapping[str, Sequence[str]]


def _axes(raw: RawTable, names: Mapping[str, str] | None) -> Axes:
    axes = {"columns": raw.columns, "rows": raw.rows}
    if not names:
        return axes
    return {axis: tuple(names.get(name, name) for name in ids) for axis, ids in axes.items()}


def _choose(raw: RawTable, sheet: Sequence[str], axes: Axes, samples_in: str | None, words: Words) -> str:
    exact = {name: len(set(sheet).intersection(ids)) for name, ids in axes.items()}
    if samples_in is not None and samples_in not in axes:
        raise InputError(f"{raw.path}: samples_in is '{samples_in}'; allowed: 'rows', 'columns', or left out")
    if samples_in is not None:
        if not exact[samples_in]:
            _check_resembling(raw, samples_in, exact, axes, sheet, words)
        return samples_in
    scores = {name: fit_score(count, 0, axes[name], sheet) for name, count in exact.items()}
    if not any(_holds_most(count, axes[name], sheet) for name, count in exact.items()):
        scores = _scores_with_candidates(raw, sheet, axes, words)
    elif exact["rows"] == exact["columns"]:
        scores = dict.fromkeys(axes, 0.0)
    if scores["rows"] == scores["columns"]:
        raise InputError(
            f"{raw.path}: the rows and the columns match {counted(exact['rows'], words.one)} of {words.sheet} "
            f"each, so the ids cannot tell which are the {words.one}s; {_SAY}"
        )
    found = max(scores, key=lambda name: scores[name])
    _check_other(raw, found, axes, sheet, words)
    return found


def _holds_most(exact: int, ids: Sequence[str], sheet: Sequence[str]) -> bool:
    """Whether an axis is beyond doubt the samples': half of the sheet, or half of its own names, are on it."""
    return exact > 0 and (2 * exact >= len(sheet) or 2 * exact >= len(set(ids)))


def _scores_with_candidates(
    raw: RawTable, sheet: Sequence[str], axes: Axes, words: Words
) -> dict[str, float]:
    """Return how well each axis fits the sheet, candidates among its names; refuse a table of none."""
    matches = {name: match_names(ids, sheet) for name, ids in axes.items()}
    scores = {
        name: fit_score(len(match.exact), len(match.candidates), axes[name], sheet)
        for name, match in matches.items()
    }
    if any(scores.values()):
        return scores
    hints = [line.strip() for match in matches.values() for line in ambiguous_lines(match)]
    for name, match in matches.items():
        if match.candidates:
            delivered, sample, _ = match.candidates[0]
            hints.append(
                f"{len(match.candidates):,} of the {len(set(axes[name])):,} {name} resemble a {words.one}, as "
                f"{shown(delivered)} does {shown(sample)}: if the {name} are the {words.one}s, say samples_in = "
                f"'{name}'"
            )
    hint = f"; {hints[0]}" if hints else ""
    raise InputError(
        f"{raw.path}: no {words.one} of {words.sheet} is in the table: {words.sheet} has {_some(sheet)}, "
        f"the table's columns are {_some(raw.columns)}, its rows {_some(raw.rows)}{hint}; use the same "
        "ids in both"
    )


def _check_other(raw: RawTable, found: str, axes: Axes, sheet: Sequence[str], words: Words) -> None:
    """Refuse to take a few of an axis's many names for the samples where the other axis fits them one to one."""
    ids = axes[found]
    other = "rows" if found == "columns" else "columns"
    if 2 * len(set(sheet).intersection(ids)) >= len(set(ids)) or len(axes[other]) >= len(ids):
        return
    match = match_names(axes[other], sheet)
    alike = len(match.exact) + len(match.candidates)
    if 2 * alike >= len(sheet) and 2 * alike >= len(axes[other]) and match.candidates:
        delivered, sample, _ = match.candidates[0]
        raise InputError(
            f"{raw.path}: {counted(alike, 'of the ' + other + ' resembles', 'of the ' + other + ' resemble')} a "
            f"{words.one} one to one ({shown(delivered)}: {shown(sample)}), while some of the {len(ids):,} {found} "
            f"have the very ids; {_SAY}"
        )


def _check_resembling(
    raw: RawTable, samples_in: str, exact: Mapping[str, int], axes: Axes, sheet: Sequence[str], words: Words
) -> None:
    """Refuse the axis that the settings name when none of its names is, or resembles, one of the sheet."""
    if match_names(axes[samples_in], sheet).candidates:
        return
    other = "rows" if samples_in == "columns" else "columns"
    start = f"{raw.path}: samples_in = '{samples_in}', but none of the {samples_in} is a {words.one} of {words.sheet}"
    if exact[other]:
        found = counted(exact[other], f"of the {other} is", f"of the {other} are")
        raise InputError(f"{start}, while {found}; write samples_in = '{other}', or leave it out")
    raise InputError(
        f"{start}: {words.sheet} has {_some(sheet)}, the table's {samples_in} are {_some(axes[samples_in])}; use the "
        "same ids in both"
    )


def _some(ids: Sequence[str]) -> str:
    return listed(ids, _THREE) if ids else "none"


def _check_accepted(
    raw: RawTable, samples_in: str, names: Mapping[str, str], ids: Sequence[str], words: Words
) -> None:
    """Refuse accepted names that the table does not have, and such that give a sample a second time."""
    delivered = raw.columns if samples_in == "columns" else raw.rows
    unknown = [name for name in set(names) - set(delivered) if names[name] not in set(ids)]
    if unknown:
        raise InputError(
            f"{raw.path}: the table of names speaks of {counted(len(unknown), 'name')} that the table does not "
            f"have in its {samples_in}: {listed(sorted(unknown))}; take these rows out of it, or mend them"
        )
    times = Counter(ids)
    own = [f"{name} (from {given})" for given, name in names.items() if times[name] > 1 and given != name]
    if own:
        raise InputError(
            f"{raw.path}: {counted(len(own), words.one)} would stand there twice, under the own name and by "
            f"the table of names: {listed(own)}; take one of them out"
        )


def _check_twice(raw: RawTable, samples_in: str, ids: Sequence[str], known: set[str]) -> None:
    matched = [i for i, name in enumerate(ids) if name in known]

    def place(k: int) -> str:
        return raw.place(HEADER, matched[k]) if samples_in == "columns" else raw.place(matched[k], -1)

    check_unique(raw.path, [ids[i] for i in matched], "sample", place)


def _check_short_header(raw: RawTable, samples_in: str, known: set[str], words: Words) -> None:
    """Refuse a header one field short whose first name is no sample: it may be the name of the id column."""
    if raw.corner_lacks and samples_in == "columns" and raw.columns[0] not in known:
        raise InputError(
            f"{raw.path}: {raw.place(HEADER, 0)}: the header is one field short, and its first name "
            f"{shown(raw.columns[0])} is no {words.one} of {words.sheet}, so the values may stand one column off; "
            "give every column its name, that of the ids included"
        )


def _orientation_note(
    raw: RawTable, found: str, hits: Mapping[str, int], n: int, samples_in: str | None, words: Words
) -> str:
    other = "rows" if found == "columns" else "columns"
    why = "as samples_in says" if samples_in else "found by their ids"
    also = (
        f"; {counted(hits[other], 'of the ' + other + ' is', 'of the ' + other + ' are')} a {words.one} id too"
        if hits[other]
        else ""
    )
    return (
        f"{raw.path.name}: {words.one}s are in {found}, {why}: {hits[found]} of {words.owner} {n} match{also}"
    )


def _side_notes(
    raw: RawTable,
    only_sheet: Sequence[str],
    only_table: Sequence[str],
    times: Mapping[str, int],
    words: Words,
) -> list[str]:
    notes = []
    name = Path(raw.path).name
    if only_sheet:
        found = counted(len(only_sheet), words.one)
        notes.append(f"{name}: {found} only in {words.sheet}: {listed(only_sheet)}")
    if only_table:
        again = [f"{n} ({times[n]} times)" if times[n] > 1 else n for n in only_table]
        notes.append(
            f"{name}: {counted(len(only_table), 'name')} only in the table, left out: {listed(again)}"
        )
    return notes


def _near_notes(raw: RawTable, match: NameMatch, accepted: int, words: Words) -> list[str]:
    notes = []
    if accepted:
        notes.append(f"{raw.path.name}: {counted(accepted, words.one)} found by the table of names")
    if match.candidates:
        pairs = [f"{here} for {there}" for here, there, _ in match.candidates]
        notes.append(
            f"{raw.path.name}: left out, since the table of names does not name them: {listed(pairs, _THREE)}"
        )
    return [*notes, *(f"{raw.path.name}: {line.strip()}" for line in ambiguous_lines(match))]
