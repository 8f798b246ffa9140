"""The words of run sheets: what columns and roles are called here, and the other words that laboratories use."""

from __future__ import annotations

import re
from collections.abc import Sequence
from pathlib import Path

from workbench.errors import InputError

from .faults import listed, shown

ROLES = ("sample", "pool", "blank")
COLUMNS = ("run", "sample", "role", "order", "batch", "replicate")
NEEDED = ("run", "role")

# Headers and sample types as instrument software and laboratories write them (common practice; from memory).
_OTHER_COLUMNS = {
    "run": "runs run_name run_id file file_name filename raw_file rawfile injection_name injection_id",
    "sample": "sample_name samplename sample_id sampleid",
    "role": "roles type sample_type sampletype run_type",
    "order": "injection_order inj_order run_order acquisition_order injection_no",
    "batch": "batch_id batch_no batch_name",
    "replicate": "rep technical_replicate tech_rep",
}
_OTHER_ROLES = {
    "sample": "samples study_sample biological_sample unknown unk",
    "pool": "pools pooled pooled_qc qc_pool qc pqc quality_control",
    "blank": "blanks blk process_blank extraction_blank solvent_blank",
}


def plain_word(text: str) -> str:
    """Return a header or role in one case, its words joined by ``_``.

    >>> plain_word(" Injection Order")
    'injection_order'
    """
    return re.sub(r"[\s_\-]+", "_", text.strip().casefold()).strip("_")


def column_places(path: Path, names: Sequence[str]) -> dict[str, int]:
    """Return where the columns with a meaning stand: by their own word, else by another word for it.

    Raises
    ------
    InputError
        When a needed column is not there, or two columns have words of one meaning.
    """
    words = [plain_word(name) for name in names]
    places: dict[str, int] = {}
    for column in COLUMNS:
        found = [k for k, word in enumerate(words) if word == column]
        found = found or [k for k, word in enumerate(words) if word in _OTHER_COLUMNS[column].split()]
        if len(found) > 1:
            raise InputError(
                f"{path}: columns {listed([names[k] for k in found])} of the run sheet may both be the {column}; "
                f"name one of them '{column}'"
            )
        if found:
            places[column] = found[0]
    lacking = [column for column in NEEDED if column not in places]
    if lacking:
        raise InputError(
            f"{path}: a run sheet has the columns 'run' and 'role' (and sample, order, batch, replicate where "
            f"known); it lacks {listed(lacking)} and has {listed(names)}; name its columns so"
        )
    return places


def role_of(text: str) -> str | None:
    """Return the role that a cell stands for; None when it is none.

    >>> role_of("Pooled QC"), role_of("Unknown"), role_of("pol")
    ('pool', 'sample', None)
    """
    word = plain_word(text)
    return next((role for role in ROLES if word == role or word in _OTHER_ROLES[role].split()), None)


def word_notes(names: Sequence[str], places: dict[str, int], roles: Sequence[str]) -> list[str]:
    """Return sentences on columns and roles that were read from other words."""
    columns = [
        f"{shown(names[k])} as {column}" for column, k in places.items() if plain_word(names[k]) != column
    ]
    cells = dict.fromkeys(cell.strip() for cell in roles)
    words = [f"{shown(cell)} as {role_of(cell)}" for cell in cells if plain_word(cell) not in ROLES]
    told = [f"columns read: {', '.join(columns)}"] if columns else []
    return [*told, *([f"roles read: {', '.join(words)}"] if words else [])]
