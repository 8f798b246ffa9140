"""Names that nearly match: exact first, then candidates by a stated rule, one to one, used only when accepted."""

from __future__ import annotations

from collections import Counter, defaultdict
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from pathlib import Path

import pandas as pd

from workbench.errors import InputError

from .affixes import affix_pairs
from .faults import LISTED_FAULTS, counted, listed, shown
from .name_forms import Form, WrittenName, differences

LISTED_CANDIDATES = 40
LEAST_SHARE = 0.25
_UNWRITABLE = "\t\r\n\v\f\x1c\x1d\x1e\x85\u2028\u2029\0"

Candidate = tuple[str, str, str]


@dataclass(frozen=True)
class Words:
    """What the ids of a table stand for, in messages."""

    one: str = "sample"
    sheet: str = "the sheet"
    owner: str = "the sheet's"


SAMPLES = Words()
RUNS = Words("run", "the run sheet", "the run sheet's")


@dataclass(frozen=True)
class NameMatch:
    """How the names of a table meet those of the sample sheet (or run sheet).

    Attributes
    ----------
    exact
        Names that both sides write alike, in sheet order.
    candidates
        ``(delivered, sample, rule)``, in sheet order: alike, but for what ``rule`` tells. Each name of either
        side is in one candidate at most.
    only_table, only_sheet
        Names of one side that are neither exact nor in a candidate, in their own order.
    ambiguous
        For a name of the sheet the delivered names that are alike, where it is not one to one: no candidates.
    """

    exact: tuple[str, ...]
    candidates: tuple[Candidate, ...]
    only_table: tuple[str, ...]
    only_sheet: tuple[str, ...]
    ambiguous: tuple[tuple[str, tuple[str, ...]], ...] = ()


def match_names(table_ids: Iterable[str], sample_ids: Iterable[str]) -> NameMatch:
    """Return which names of a table are those of the sheet, and which may be.

    Names that are equal are the same. Of the others, two are candidates when they are equal

    1. without case, blanks and punctuation (``+``, ``*``, ``'`` and a minus at the end are no punctuation);
    2. also without zeros before numbers, those behind a decimal point apart;
    3. also without a prefix or suffix on one side that at least three candidates share (a running number in a
       suffix is looked through), without a beginning that is the other's in short (``Pat``, ``Patient``), or
       without the ``X`` that R puts before a digit;

    and no third name of either side is equal in the same way, those that match exactly among them.

    Examples
    --------
    >>> match_names(["S1", "s_02", "pool"], ["S1", "S2", "S3"]).candidates
    (('s_02', 'S2', 'case, spaces or punctuation, zeros before numbers'),)
    >>> match_names(["1_pos", "2_pos", "3_pos"], ["D1", "D2", "D3"]).candidates[0]
    ('1_pos', 'D1', "prefix 'D' of the sheet, suffix '_pos'")
    >>> match_names(["s1", "S-1"], ["S1"]).candidates
    ()
    """
    times = Counter(map(str, table_ids))
    sheet = list(dict.fromkeys(map(str, sample_ids)))
    exact = tuple(name for name in sheet if name in times)
    offered: dict[str, tuple[str, str]] = {}
    several: dict[str, set[str]] = defaultdict(set)
    if len(exact) < len(sheet):
        usable = [name for name, count in times.items() if count == 1 and _is_writable(name)]
        offered, several = _alike(usable, sheet, set(exact))
    candidates = tuple((offered[name][0], name, offered[name][1]) for name in sheet if name in offered)
    known = {*exact, *(delivered for delivered, _, _ in candidates)}
    return NameMatch(
        exact,
        candidates,
        tuple(name for name in times if name not in known),
        tuple(name for name in sheet if name not in times and name not in offered),
        tuple(
            (name, tuple(sorted(several[name]))) for name in sheet if name in several and name not in offered
        ),
    )


def fit_score(exact: int, candidates: int, ids: Sequence[str], sheet: Sequence[str]) -> float:
    """Return how well a line of names fits the sheet: 1 when the two are the same, 0 when they share nothing.

    Twice the number of names in common over the number of both, where a name that only resembles one of the
    sheet counts half; 0 when less than a quarter of the line's names have anything to do with the sheet.

    >>> fit_score(3, 0, ["S1", "S2", "S3"], ["S1", "S2", "S3"]), fit_score(0, 3, ["g"] * 3, ["S1", "S2", "S3"])
    (1.0, 0.75)
    """
    different = len(set(ids))
    if not exact and LEAST_SHARE * different > candidates:
        return 0.0
    return (2 * exact + candidates) / (len(sheet) + different) if different else 0.0


