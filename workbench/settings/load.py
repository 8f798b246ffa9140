"""Reading ``project.toml``: text, TOML, schema; all faults in one go."""

from __future__ import annotations

import re
import tomllib
from pathlib import Path
from typing import Any

from pydantic import ValidationError

from workbench.errors import SettingsError
from workbench.settings.faults import fault_lines
from workbench.settings.schema import Settings

LARGEST = 4_000_000
"""Bytes of a ``project.toml`` that are read; a real one has a few thousand."""

_PLACE = re.compile(r"\s*\(at (?:line (?P<line>\d+), column (?P<column>\d+)|end of document)\)$")

_PLAIN_WORDS = (
    (re.compile(r"Cannot overwrite a value"), "this key stands there twice; take one of them out"),
    (re.compile(r"Cannot declare (?P<what>.+) twice"), "this table stands there twice; join the two"),
    (re.compile(r"Duplicate inline table key (?P<what>.+)"), "a key stands twice between these braces"),
    (re.compile(r"Invalid value"), "this is no value; text needs quotes: \"...\""),
    (re.compile(r"Expected '=' after a key"), "a key needs '=' and a value"),
    (re.compile(r"Invalid statement"), "this is neither KEY = VALUE nor [TABLE]"),
    (re.compile(r"Unterminated string|Expected \"'\"|Illegal character '\\n'"), "a text lacks its closing quote"),
    (re.compile(r"Unclosed array"), "a list lacks its comma or its closing ']'"),
    (re.compile(r"Unclosed inline table"), "a table lacks its comma or its closing '}'"),
    (re.compile(r"Expected newline or end of document"), "something stands after the value; text needs quotes"),
)  # fmt: skip


def load_settings(path: Path) -> Settings:
    """Return what a ``project.toml`` holds.

    Raises
    ------
    SettingsError
        With every fault, a line each: file, key (or line and column), what is wrong, what is allowed.
    """
    return parse_settings(read_settings_text(path), path)


def read_settings_text(path: Path) -> str:
    """Return the text of a ``project.toml`` as it stands, its line ends unchanged.

    Raises
    ------
    SettingsError
        When there is none, or it is not UTF-8.
    """
    try:
        data = path.read_bytes()
    except FileNotFoundError as error:
        raise SettingsError(
            [f"{path}: there is no such file; make a project with `workbench init DIR`"]
        ) from error
    except OSError as error:
        raise SettingsError([f"{path}: cannot be read ({error.strerror}); check its rights"]) from error
    if len(data) > LARGEST:
        raise SettingsError([f"{path}: has {len(data)} bytes; allowed: at most {LARGEST}"])
    if data.startswith((b"\xff\xfe", b"\xfe\xff")):
        raise SettingsError([f"{path}: is UTF-16; save it as UTF-8"])
    try:
        return data.decode()
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        column = error.start - data.rfind(b"\n", 0, error.start)
        fault = f"{path.name}: line {line}, column {column}: is not UTF-8; save the file as UTF-8"
        raise SettingsError([fault]) from error


def parse_settings(text: str, path: Path = Path("project.toml")) -> Settings:
    r"""Return what the text of a ``project.toml`` holds; ``path`` is for the messages.

    Raises
    ------
    SettingsError
        With every fault, a line each.

    Examples
    --------
    >>> parse_settings('[study]\ntitle = "Drought"').study.title
    'Drought'
    """
    data = parse_toml(text, path)
    try:
        return Settings.model_validate(data)
    except ValidationError as error:
        raise SettingsError(fault_lines(error, path.name)) from error


def parse_toml(text: str, path: Path) -> dict[str, Any]:
    """Return the tables of a TOML text.

    Raises
    ------
    SettingsError
        When it is not TOML, with line and column.
    """
    try:
        return tomllib.loads(text.removeprefix("\ufeff"))
    except tomllib.TOMLDecodeError as error:
        raise SettingsError([_syntax_fault(str(error), text, path)]) from error
    except RecursionError as error:
        raise SettingsError(
            [f"{path.name}: lists or tables are nested too deep; allowed: a few levels"]
        ) from error


def _syntax_fault(message: str, text: str, path: Path) -> str:
    """Return where a text is not TOML, why, and how the line reads."""
    lines = text.removeprefix("\ufeff").splitlines() or [""]
    place = _PLACE.search(message)
    reason = _PLACE.sub("", message)
    plain = next((words for pattern, words in _PLAIN_WORDS if pattern.match(reason)), reason)
    number = int(place["line"]) if place and place["line"] else len(lines)
    column = int(place["column"]) if place and place["column"] else len(lines[-1]) + 1
    shown = lines[min(number, len(lines)) - 1].strip()
    return f"{path.name}: line {number}, column {column}: {plain}; the line reads: {shown[:80]}"
