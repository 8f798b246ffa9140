"""Names of layers: those that have a recipe of their own, and words that are most likely one of them misspelt."""

from __future__ import annotations

import re

from workbench.settings.names import name_fault

LAYERS = ("transcripts", "metabolites", "proteins", "lipids", "microbes", "methylation", "clinical")
"""Layers that have a name of their own here; a user may name others."""

MOST_EDITS = 2
SHORTEST = 5
_FIELDS = re.compile(r"(transcript|metabol|prote|lipid|microbi|methyl)(om(e|es|ic|ics)|o)")
_STEMS = {"prote": "proteins", "microbi": "microbes", "metabol": "metabolites", "methyl": "methylation"}


def layer_meant(word: str) -> str | None:
    """Return the known layer that a word is most likely meant to be; None for a known layer and for other words.

    Meant is a layer of which the word differs in case or the plural alone, or in one or two letters (left out,
    added, exchanged, or two neighbours changed over), and the one whose field the word names (``proteome``,
    ``lipidomics``).

    Examples
    --------
    >>> layer_meant("transcritps"), layer_meant("Protein"), layer_meant("metabolomics")
    ('transcripts', 'proteins', 'metabolites')
    >>> layer_meant("transcripts"), layer_meant("phosphoproteins"), layer_meant("exposures")
    (None, None, None)
    """
    if word in LAYERS:
        return None
    lower = word.lower()
    field = _FIELDS.fullmatch(lower)
    if field is not None:
        return _STEMS.get(field[1], f"{field[1]}s")
    for layer in LAYERS:
        if lower == layer or lower.rstrip("s") == layer.rstrip("s"):
            return layer
    if len(word) < SHORTEST:
        return None
    distance, nearest = min((edits(lower, layer), layer) for layer in LAYERS)
    return nearest if distance <= MOST_EDITS else None


def layer_fault(value: str, own: bool) -> str | None:
    """Return what is wrong with the name of a layer; None when nothing is.

    Parameters
    ----------
    value : str
        The name.
    own : bool
        Whether a person has said that it is a layer of their own, like a known one or not.
    """
    fault = name_fault(value)
    if fault is not None or own:
        return fault
    meant = layer_meant(value)
    if meant is None:
        return None
    return (
        f"{value!r} is no layer; did you mean {meant!r}? known: {', '.join(map(repr, LAYERS))}; if {value!r} is a "
        "layer of your own, say own_layer = true (add-block: --own-layer)"
    )


def edits(word: str, other: str) -> int:
    """Return how many letters are left out, added, exchanged or changed over with their neighbour.

    The optimal string alignment distance: no letter is touched twice.

    Examples
    --------
    >>> edits("transcritps", "transcripts"), edits("lipid", "lipids"), edits("", "abc")
    (1, 1, 3)
    """
    before: list[int] = []
    row = list(range(len(other) + 1))
    for i, letter in enumerate(word, start=1):
        older, before, row = before, row, [i]
        for j, there in enumerate(other, start=1):
            least = min(before[j] + 1, row[j - 1] + 1, before[j - 1] + (letter != there))
            if older and j > 1 and letter == other[j - 2] and word[i - 2] == there:
                least = min(least, older[j - 2] + 1)
            row.append(least)
    return row[-1]
