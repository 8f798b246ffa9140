"""Features by the names that a person types: the id, the label, or ``BLOCK:ID`` where two blocks have it."""

from __future__ import annotations

from difflib import get_close_matches

import pandas as pd

from workbench.errors import InputError

MOST_NAMED = 5


def find_feature(features: pd.DataFrame, text: str) -> pd.Series:
    """Return the row of features.tsv that a text names.

    The id goes before the label, and as it is written before whatever its case.

    Raises
    ------
    InputError
        When no feature or several have that name; the way out is named.
    """
    for rows in _readings(features, text):
        if len(rows) == 1:
            return rows.iloc[0]
        if len(rows) > 1:
            ways = [f"{row.block}:{row.feature}" for row in rows.head(MOST_NAMED).itertuples()]
            more = f" and {len(rows) - MOST_NAMED} more" if len(rows) > MOST_NAMED else ""
            raise InputError(f"'{text}' names {len(rows)} features; say which: {', '.join(ways)}{more}")
    raise InputError(f"no feature of this analysis has the id or label '{text}'{_nearest(features, text)}")


def _readings(features: pd.DataFrame, text: str) -> list[pd.DataFrame]:
    """Return the rows that the text can mean, the strictest reading first."""
    ids, labels = features["feature"].astype(str), features["label"].astype(str)
    found = [features[ids == text], features[labels == text]]
    block, mark, name = text.partition(":")
    if mark and block in set(features["block"]):
        inside = features[features["block"] == block]
        found += [inside[inside["feature"].astype(str) == name], inside[inside["label"].astype(str) == name]]
    lower = text.lower()
    return [*found, features[ids.str.lower() == lower], features[labels.str.lower() == lower]]


def _nearest(features: pd.DataFrame, text: str) -> str:
    lower = {str(name).lower(): str(name) for column in ("label", "feature") for name in features[column]}
    near = get_close_matches(text.lower(), list(lower), n=3, cutoff=0.7)
    if near:
        return f"; did you mean {', '.join(repr(lower[name]) for name in near)}?"
    return "; features.tsv lists them, and those that preparation dropped are told by `workbench prepare --explain`"
