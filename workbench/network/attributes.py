"""Attributes of nodes, edges and the network: their types, their meaning, plain Python values."""

from __future__ import annotations

import datetime
import math
import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
import pandas as pd

Domain = Literal["graph", "node", "edge"]
Kind = Literal["boolean", "int", "long", "double", "string"]
Plain = bool | int | float | str

INT_LIMIT = 2**31
"""Whole numbers below it in size are ``int``, others ``long``."""

EXACT_LIMIT = 2**53
"""Many graph programs hold every number as a double, which is exact to here; larger ones are text."""


@dataclass(frozen=True)
class Attribute:
    """What one attribute holds: its ``kind`` and, in one phrase, its ``meaning``."""

    kind: Kind
    meaning: str


GRAPH_ATTRIBUTES: dict[str, Attribute] = {
    "title": Attribute("string", "title of the study"),
    "analysis": Attribute("string", "name of the analysis in project.toml"),
    "correlation": Attribute("string", "kind of correlation that pairs were tested by"),
    "select": Attribute("string", "whether pairs were selected within groups or with the group left in"),
    "fdr": Attribute("double", "false-discovery rate at or under which a pair is an edge"),
    "version": Attribute("string", "version of the program that wrote this file"),
    "cautions": Attribute("string", "what this network may not be used for"),
    "community_method": Attribute("string", "how the communities were found"),
    "community_stability_method": Attribute("string", "how the stability of communities was measured"),
    "text_escapes": Attribute("string", "how characters that XML forbids are written in this file"),
    "export_notes": Attribute("string", "what could not be written as it was"),
}

NODE_ATTRIBUTES: dict[str, Attribute] = {
    "label": Attribute("string", "name to show; the feature's own where it has no other"),
    "feature": Attribute("string", "feature as its block's table names it"),
    "block": Attribute("string", "table that the feature comes from"),
    "layer": Attribute("string", "biological kind of the block"),
    "community": Attribute("int", "community of the feature; 1 is the largest"),
    "community_stability": Attribute(
        "double", "share of resamples in which the feature stays in its community"
    ),
    "cluster": Attribute(
        "string", "near-duplicates inside the layer: features of one cluster measure the same"
    ),
    "degree": Attribute("int", "edges of the feature"),
    "strength": Attribute("double", "sum of the weights of the feature's edges"),
    "layers_reached": Attribute("int", "layers that the feature's edges reach"),
    "connected_component": Attribute("int", "connected component of the network; 1 is the largest"),
    "x": Attribute("double", "place in a drawing, across"),
    "y": Attribute("double", "place in a drawing, up"),
    "group_effect": Attribute("double", "difference between the groups, fitted jointly with the nuisance"),
    "group_level": Attribute("string", "level whose difference from the first one group_effect is"),
    "group_p": Attribute("double", "p of the difference between the groups"),
    "group_q": Attribute("double", "false-discovery rate of the difference between the groups"),
    "mean": Attribute("double", "mean of the feature's values"),
    "missing_share": Attribute("double", "share of the measured values that are missing"),
    "imputed_share": Attribute("double", "share of the prepared values that were imputed"),
}

EDGE_ATTRIBUTES: dict[str, Attribute] = {
    "source_block": Attribute("string", "block of the source feature"),
    "target_block": Attribute("string", "block of the target feature"),
    "weight": Attribute("double", "size of r, without its sign"),
    "r": Attribute("double", "correlation of the two features, nuisance removed"),
    "r_low": Attribute("double", "lower end of the 95 % interval of r"),
    "r_high": Attribute("double", "upper end of the 95 % interval of r"),
    "p": Attribute("double", "two-sided p of r; where the module carries the edge, the larger p of its ends"),
    "q": Attribute("double", "false-discovery rate over all cross-layer pairs of the analysis"),
    "q_block": Attribute("double", "false-discovery rate over the pairs of these two blocks"),
    "r_total": Attribute("double", "correlation with the group left in"),
    "q_total": Attribute("double", "false-discovery rate of r_total"),
    "r_within": Attribute("double", "correlation with the group removed"),
    "q_within": Attribute("double", "false-discovery rate of r_within"),
    "n": Attribute("int", "samples that the pair was tested on"),
    "changes": Attribute("int", "changes within subjects that the pair was tested on"),
    "subjects": Attribute("int", "subjects whose means the pair was tested on"),
    "basis": Attribute("string", "what the correlation rests on: within groups, the group alone, or unclear"),
    "support": Attribute("string", "what carries the edge: the pair's own test, its module, or both"),
    "model_r": Attribute("double", "correlation that the fitted model implies"),
    "component": Attribute("int", "canonical pair that carries most of model_r"),
    "stability": Attribute("double", "share of half-samples in which the pair is among the strongest"),
    "r_spearman": Attribute("double", "rank correlation of the two features"),
    "r_without_one": Attribute("double", "weakest r when any one sample is left out"),
    "r_observed": Attribute("double", "correlation without imputed values"),
    "imputed_share": Attribute("double", "share of the pair's values that were imputed"),
    "community": Attribute("int", "community of both ends; missing where they differ"),
    "backbone_p": Attribute(
        "double", "p of the disparity filter: how well chance splits the ends' weights like this"
    ),
    "known": Attribute("string", "evidence for the link in the user's table of known links"),
    "shared_sets": Attribute("string", "sets of the user's table that hold both ends"),
}

