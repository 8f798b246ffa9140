"""Levels that hardly any sample has, in texts of a block and in columns of the design: misspelt, unknown, or rare."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping, Sequence

import numpy as np
import pandas as pd

from workbench.checks.data import CheckedBlock, StudyData
from workbench.checks.finding import Finding, accept_line, finding_id
from workbench.intake.faults import counted, shown
from workbench.intake.kinds import column_kind, present
from workbench.settings.layers import edits

CHECK = "rare_levels"
FEWEST, RARE_SHARE, MISSPELT_SHARE = 2, 0.02, 0.05
SHORTEST_WORD, LONG_WORD = 5, 9
NAMED_LEVELS = 6
UNKNOWN = ("unknown", "missing", "unclear", "undetermined", "unavailable", "undefined")

Counts = Mapping[str, int]


def rare_levels(data: StudyData) -> list[Finding]:
    """Find levels of texts that hardly any sample has.

    A warning for a level of at most two samples (5 % in large studies) that is written nearly like a more frequent
    one, or like a word for "unknown": most likely a slip, which makes a class, and edges, of its own. A note for
    the other levels of two samples at most (2 %), which rest on these samples alone. Looked at are the texts of
    ``mixed`` blocks, and for slips the columns of the sample sheet that play a part in the design.
    """
    found = []
    for block in data.blocks.values():
        found += _findings(block.name, "feature", dict(_of_block(block)), len(block.samples))
    of_sheet = _findings("", "column", dict(_of_sheet(data)), len(data.kept_sheet))
    return found + [one for one in of_sheet if one.severity == "warning"]


def _of_block(block: CheckedBlock) -> Iterator[tuple[str, Counts]]:
    for place, levels in enumerate(block.levels):
        if levels is not None:
            cells = block.measured[:, place]
            counts = np.bincount(cells[~np.isnan(cells)].astype(np.intp), minlength=len(levels))
            yield block.features[place], dict(zip(levels, counts.tolist(), strict=True))


def _of_sheet(data: StudyData) -> Iterator[tuple[str, Counts]]:
    sheet, samples = data.kept_sheet, data.settings.samples
    used = [
        *samples.group,
        *samples.adjust,
        *(one for block in data.blocks.values() for one in block.settings.adjust),
    ]
    for column in dict.fromkeys(used):
        if (
            column in sheet
            and samples.kinds.get(column) != "number"
            and column_kind(sheet[column]) == "classes"
        ):
            yield column, _sizes(sheet[column])


def _sizes(cells: pd.Series) -> Counts:
    return {str(level): int(size) for level, size in present(cells).value_counts().items()}


def _findings(block: str, noun: str, texts: Mapping[str, Counts], n: int) -> list[Finding]:
    found, rare = [], {}
    for name, counts in texts.items():
        held = {level: size for level, size in counts.items() if size}
        slips = {level: word for level in held if (word := _meant(level, held, n)) is not None}
        found += [_slip(block, noun, name, level, held[level], word) for level, word in slips.items()]
        few = [level for level, size in held.items() if size <= _most(n, RARE_SHARE) and level not in slips]
        if few and len(few) < len(held):
            rare[name] = [f"{shown(level)} {held[level]}" for level in few]
    return [*found, *([_rare(block, noun, rare)] if rare else [])]


def _most(n: int, share: float) -> int:
    return max(FEWEST, int(share * n))


def _meant(level: str, held: Counts, n: int) -> str | None:
    """Return what a rare level most likely is: another level misspelt, or "" for a word that means unknown."""
    if held[level] > _most(n, MISSPELT_SHARE):
        return None
    frequent = [other for other, size in held.items() if size > held[level]]
    near = next((other for other in frequent if alike(level, other)), None)
    if near is None and any(level.casefold() == word or alike(level, word) for word in UNKNOWN):
        return ""
    return near


def alike(word: str, other: str) -> bool:
    """Return whether two levels are most likely one, misspelt: but for case, blanks and punctuation, or for a slip.

    A slip is one letter left out, added, exchanged or changed over with its neighbour, in a word of five letters or
    more (two in one of nine); not at the beginning alone (``treated``, ``untreated``). Digits and short words, such
    as those of stages and grades, have to be the same.

    Examples
    --------
    >>> alike("drougth", "drought"), alike("Well watered", "well-watered"), alike("stage II", "stage III")
    (True, True, False)
    >>> alike("treated", "untreated"), alike("grade 1", "grade 2")
    (False, False)
    """
    ours, theirs = _words(word), _words(other)
    if ours == theirs:
        return word != other
    if len(ours) != len(theirs):
        return "".join(ours) == "".join(theirs)
    different = [(one, two) for one, two in zip(ours, theirs, strict=True) if one != two]
    return all(_slipped(one, two) for one, two in different)


def _words(text: str) -> list[str]:
    return re.findall(r"\d+|[^\W\d_]+|[+]|-$", text.casefold())


def _slipped(one: str, two: str) -> bool:
    shorter = min(len(one), len(two))
    if (
        not (one.isalpha() and two.isalpha())
        or shorter < SHORTEST_WORD
        or one.endswith(two)
        or two.endswith(one)
    ):
        return False
    return edits(one, two) <= (1 if shorter < LONG_WORD else 2)


def _slip(block: str, noun: str, name: str, level: str, size: int, meant: str) -> Finding:
    where = f"{noun} '{name}'" + (f" of block '{block}'" if block else " of the sample sheet")
    what = f"level {shown(level)} of {where} ({counted(size, 'sample')}) "
    identity = finding_id(CHECK, block, name, level)
    source = f"the delivered table, and import it with `workbench add-block {block} FILE --replace`"
    place = source if block else "samples.tsv"
    if meant:
        what += f"is written nearly like {shown(meant)}: most likely that level misspelt, and now a class of its own"
        todo = f"write {shown(meant)} in {place}"
    else:
        what += "seems to mean that nobody knows: as it stands it is a class of its own"
        todo = f"leave such cells empty (missing) in {place}"
    return Finding(
        identity,
        CHECK,
        "warning",
        block,
        what,
        (),
        (name,),
        f"{todo}; or keep it with {accept_line(identity)}",
    )


def _rare(block: str, noun: str, rare: Mapping[str, Sequence[str]]) -> Finding:
    told = "; ".join(
        f"{name}: {', '.join(levels[:NAMED_LEVELS])}" for name, levels in list(rare.items())[:NAMED_LEVELS]
    )
    rest = len(rare) - NAMED_LEVELS
    more = f"; and {rest} more" if rest > 0 else ""
    where = f"block '{block}'" if block else "the design"
    what = (
        f"{counted(len(rare), noun)} of {where} with levels that hardly any sample has ({told}{more}): what is found "
        "of such a level rests on these samples alone"
    )
    todo = "join rare levels in the delivered table where that makes sense, or leave their cells empty"
    return Finding(finding_id(CHECK, block, "few"), CHECK, "note", block, what, (), tuple(rare), todo)
