"""Which columns of a sample sheet look like the group, a nuisance, or the subject of several samples."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field

import pandas as pd

from .faults import counted, listed
from .kinds import column_numbers, present
from .tokens import word_set

_GROUP = word_set(
    "condition treatment group genotype status disease phenotype class diagnosis case control arm dose "
    "strain diet stage response responder outcome exposure tissue timepoint cohort line cultivar variety "
    "sex"
)
_BATCH = word_set(
    "batch block run day date plate lane site kit operator center centre instrument machine flowcell chip "
    "slide array order extraction library technician lot sequencing prep column centrifugation shipment "
    "laboratory lab hospital"
)
_SUBJECT = word_set(
    "donor patient subject animal plant individual participant mouse rat person proband case_id pair "
    "family litter clone host tree twin volunteer"
)
_NUISANCE = word_set("age bmi weight rin ph purity dilution")

MOST_GROUPS = 8
SAMPLES_EACH = 2


@dataclass(frozen=True)
class Suggestions:
    """Columns that look like a part of the design; nothing is used before a person names it.

    Attributes
    ----------
    group, adjust, subject
        Names of columns, the likelier first.
    reasons
        Why, keyed by column.
    """

    group: tuple[str, ...]
    adjust: tuple[str, ...]
    subject: tuple[str, ...]
    reasons: Mapping[str, str] = field(default_factory=dict)


def suggest_columns(frame: pd.DataFrame) -> Suggestions:
    """Return the columns that look like a group, a nuisance or a subject, each with its reason.

    Levels that differ in case alone count as one here.

    A column is looked at when it has at least two levels and no sample of its own for each. By its name (a
    word of it):

    - subject: a word such as donor, patient, animal, plant, and at least one level with several samples;
    - adjust: a word such as batch, run, day, plate, operator (with at least one repeated level), or a number
      called age, bmi, weight;
    - group: a word such as condition, treatment, genotype, status, with 2 to 8 levels of two samples or more;
    - group, after those with such a name: any text with 2 to 8 levels of two samples or more.

    >>> cells = {"treatment": list("aabb"), "plate": list("1212"), "note": list("wxyz")}
    >>> frame = pd.DataFrame(cells)
    >>> found = suggest_columns(frame)
    >>> found.group, found.adjust, found.subject
    (('treatment',), ('plate',), ())
    """
    named: dict[str, list[str]] = {"group": [], "adjust": [], "subject": [], "other": []}
    reasons: dict[str, str] = {}
    for name in map(str, frame.columns):
        role, reason = _role(name, frame[name])
        if role:
            named[role].append(name)
            reasons[name] = reason
    return Suggestions(
        tuple(named["group"] + named["other"]), tuple(named["adjust"]), tuple(named["subject"]), reasons
    )


def _role(name: str, series: pd.Series) -> tuple[str, str]:
    sizes = present(series).str.casefold().value_counts()
    if len(sizes) < 2:
        return "", ""
    words = _words(name)
    spread = f"{counted(len(sizes), 'level')}, {_sizes(sizes)}"
    repeated = int(sizes.max()) > 1
    if words & _SUBJECT and repeated:
        return "subject", f"its name ({listed(sorted(words & _SUBJECT))}) and repeated values: {spread}"
    if words & _BATCH and repeated:
        return "adjust", f"its name ({listed(sorted(words & _BATCH))}) and {spread}"
    if words & _NUISANCE and column_numbers(series) is not None:
        return "adjust", f"its name ({listed(sorted(words & _NUISANCE))}) and numbers in its cells"
    if not 2 <= len(sizes) <= MOST_GROUPS or int(sizes.min()) < SAMPLES_EACH:
        return "", ""
    if words & _GROUP:
        return "group", f"its name ({listed(sorted(words & _GROUP))}) and {spread}"
    if column_numbers(series) is None:
        return "other", f"text with {spread}"
    return "", ""


def _words(name: str) -> set[str]:
    parts = re.findall(r"[A-Z]?[a-z]+|[A-Z]+(?![a-z])", name)
    words = {part.casefold() for part in parts}
    return words | {word.removesuffix("s") for word in words} | {name.casefold()}


def _sizes(sizes: pd.Series) -> str:
    low, high = int(sizes.min()), int(sizes.max())
    return (
        f"{low} samples each"
        if low == high and low > 1
        else f"{low} to {high} samples each"
        if low != high
        else "1 sample each"
    )
