"""One finding about the data: what is wrong, where, and what to do about it."""

from __future__ import annotations

import hashlib
import json
import re
from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any, Literal

Severity = Literal["error", "warning", "note"]
SEVERITIES: tuple[Severity, ...] = ("error", "warning", "note")


@dataclass(frozen=True, eq=False)
class Finding:
    """One thing that is wrong with the data, or worth knowing before they are trusted.

    Attributes
    ----------
    id : str
        Stays the same as long as the finding does: made by :func:`finding_id`, without any figure in it.
    check : str
        Name of the check, such as ``outlier``.
    severity : {"error", "warning", "note"}
        An error ruins an analysis; a warning may change its answer; a note is for the reader.
    block : str
        "" for the study as a whole.
    what : str
        What was found, with its numbers and names.
    samples, features : tuple of str
        All that the finding is about, also those that ``what`` only counts.
    todo : str
        What to do, with the line for ``project.toml`` where there is one.
    evidence : object or None
        A small frozen dataclass that a figure can be drawn from.
    acceptable : bool
        False for an error with which no analysis can be made, whatever a person says of it.
    """

    id: str
    check: str
    severity: Severity
    block: str
    what: str
    samples: tuple[str, ...] = ()
    features: tuple[str, ...] = ()
    todo: str = ""
    evidence: Any = None
    acceptable: bool = True

    @property
    def rank(self) -> tuple[int, str, str]:
        """Place among findings: errors first, then by check and id."""
        return SEVERITIES.index(self.severity), self.check, self.id


def finding_id(check: str, *parts: str) -> str:
    """Return the id of a finding: its check and the names that it is about, joined by ``-``.

    Empty parts are left out. A name with other characters than letters, digits, ``.``, ``_`` and ``-`` is
    written with ``_`` for each of them and four digits of its hash, so that no two names have one id.

    >>> finding_id("outlier", "metabolites", "S12"), finding_id("gaps", "", "a b")
    ('outlier-metabolites-S12', 'gaps-a_b.c868')
    """
    return "-".join([check, *(_plain(part) for part in parts if part)])


def _plain(name: str) -> str:
    plain = re.sub(r"[^A-Za-z0-9._-]", "_", name)
    return plain if plain == name else f"{plain}.{hashlib.sha256(name.encode()).hexdigest()[:4]}"


def sorted_findings(findings: Iterable[Finding]) -> tuple[Finding, ...]:
    """Return findings with errors first, then warnings and notes, each by check and id."""
    return tuple(sorted(findings, key=lambda finding: finding.rank))


def toml_text(text: str) -> str:
    r"""Return a text as ``project.toml`` takes it: in double quotes, escaped.

    >>> print(toml_text('S "1"'))
    "S \"1\""
    """
    return json.dumps(text, ensure_ascii=False)


def toml_key(name: str) -> str:
    """Return a name as a key of ``project.toml``: bare where that is allowed.

    >>> toml_key("S01"), toml_key("S 1")
    ('S01', '"S 1"')
    """
    return name if re.fullmatch(r"[A-Za-z0-9_-]+", name) else toml_text(name)


def exclude_line(block: str, samples: Iterable[str], reason: str) -> str:
    """Return the words for leaving samples out of one block, or of the study where ``block`` is "".

    >>> print(exclude_line("metabolites", ["S12"], "haemolysed"))
    [blocks.metabolites] exclude = { S12 = "haemolysed" }
    """
    cells = ", ".join(f"{toml_key(sample)} = {toml_text(reason)}" for sample in samples)
    return f"{_table(block)} exclude = {{ {cells} }}"


def adjust_line(block: str, columns: Iterable[str]) -> str:
    """Return the words for adjusting one block for columns, or the study where ``block`` is "".

    >>> print(adjust_line("metabolites", ["plate"]))
    [blocks.metabolites] adjust = ["plate"]
    """
    return f"{_table(block)} adjust = [{', '.join(toml_text(column) for column in columns)}]"


def accept_line(identity: str, reason: str = "why it may stay") -> str:
    """Return the words for accepting a finding.

    >>> print(accept_line("outlier-metabolites-S12"))
    [check] accept = { "outlier-metabolites-S12" = "why it may stay" }
    """
    return f"[check] accept = {{ {toml_text(identity)} = {toml_text(reason)} }}"


def _table(block: str) -> str:
    return f"[blocks.{block}]" if block else "[samples]"
