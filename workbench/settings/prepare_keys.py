"""The keys of ``[blocks.NAME.prepare]`` in words, for the handbook and for the account of a preparation."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, get_args

from workbench.settings.prepare_schema import preparation_model
from workbench.settings.told import BOUNDS, key_text


@dataclass(frozen=True)
class PrepareKey:
    """One key of ``[blocks.NAME.prepare]`` for a handbook.

    Attributes
    ----------
    key, default, allowed : str
        As written in TOML.
    reason : str
        What it does, and why the default is the default.
    """

    key: str
    default: str
    allowed: str
    reason: str


def prepare_keys(layer: str, values: str) -> tuple[PrepareKey, ...]:
    """Return every key that a block of this layer and these values may have.

    Examples
    --------
    >>> [key.key for key in prepare_keys("methylation", "beta")]
    ['seen_share', 'offset']
    """
    fields = preparation_model(layer, values).model_fields
    return tuple(
        PrepareKey(
            name,
            toml_text(field.get_default(call_default_factory=True)),
            _allowed(name, field),
            _plain(field),
        )
        for name, field in fields.items()
    )


def toml_text(value: Any) -> str:
    """Return a value as it is written in TOML.

    >>> toml_text(True), toml_text(("a", "b")), toml_text({"x": ("lo", "hi")}), toml_text(0.3)
    ('true', '["a", "b"]', '{ x = ["lo", "hi"] }', '0.3')
    """
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return '"' + value.replace("\\", "\\\\").replace('"', '\\"') + '"'
    if isinstance(value, Mapping):
        pairs = ", ".join(f"{key_text((key,))} = {toml_text(item)}" for key, item in value.items())
        return f"{{ {pairs} }}" if pairs else "{ }"
    if isinstance(value, list | tuple):
        return f"[{', '.join(map(toml_text, value))}]"
    return str(value)


def _plain(field: Any) -> str:
    return " ".join(str(field.description).split())


_OPEN = {
    "transform_features": '"all", "skewed", or a list of features',
    "ordered": "{ FEATURE = [levels, lowest first] }",
    "check_values": "true, false",
}


def _allowed(name: str, field: Any) -> str:
    if name in _OPEN:
        return _OPEN[name]
    choices = [toml_text(choice) for choice in get_args(field.annotation) if isinstance(choice, str)]
    if choices:
        return ", ".join(choices)
    limits = [
        f"{words} {getattr(limit, sign)}"
        for sign, words in BOUNDS.values()
        for limit in field.metadata
        if hasattr(limit, sign)
    ]
    kind = "a whole number" if field.annotation is int else "a number"
    return f"{kind} {' and '.join(limits)}"
