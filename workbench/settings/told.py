"""One fault of the settings in plain words: what is wrong, what is allowed, the nearest valid spelling."""

from __future__ import annotations

import re
from typing import Any, get_args, get_origin

from pydantic import BaseModel
from pydantic_core import ErrorDetails

from workbench.settings.names import hint

Key = tuple[str | int, ...]

_BARE = re.compile(r"[A-Za-z0-9_-]+")
_QUOTED = re.compile(r"'([^']*)'")

_WORDS = {
    "string_type": "a text in quotes",
    "int_type": "a whole number",
    "float_type": "a number",
    "bool_type": "true or false",
    "tuple_type": "a list of texts, like [\"a\", \"b\"]",
    "dict_type": "a table, like { NAME = VALUE }",
    "model_type": "a table of keys",
    "finite_number": "a finite number",
}  # fmt: skip

BOUNDS = {
    "greater_than": ("gt", "above"),
    "greater_than_equal": ("ge", "from"),
    "less_than": ("lt", "below"),
    "less_than_equal": ("le", "up to"),
}


def key_of(fault: ErrorDetails) -> Key:
    """Return the key of a fault without pydantic's own marks."""
    return tuple(part for part in fault["loc"] if part != "[key]")


def key_text(key: tuple[str | int, ...]) -> str:
    """Return a key as it is written in TOML, with the place in a list counted from 1.

    Examples
    --------
    >>> key_text(("samples", "exclude", "S 07"))
    'samples.exclude."S 07"'
    >>> key_text(("samples", "adjust", 0))
    'samples.adjust, item 1'
    """
    text = ""
    for part in key:
        if isinstance(part, int):
            text += f", item {part + 1}"
        else:
            quoted = (
                part if _BARE.fullmatch(part) else '"' + part.replace("\\", "\\\\").replace('"', '\\"') + '"'
            )
            text += f".{quoted}" if text else quoted
    return text or "(the whole file)"


def told(fault: ErrorDetails, root: type[BaseModel]) -> str:
    """Return what is wrong with one key, and what is allowed.

    Parameters
    ----------
    fault : dict
        One of pydantic's errors.
    root : subclass of BaseModel
        The model that was validated; the fault's key leads from it.
    """
    key, kind, given = key_of(fault), fault["type"], fault["input"]
    context: dict[str, Any] = fault.get("ctx", {})
    if kind == "extra_forbidden":
        return _unknown_key(key, root)
    if kind == "missing":
        return _missing_key(key, root)
    if kind == "literal_error":
        allowed = _literals(context)
        spelt = hint(given, allowed) if isinstance(given, str) else ""
        return f"{_shown(given)} is not allowed; allowed: {', '.join(map(repr, allowed))}{spelt}"
    if kind in BOUNDS:
        return f"{_shown(given)} is out of range; allowed: {_range(key, root)}"
    if kind in _WORDS:
        return f"must be {_WORDS[kind]}, got {_shown(given)}"
    return fault["msg"]


def _unknown_key(key: Key, root: type[BaseModel]) -> str:
    allowed = sorted(_keys_of(_model_at(key[:-1], root)))
    return f"unknown key; allowed: {', '.join(allowed)}{hint(str(key[-1]), allowed)}"


def _missing_key(key: Key, root: type[BaseModel]) -> str:
    model = _model_at(key[:-1], root)
    annotation = None if model is None else model.model_fields[str(key[-1])].annotation
    choices = [choice for choice in get_args(annotation) if isinstance(choice, str)]
    allowed = f"; allowed: {', '.join(map(repr, choices))}" if choices else ""
    return f"is missing; add a line {key[-1]} = ...{allowed}"


def _literals(context: dict[str, Any]) -> list[str]:
    return _QUOTED.findall(str(context.get("expected", ""))) or [str(context.get("expected", ""))]


def _shown(given: Any) -> str:
    if isinstance(given, bool):
        return "true" if given else "false"
    text = repr(given)
    return text if len(text) <= 60 else f"{text[:57]}..."


def _range(key: Key, root: type[BaseModel]) -> str:
    """Return the bounds of a number, as the schema states them."""
    model = _model_at(key[:-1], root)
    limits = [] if model is None else model.model_fields[str(key[-1])].metadata
    told = []
    for sign, words in BOUNDS.values():
        told += [f"{words} {getattr(limit, sign)}" for limit in limits if hasattr(limit, sign)]
    return " and ".join(told)


def _keys_of(model: type[BaseModel] | None) -> list[str]:
    return [] if model is None else list(model.model_fields)


def _model_at(key: Key, root: type[BaseModel]) -> type[BaseModel] | None:
    """Return the table of the schema that a key leads to."""
    here: Any = root
    for part in key:
        if isinstance(here, type) and issubclass(here, BaseModel):
            field = here.model_fields.get(str(part))
            here = None if field is None else field.annotation
        elif get_origin(here) is dict:
            here = get_args(here)[1]
        elif get_origin(here) is tuple:
            here = get_args(here)[0]
        else:
            return None
    return here if isinstance(here, type) and issubclass(here, BaseModel) else None
