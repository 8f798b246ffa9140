"""Attributes as text under one type each, shared by the formats that a network leaves in."""

from __future__ import annotations

import math
import sys
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import networkx as nx

from workbench.errors import InputError
from workbench.network.attributes import ATTRIBUTES, Domain, Kind, Plain, as_kind, kind_of, plain_value
from workbench.network.xml_text import legal_names, legal_text

SMALLEST = sys.float_info.min
"""Smallest number in size that every reader takes, 2.2e-308; igraph refuses a file with a smaller one."""

ESCAPES = "a backslash, u and four hexadecimal digits stand for the character of that code"
NOTES = ("text_escapes", "export_notes")


@dataclass
class Account:
    """Counts of what could not be written as it was."""

    escaped: int = 0
    infinite: int = 0
    tiny: int = 0
    renamed: dict[str, str] = field(default_factory=dict)

    def notes(self) -> tuple[str, ...]:
        """Return one sentence for each kind of change that was needed."""
        counted = (
            (self.escaped, f"texts with characters that XML forbids: {self.escaped}; {ESCAPES}"),
            (self.infinite, f"infinite numbers left out: {self.infinite}"),
            (self.tiny, f"numbers nearer to zero than {SMALLEST:.3g}, written as that: {self.tiny}"),
        )
        renamed = (f"attribute {old!r} is named {new!r}" for old, new in self.renamed.items())
        return (*(sentence for count, sentence in counted if count), *renamed)

    def attributes(self) -> dict[str, str]:
        """Return the notes as attributes of the network."""
        escapes = {"text_escapes": ESCAPES} if self.escaped else {}
        return escapes | ({"export_notes": "; ".join(self.notes())} if self.notes() else {})


@dataclass(frozen=True)
class Column:
    """One attribute of one domain: its key in the file, its legal name, its type, and what it means."""

    domain: Domain
    identifier: str
    name: str
    kind: Kind
    meaning: str


@dataclass(frozen=True)
class Encoded:
    """The attributes of one domain as text: columns, and for each row its (key, text) pairs."""

    columns: tuple[Column, ...]
    rows: tuple[list[tuple[str, str]], ...]


def checked_edges(graph: nx.Graph, nodes: Sequence[Any]) -> list[tuple[int, int, Mapping[str, Any]]]:
    """Return sorted edges by number of node, each from its source block to its target block.

    Raises `InputError` for a directed graph or one with several edges for a pair.
    """
    if graph.is_directed() or graph.is_multigraph():
        raise InputError("a network has edges without direction, one for each pair; this graph has others")
    place = {node: index for index, node in enumerate(nodes)}
    edges = []
    for first, second, attributes in graph.edges(data=True):
        source, target = sorted((place[first], place[second]))
        start = attributes.get("source_block")
        if start is not None and start != graph.nodes[nodes[source]].get("block"):
            source, target = target, source
        edges.append((source, target, attributes))
    return sorted(edges, key=lambda edge: edge[:2])


def encode(
    domain: Domain, records: Sequence[Mapping[Any, Any]], account: Account, keys: Iterator[int]
) -> Encoded:
    """Return the attributes of one domain as text, each under a type that all its values allow."""
    plain = [{str(name): plain_value(value) for name, value in record.items()} for record in records]
    rows: tuple[list[tuple[str, str]], ...] = tuple([] for _ in records)
    names = _ordered(
        domain, {name for record in plain for name, value in record.items() if value is not None}
    )
    legal = legal_names(names)
    account.renamed |= {old: new for old, new in legal.items() if old != new}
    columns = []
    for name in names:
        values = [record.get(name) for record in plain]
        column = Column(domain, f"d{next(keys)}", legal[name], kind_of(domain, name, values), name)
        columns.append(column)
        for row, value in zip(rows, values, strict=True):
            text = None if value is None else _written(column.kind, value, account)
            if text is not None:
                row.append((column.identifier, text))
    return Encoded(tuple(columns), rows)


def _ordered(domain: Domain, names: Iterable[str]) -> list[str]:
    """Return known attributes in their usual order, then the others by name."""
    known = {name: index for index, name in enumerate(ATTRIBUTES[domain])}
    return sorted(names, key=lambda name: (known.get(name, len(known)), name))


def _written(kind: Kind, value: Plain, account: Account) -> str | None:
    """Return one value as text; ``None`` for one that cannot be written."""
    value = as_kind(kind, value)
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        text = legal_text(value)
        account.escaped += text != value
        return text
    if isinstance(value, int):
        return str(value)
    if math.isinf(value):
        account.infinite += 1
        return None
    if 0 < abs(value) < SMALLEST:
        account.tiny += 1
        value = math.copysign(SMALLEST, value)
    return repr(value)
