"""Units at the end of feature names, as in ``glucose [mmol/l]``."""

from __future__ import annotations

import re

_SCALED = r"[fpn\u00b5\u03bcumckdM]?(?:g|mol|M|[lL]|I?U|Eq|kat|cells?|ngul|m|s)"
_PER = (
    r"(?:\s?/\s?(?:\d+\s?)?(?:[fpn\u00b5\u03bcumckd]?(?:g|mol|[lL])|h|min|s|d|cells?|\d+)(?:\s?[A-Za-z]+)?)"
)
_UNIT = rf"(?:%|\u2030|pp[mbt]|a\.?u\.?|{_SCALED}{_PER}?|{_SCALED}\s?[A-Za-z]+\^?-1)"
_NAMED = re.compile(rf".*\S\s*(?:\[({_UNIT})\]|\(({_UNIT})\))\s*", re.DOTALL)


def unit_of(name: str) -> str:
    """Return the unit in brackets at the end of a name, or an empty text.

    >>> unit_of("Glucose [mmol/l]"), unit_of("CRP (mg/dL)"), unit_of("PC(18:0)"), unit_of("Fe")
    ('mmol/l', 'mg/dL', '', '')
    """
    found = _NAMED.fullmatch(name)
    return (found[1] or found[2]) if found else ""
