"""New projects: from a template into an empty folder."""

from __future__ import annotations

import difflib
import shutil
import tomllib
from dataclasses import dataclass
from pathlib import Path

import tomlkit

from workbench.errors import InputError
from workbench.store import Change, ProjectPaths, project_lock
from workbench.store.paths import HIDDEN_NAME

DEFAULT_TEMPLATE = "two-layers"


@dataclass(frozen=True)
class Template:
    """One project template: its name, title, what it is for, and its folder."""

    name: str
    title: str
    about: str
    folder: Path


def templates_folder() -> Path:
    """Return the folder of the templates: inside the installed package, or beside it in a checkout."""
    package = Path(__file__).resolve().parents[2]
    for folder in (package / "templates", package.parent / "templates"):
        if folder.is_dir():
            return folder
    raise InputError(f"{package}: the templates are missing from this installation; install it again")


def templates() -> dict[str, Template]:
    """Return the templates by name."""
    found = {}
    for folder in sorted(templates_folder().iterdir()):
        if (folder / "template.toml").exists():
            about = tomllib.loads((folder / "template.toml").read_text("utf-8"))
            found[folder.name] = Template(folder.name, about["title"], about["about"], folder)
    return found


def create_project(folder: Path, *, template: str = DEFAULT_TEMPLATE, title: str = "") -> ProjectPaths:
    """Make a project in a new or empty folder and return its paths."""
    known = templates()
    if template not in known:
        near = difflib.get_close_matches(template, known, 1)
        hint = f"; did you mean '{near[0]}'?" if near else ""
        raise InputError(f"no template '{template}'; known: {', '.join(known)}{hint}")
    _require_empty(folder)
    text = tomlkit.parse((known[template].folder / "project.toml").read_text("utf-8"))
    text["study"]["title"] = title or folder.resolve().name
    made = not folder.exists()
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise InputError(f"{folder}: cannot be made ({error.strerror}); choose another place") from error
    paths = ProjectPaths(folder.resolve())
    try:
        _fill(paths, tomlkit.dumps(text), template)
    except BaseException:
        if made:
            shutil.rmtree(folder, ignore_errors=True)
        raise
    return paths


def _fill(paths: ProjectPaths, settings: str, template: str) -> None:
    with project_lock(paths.root, "init"), Change(paths.root) as change:
        change.write_text("project.toml", settings)
        change.commit({"command": "init", "template": template})
    paths.source.mkdir(exist_ok=True)


def _require_empty(folder: Path) -> None:
    if folder.exists() and not folder.is_dir():
        raise InputError(f"{folder}: a file, not a folder; name a new or an empty folder")
    if folder.is_dir() and any(path.name != HIDDEN_NAME for path in folder.iterdir()):
        raise InputError(
            f"{folder}: the folder is not empty; name a new or an empty one, nothing was changed"
        )