def _is_writable(name: str) -> bool:
    """Whether a name can stand in a table of names as it is."""
    return not name.startswith('"') and not any(mark in name for mark in _UNWRITABLE)


def _alike(
    table: Sequence[str], sheet: Sequence[str], exact: set[str]
) -> tuple[dict[str, tuple[str, str]], dict[str, set[str]]]:
    """Return for names of the sheet the delivered name and the rule, and those that several are alike."""
    left, right = [WrittenName(name) for name in table], [WrittenName(name) for name in sheet]
    offered: dict[str, tuple[str, str]] = {}
    several: dict[str, set[str]] = defaultdict(set)
    used = set(exact)
    for level in ("one_case", "unpadded"):
        here, there = _by_form(left, level), _by_form(right, level)
        for form, names in there.items():
            others = here.get(form, [])
            open_names = [name for name in names if name not in exact and name not in offered]
            if len(names) == len(others) == 1 and open_names and others[0] not in used:
                offered[names[0]] = (others[0], ", ".join(differences(others[0], names[0])))
                used.add(others[0])
            elif len(names) > 1 or len(others) > 1:
                for name in open_names:
                    several[name].update(others)
    found, unclear = affix_pairs(
        [name for name in left if name.name not in used],
        [
            name
            for name in right
            if name.name not in exact and name.name not in offered and name.name not in several
        ],
        least=min(3, len(sheet)),
    )
    for name, fitting in unclear.items():
        several[name].update(fitting)
    return offered | found, {name: fitting for name, fitting in several.items() if fitting}


def _by_form(names: Iterable[WrittenName], level: str) -> dict[Form, list[str]]:
    forms: dict[Form, list[str]] = defaultdict(list)
    for name in names:
        form = getattr(name, level)
        if form:
            forms[form].append(name.name)
    return forms


def names_table(match: NameMatch) -> pd.DataFrame:
    """Return the accepted candidates as a table of names: columns ``delivered`` and ``sample``, text."""
    pairs = list(dict.fromkeys((delivered, sample) for delivered, sample, _ in match.candidates))
    return pd.DataFrame(pairs, columns=["delivered", "sample"], dtype=object)


def candidate_lines(match: NameMatch, words: Words = SAMPLES) -> list[str]:
    """Return the candidates as a table of text: up to 40 of them, and what is not one to one."""
    rows = [("in the table", f"in {words.sheet}", "differs in")]
    rows += [(shown(d), shown(s), rule) for d, s, rule in match.candidates[:LISTED_CANDIDATES]]
    widths = [max(len(row[k]) for row in rows) for k in range(2)]
    lines = [f"  {row[0]:<{widths[0]}}  {row[1]:<{widths[1]}}  {row[2]}" for row in rows]
    rest = len(match.candidates) - LISTED_CANDIDATES
    return [*lines, *([f"  and {rest:,} more"] if rest > 0 else []), *ambiguous_lines(match)]


def ambiguous_lines(match: NameMatch) -> list[str]:
    """Return a line on the names that are like several of the other side; none when there are none."""
    if not match.ambiguous:
        return []
    parts = [f"{shown(name)} is like {listed(others, 3)}" for name, others in match.ambiguous[:LISTED_FAULTS]]
    rest = len(match.ambiguous) - len(parts)
    return [f"  not one to one, so not offered: {'; '.join(parts)}{f'; and {rest:,} more' if rest else ''}"]


class OfferedNamesError(InputError):
    """Names are nearly those of the sheet, and nobody has accepted them; ``match`` holds the candidates."""

    def __init__(self, message: str, match: NameMatch) -> None:
        self.match = match
        super().__init__(message)


def candidates_offered(path: Path, match: NameMatch, words: Words = SAMPLES) -> str:
    """Return the message that offers the candidates."""
    total = len(match.exact) + len(match.candidates) + len(match.only_sheet)
    found = counted(len(match.candidates), words.one)
    summary = (
        f"{path}: {found} of {words.owner} {total:,} may be in the table under another name "
        f"({len(match.exact):,} stand there under their own):"
    )
    way_out = (
        "if they are the same, say --accept-names to add-block (and --replace when the block is there already): "
        "they are written to a table of names in source/, where a wrong row can be taken out; or write the same "
        "names in both"
    )
    return "\n".join([summary, *candidate_lines(match, words), way_out])