ATTRIBUTES: dict[Domain, dict[str, Attribute]] = {
    "graph": GRAPH_ATTRIBUTES,
    "node": NODE_ATTRIBUTES,
    "edge": EDGE_ATTRIBUTES,
}

_TABLE: dict[Domain, str] = {
    "graph": "attribute {!r} of the network",
    "node": "column {!r} of the features table",
    "edge": "column {!r} of the edges table",
}


_VARIATE = re.compile(r"pair(\d+)_(own|other)")


def meaning_of(domain: Domain, name: str) -> str:
    """Return one phrase about an attribute; an unknown one is traced to its table.

    Examples
    --------
    >>> meaning_of("edge", "weight")
    'size of r, without its sign'
    >>> meaning_of("node", "HMDB ID")
    "column 'HMDB ID' of the features table"
    """
    known = ATTRIBUTES[domain].get(name)
    if known:
        return known.meaning
    variate = _VARIATE.fullmatch(name)
    if domain == "node" and variate:
        side = "own side's" if variate[2] == "own" else "other side's"
        return f"correlation with the {side} variate of canonical pair {variate[1]}"
    return _TABLE[domain].format(name)


def plain_value(value: Any) -> Plain | None:
    """Return ``value`` as a plain bool, int, float or str; ``None`` where it is missing.

    Missing are ``None``, NaN, ``NaT``, pandas' ``NA`` and the empty text, as in a table's empty cell.

    Examples
    --------
    >>> plain_value(np.int64(3)), plain_value(np.nan), plain_value("")
    (3, None, None)
    """
    if isinstance(value, str):
        return str(value) or None
    if value is None or value is pd.NA or value is pd.NaT:
        return None
    if isinstance(value, bool | np.bool_):
        return bool(value)
    if isinstance(value, int | np.integer):
        return int(value)
    if isinstance(value, float | np.floating):
        return None if math.isnan(value) else float(value)
    if isinstance(value, datetime.date):
        return value.isoformat()
    return str(value) or None


def kind_of(domain: Domain, name: str, values: Iterable[Plain | None]) -> Kind:
    """Return the type under which all ``values`` of one attribute can be written.

    The type that the attribute is known to have, where its values allow it. Otherwise: ``boolean`` for
    booleans with none missing (readers turn a missing one into false), ``int``, ``long`` or ``double`` for
    numbers, ``string`` for everything else, mixtures and whole numbers beyond 2**53 among it.

    Examples
    --------
    >>> kind_of("node", "cid", [1, 2]), kind_of("node", "cid", [1, 2.5]), kind_of("node", "cid", [1, "x"])
    ('int', 'double', 'string')
    >>> kind_of("edge", "r", [1, 0]), kind_of("edge", "n", [24.0, 23.0])
    ('double', 'int')
    """
    seen = list(values)
    present = [value for value in seen if value is not None]
    wanted = ATTRIBUTES[domain][name].kind if name in ATTRIBUTES[domain] else None
    if wanted is not None and _fits(wanted, present):
        return wanted
    types = {type(value) for value in present}
    if types == {bool}:
        return "boolean" if len(present) == len(seen) else "string"
    if not types <= {int, float} or not types or _beyond_exact(present):
        return "string"
    if types == {int}:
        return "int" if all(abs(value) < INT_LIMIT for value in present) else "long"  # type: ignore[arg-type]
    return "double"


def _fits(kind: Kind, present: Sequence[Plain]) -> bool:
    """Return whether an attribute of a known kind holds these values without loss."""
    if kind == "string":
        return True
    if any(isinstance(value, bool | str) for value in present) or _beyond_exact(present):
        return False
    if kind == "double":
        return True
    return all(abs(value) < INT_LIMIT and float(value).is_integer() for value in present)  # type: ignore[arg-type]


def _beyond_exact(present: Sequence[Plain]) -> bool:
    """Return whether a whole number is too large for a double to hold exactly."""
    return any(isinstance(value, int) and abs(value) > EXACT_LIMIT for value in present)


def as_kind(kind: Kind, value: Plain) -> Plain:
    """Return ``value`` as the Python type of ``kind``.

    Examples
    --------
    >>> as_kind("int", 24.0), as_kind("double", 1), as_kind("string", True)
    (24, 1.0, 'true')
    """
    if kind in ("int", "long"):
        return int(value)
    if kind == "double":
        return float(value)
    if kind == "string":
        return str(value).lower() if isinstance(value, bool) else str(value)
    return bool(value)


def uniform(domain: Domain, name: str, values: Iterable[Any]) -> list[Plain | None]:
    """Return the values of one attribute as plain Python values of one type, ``None`` where missing.

    Examples
    --------
    >>> uniform("edge", "n", [24.0, np.nan]), uniform("node", "kegg", ["C00031", 5])
    ([24, None], ['C00031', '5'])
    """
    plain = [plain_value(value) for value in values]
    kind = kind_of(domain, name, plain)
    return [None if value is None else as_kind(kind, value) for value in plain]
