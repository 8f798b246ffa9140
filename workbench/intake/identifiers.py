"""Columns of public identifiers, recognised by their shape and checked; dates that were gene symbols."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

import pandas as pd

from .dates import is_date, is_rounded, is_serial
from .faults import counted, listed
from .tokens import MISSING, number_of

LEAST_SHARE = 0.5
_PARTED = re.compile(r"\s*(?:;|\||///)\s*")
_MOSTLY = 0.8


@dataclass(frozen=True)
class IdentifierFault:
    """One fault of the identifiers of a column, with every cell that has it.

    Attributes
    ----------
    fault
        ``version`` (a suffix that other tables lack or count otherwise), ``digits`` (too few or too many: zeros
        lost), ``old form`` (of an earlier release), ``case``, ``form`` (anything else that the shape does not
        allow), ``date`` (what a spreadsheet made of a symbol).
    damage
        Whether the identifier is probably spoilt; if not, it is whole and only written otherwise.
    positions
        Rows of the cells.
    texts
        What stands there, in the same order.
    """

    fault: str
    damage: bool
    positions: tuple[int, ...]
    texts: tuple[str, ...]


@dataclass(frozen=True)
class IdentifierColumn:
    """A column of identifiers and what is odd about it. Nothing is mended or merged.

    Attributes
    ----------
    column
        Name of the annotation; empty for the feature ids themselves.
    kind
        ``ensembl``, ``entrez``, ``uniprot``, ``hmdb``, ``chebi``, ``kegg``, ``inchikey`` or ``lipidmaps``.
    filled, sound
        Number of cells that hold something, and of those whose identifiers are all as they should be.
    faults
        By kind of fault, in the order of `IdentifierFault`.
    several
        Rows whose cell holds several identifiers (parted by ``;``, ``|`` or ``///``): one feature, many ids.
    shared
        Rows of each identifier that several features have: many features, one id.
    """

    column: str
    kind: str
    filled: int
    sound: int
    faults: tuple[IdentifierFault, ...]
    several: tuple[int, ...]
    shared: Mapping[str, tuple[int, ...]]

    def lines(self) -> list[str]:
        """Return what a person should read: the kind, faults, one-to-many and many-to-one, a sentence each."""
        what = f"column '{self.column}'" if self.column else "the feature ids"
        told = [
            f"{what}: {NAMES[self.kind]} identifiers, {self.sound:,} of {self.filled:,} cells as they should be"
        ]
        told += [
            f"{what}: {_SAID[f.fault].format(counted(len(f.texts), 'cell'))}: {listed(f.texts, 3)}"
            for f in self.faults
        ]
        if self.several:
            told.append(
                f"{what}: {counted(len(self.several), 'feature has', 'features have')} several identifiers"
            )
        if self.shared:
            ids = counted(len(self.shared), "identifier is", "identifiers are")
            told.append(
                f"{what}: {ids} that of several features: {listed(list(self.shared), 3)}; none are merged"
            )
        return told

    def sentence(self) -> str:
        """Return `lines` as one sentence that names the column once."""
        first, *others = self.lines()
        start = f"{first.split(': ', 1)[0]}: "
        return "; ".join([first, *(line.removeprefix(start) for line in others)])


@dataclass(frozen=True)
class _Kind:
    """The shape of sound identifiers of one kind, and how spoilt ones are recognised."""

    sound: re.Pattern[str]
    loose: re.Pattern[str]
    fault: Callable[[str], str]
    named: re.Pattern[str] | None = None  # the column's name must say it, since the shape says too little


NAMES = {
    "ensembl": "Ensembl",
    "uniprot": "UniProt",
    "hmdb": "HMDB",
    "chebi": "ChEBI",
    "kegg": "KEGG",
    "inchikey": "InChIKey",
    "lipidmaps": "LIPID MAPS",
    "entrez": "Entrez Gene",
}
_SAID = {
    "version": "{} with a version suffix",
    "digits": "{} with too few or too many digits, perhaps lost zeros",
    "old form": "{} in the form of an earlier release",
    "case": "{} in another case",
    "form": "{} not in the form of such identifiers",
    "date": "{} that a spreadsheet made a date or a number of",
}
_WHOLE = ("version", "old form", "case")


def _digits_or_form(text: str) -> str:
    return "digits" if re.fullmatch(r"[A-Za-z:]+\d+(\.\d+)?", text) else "form"


def _ensembl_fault(text: str) -> str:
    return "version" if re.fullmatch(r"ENS[A-Z]*\d{11}\.\d+", text) else _digits_or_form(text)


def _hmdb_fault(text: str) -> str:
    return "old form" if re.fullmatch(r"HMDB\d{5}", text) else _digits_or_form(text)


def _uniprot_fault(text: str) -> str:
    return "version" if re.fullmatch(r"[A-Z0-9]{6,10}\.\d+", text) else "form"


def _plain_form(text: str) -> str:
    del text
    return "form"


# Shapes as the data banks describe them (from memory, without their documents at hand): Ensembl stable ids have
# eleven digits; UniProt accession numbers six or ten letters and digits; HMDB seven digits since release 4, five
# before; KEGG entries a letter and five digits; InChIKey 14 + 10 + 1 letters; LIPID MAPS two letters of the
# category and eight digits or letters.
KINDS: Mapping[str, _Kind] = {
    "ensembl": _Kind(
        re.compile(r"ENS[A-Z]{0,4}[GTPER]\d{11}"),
        re.compile(r"ENS[A-Z]{0,4}[GTPER]\d+(?:\.\d+)?"),
        _ensembl_fault,
    ),
    "hmdb": _Kind(re.compile(r"HMDB\d{7}"), re.compile(r"HMDB\d+"), _hmdb_fault),
    "chebi": _Kind(re.compile(r"CHEBI:[1-9]\d{0,6}"), re.compile(r"CHEBI[:_ ]?\d+"), _plain_form),
    "lipidmaps": _Kind(
        re.compile(r"LM(?:FA|GL|GP|SP|ST|PR|SL|PK)\d{2}[0-9A-Z]{2}[0-9A-Z]{4}"),
        re.compile(r"LM(?:FA|GL|GP|SP|ST|PR|SL|PK)[0-9A-Z]+"),
        _digits_or_form,
    ),
    "inchikey": _Kind(
        re.compile(r"[A-Z]{14}-[A-Z]{8}[SNB][A-Z]-[A-Z]"),
        re.compile(r"(?:InChIKey=)?[A-Z]{10,16}-[A-Z]{6,12}(?:-[A-Z]{0,2})?|[A-Z]{14}", re.IGNORECASE),
        _plain_form,
    ),
    "uniprot": _Kind(
        re.compile(r"(?:[OPQ]\d[A-Z0-9]{3}\d|[A-NR-Z]\d(?:[A-Z][A-Z0-9]{2}\d){1,2})(?:-\d{1,3})?"),
        re.compile(r"(?:[OPQ]\d[A-Z0-9]{3}\d|[A-NR-Z]\d(?:[A-Z][A-Z0-9]{2}\d){1,2})(?:-\d{1,3})?(?:\.\d+)?"),
        _uniprot_fault,
    ),
    "kegg": _Kind(
        re.compile(r"(?:(?:cpd|gl|dr|ko|rn):)?[CGDKR]\d{5}|[a-z]{3,4}:\w+"),
        re.compile(r"(?:(?:cpd|gl|dr|ko|rn):)?[CGDKR]\d{1,6}", re.IGNORECASE),
        _digits_or_form,
        re.compile(r"kegg|cpd|compound", re.IGNORECASE),
    ),
    "entrez": _Kind(
        re.compile(r"[1-9]\d{0,8}"),
        re.compile(r"\d{1,9}(?:\.0+)?"),
        _plain_form,
        re.compile(r"entrez|ncbi|locus_?link|gene_?id$", re.IGNORECASE),
    ),
}


def split_identifiers(cell: str) -> tuple[str, ...]:
    """Return the identifiers of a cell, parted by ``;``, ``|`` or ``///``, without blanks and missing tokens.

    >>> split_identifiers("P12345; Q67890-2|"), split_identifiers("NA")
    (('P12345', 'Q67890-2'), ())
    """
    return tuple(part for part in _PARTED.split(cell.strip()) if part not in MISSING)


def identifier_kind(cells: Sequence[str], name: str = "") -> str | None:
    """Return what kind of identifiers a column holds, or None.

    The kind is that whose shape most of the filled cells have, at least half of them, spoilt ones included
    (``HMDB122``). Whole numbers are Entrez Gene ids only where the column's name says so, and few letters and
    digits such as ``C00031`` are KEGG's only if all cells are sound or the name says so.

    >>> identifier_kind(["HMDB00122", "HMDB0000123", ""]), identifier_kind(["7157", "672"], "entrez_id")
    ('hmdb', 'entrez')
    """
    filled = [ids for cell in cells if (ids := split_identifiers(cell))]
    shares = {kind: _share(filled, shape, name) for kind, shape in KINDS.items()}
    best = max(shares, key=lambda kind: shares[kind])
    return best if shares[best] >= LEAST_SHARE else None


def _share(filled: Sequence[Sequence[str]], shape: _Kind, name: str) -> float:
    if not filled:
        return 0.0
    fitting = sum(all(_looks_like(shape, text) for text in ids) for ids in filled)
    if shape.named and not shape.named.search(name):
        sound = all(shape.sound.fullmatch(text) for ids in filled for text in ids)
        if shape is KINDS["entrez"] or not sound:
            return 0.0
    return fitting / len(filled)


def _looks_like(shape: _Kind, text: str) -> bool:
    return bool(
        shape.loose.fullmatch(text) or shape.loose.fullmatch(text.upper()) or shape.sound.fullmatch(text)
    )


def read_identifiers(column: str, cells: Sequence[str]) -> IdentifierColumn | None:
    """Return the identifiers of a column, checked, or None when it holds none that are known here.

    Parameters
    ----------
    column
        Its name; empty for the feature ids.
    cells
        Its texts, one for each feature.
    """
    kind = identifier_kind(cells, column)
    if kind is None:
        return None
    shape, dates = KINDS[kind], set(date_like(cells))
    found: dict[str, list[tuple[int, str]]] = {}
    holders: dict[str, list[int]] = {}
    split = [split_identifiers(cell) for cell in cells]
    for row, ids in enumerate(split):
        for text in dict.fromkeys(ids):
            holders.setdefault(text, []).append(row)
            fault = "date" if row in dates else _fault(shape, text)
            if fault:
                found.setdefault(fault, []).append((row, text))
    spoilt = {row for cells_of in found.values() for row, _ in cells_of}
    filled = sum(map(bool, split))
    return IdentifierColumn(
        column=column,
        kind=kind,
        filled=filled,
        sound=filled - len(spoilt),
        faults=tuple(_as_fault(fault, found[fault]) for fault in _SAID if fault in found),
        several=tuple(row for row, ids in enumerate(split) if len(set(ids)) > 1),
        shared={text: tuple(rows) for text, rows in holders.items() if len(rows) > 1},
    )


def _as_fault(fault: str, cells: Sequence[tuple[int, str]]) -> IdentifierFault:
    rows, texts = zip(*cells, strict=True)
    return IdentifierFault(fault, fault not in _WHOLE, rows, texts)


def _fault(shape: _Kind, text: str) -> str:
    if shape.sound.fullmatch(text):
        return ""
    if shape.sound.fullmatch(text.upper()):
        return "case"
    return shape.fault(text)


def identifier_columns(features: Sequence[str], annotations: pd.DataFrame) -> tuple[IdentifierColumn, ...]:
    """Return the identifiers among the feature ids and the columns of text of their annotations, checked.

    Parameters
    ----------
    features
        Feature ids.
    annotations
        A row for each of them; columns that are no text are left out.
    """
    columns: list[tuple[str, Sequence[str]]] = [("", list(features))]
    columns += [(str(name), list(map(str, cells))) for name, cells in annotations.items() if _is_text(cells)]
    found = (read_identifiers(name, cells) for name, cells in columns)
    return tuple(column for column in found if column is not None)


def _is_text(cells: pd.Series) -> bool:
    return all(isinstance(cell, str) for cell in cells)


def date_like(cells: Sequence[str]) -> tuple[int, ...]:
    """Return the rows whose cell a spreadsheet has probably made of a gene symbol or another name.

    Dates in any form that spreadsheets write, wherever they are at most half of the filled cells (else the
    column is one of dates); and, where four fifths of the filled cells are no numbers, day numbers
    (``44075``) and rounded names (``2.31E+19``).

    >>> date_like(["TP53", "2-Sep", "BRCA1", "EGFR", "MYC", "44075"])
    (1, 5)
    >>> date_like(["2024-09-02", "2024-09-03"])
    ()
    """
    filled = [row for row, cell in enumerate(cells) if cell.strip() not in MISSING]
    dates = {row for row in filled if any(is_date(part) for part in split_identifiers(cells[row]))}
    if 2 * len(dates) > len(filled):
        return ()
    words = sum(number_of(cells[row].strip()) is None for row in filled)
    if words >= _MOSTLY * len(filled):
        dates |= {row for row in filled if is_serial(cells[row]) or is_rounded(cells[row])}
    return tuple(sorted(dates))
