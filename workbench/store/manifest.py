"""The manifest: the sha256 of every file that the program wrote, and what each stage was made from."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from workbench.errors import DamageError
from workbench.store.paths import ProjectPaths

FORMAT = 1
"""Version of the manifest that this program reads and writes."""

MANIFEST_NAME = "manifest.json"


@dataclass(frozen=True)
class StageRecord:
    """What a stage was made from and what it wrote.

    Attributes
    ----------
    inputs : mapping of str to str
        Name of each input and its sha256 (of a file, or of the settings that count).
    outputs : tuple of str
        Files that the stage wrote, relative to the project.
    """

    inputs: Mapping[str, str]
    outputs: tuple[str, ...] = ()


@dataclass(frozen=True)
class Manifest:
    """The files that the program wrote and the stages that are done.

    Attributes
    ----------
    files : mapping of str to str
        Relative path and sha256.
    stages : mapping of str to StageRecord
    """

    files: Mapping[str, str] = field(default_factory=dict)
    stages: Mapping[str, StageRecord] = field(default_factory=dict)


def manifest_path(root: Path) -> Path:
    """Return where a project's manifest stands."""
    return ProjectPaths(root).hidden / MANIFEST_NAME


def manifest_bytes(manifest: Manifest) -> bytes:
    """Return the manifest as JSON: sorted, without dates, so that equal manifests are equal files."""
    stages = {
        name: {"inputs": dict(stage.inputs), "outputs": list(stage.outputs)}
        for name, stage in manifest.stages.items()
    }
    content = {"format": FORMAT, "files": dict(manifest.files), "stages": stages}
    return (json.dumps(content, indent=1, sort_keys=True) + "\n").encode()


def read_manifest(root: Path) -> Manifest:
    """Return a project's manifest; a missing one is an empty one.

    Raises
    ------
    DamageError
        When the file is damaged, or was written by a newer version of the program.
    """
    path = manifest_path(root)
    try:
        data = path.read_bytes()
    except FileNotFoundError:
        return Manifest()
    except OSError as error:
        raise DamageError(
            f"{path}: cannot be read ({error.strerror}); give yourself the right to read it"
        ) from error
    return parse_manifest(data, path)


def parse_manifest(data: bytes, path: Path) -> Manifest:
    """Return the manifest that some bytes hold; ``path`` is for the messages.

    Raises
    ------
    DamageError
        When the bytes are not a manifest of this version.
    """
    try:
        content = json.loads(data)
        if (
            isinstance(content, dict)
            and isinstance(content.get("format"), int)
            and content["format"] > FORMAT
        ):
            raise _newer(path, content["format"])
        return _manifest_of(content)
    except (ValueError, KeyError, TypeError, RecursionError) as error:
        raise DamageError(
            f"{path}: the list of stored files is damaged; delete this file: what is derived then counts as "
            f"out of date, and `workbench run` makes it again from the sources"
        ) from error


def _newer(path: Path, version: int) -> DamageError:
    return DamageError(
        f"{path}: written by a newer version of this program (format {version}, this one reads {FORMAT}); "
        f"install the newer version"
    )


def _manifest_of(content: Any) -> Manifest:
    if (
        not isinstance(content, dict)
        or set(content) != {"format", "files", "stages"}
        or content["format"] != FORMAT
    ):
        raise ValueError("not a manifest")
    stages = {
        str(name): StageRecord(_texts(stage["inputs"]), tuple(_texts(dict.fromkeys(stage["outputs"], ""))))
        for name, stage in content["stages"].items()
    }
    return Manifest(_texts(content["files"]), stages)


def _texts(value: Any) -> dict[str, str]:
    if not isinstance(value, dict) or not all(isinstance(t, str) for pair in value.items() for t in pair):
        raise ValueError("not texts")
    return dict(value)
