"""Known links between features from the user's table."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

from workbench.pathways.sets import MAXIMUM_BYTES, read_lines, table_rows


@dataclass(frozen=True)
class KnownLinks:
    """Known links without direction: evidence in words by the two identifiers, with notes about the table."""

    path: str
    evidence: dict[frozenset[str], str]
    notes: tuple[str, ...]


def read_links(path: Path) -> KnownLinks:
    """Return the links of a tab-separated table with the columns ``source``, ``target`` and, optional, ``evidence``.

    A link has no direction. One that comes again adds its evidence; a line without an end, or with the same one
    twice, is left out; both are noted. Without ``evidence`` it is ``listed``.

    Raises
    ------
    InputError
        The file cannot be read, is no UTF-8 text, lacks a column, or has lines of another length.
    """
    notes: list[str] = []
    evidence: dict[frozenset[str], list[str]] = {}
    left_out = repeated = 0
    lines = read_lines(path, MAXIMUM_BYTES)
    for _, row in table_rows(path, lines, ("source", "target"), notes, ("evidence",)):
        ends = frozenset((row["source"], row["target"]))
        if "" in ends or len(ends) < 2:
            left_out += 1
            continue
        said = row.get("evidence", "") or "listed"
        repeated += ends in evidence
        held = evidence.setdefault(ends, [])
        if said not in held:
            held.append(said)
    if left_out:
        notes.append(f"{left_out} line{'s' * (left_out != 1)} without two different ends left out")
    if repeated:
        notes.append(f"{repeated} link{'s' * (repeated != 1)} named again, joined with the first")
    return KnownLinks(path.name, {ends: "; ".join(said) for ends, said in evidence.items()}, tuple(notes))
