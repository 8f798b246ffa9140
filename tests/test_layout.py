"""The house: what stands where, and which part may import which."""

import ast
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent
PACKAGE = ROOT / "workbench"

ORDER = [
    *(
        "errors",
        "engine",
        "settings",
        "store",
        "compute",
        "intake",
        "prepare",
        "checks",
        "network",
        "pathways",
    ),
    *("look", "figures", "report", "workflow", "project", "cli", "guide", "__main__"),
]
COMMON = "modules of the part itself"
INSIDE = {
    "engine": {
        COMMON: set(),
        **{name: {COMMON} for name in ("look", "pairs", "canonical", "supervised", "swaps")},
        "private": {COMMON, "pairs"},
        "evidence": {COMMON, "pairs", "private"},
    },
    "workflow": {
        COMMON: set(),
        "entry": {COMMON},
        **{name: {COMMON, "entry"} for name in ("canonical", "supervised", "network")},
        "followup": {COMMON, "entry", "network"},
    },
}
TOPMOST = {"plan", "status", "integrating"}
TOP = {"README.md", "DEVELOPERS.md", "pyproject.toml", "workbench", "tests", "templates", "example_project"}


def part_of(module):
    """Return the part that a dotted name below ``workbench`` belongs to; None for the package itself."""
    names = module.split(".")
    return names[1] if len(names) > 1 else None


def imports_of(path):
    """Yield (line, dotted name) of every import of the package, also those inside functions."""
    for node in ast.walk(ast.parse(path.read_text("utf-8"))):
        if isinstance(node, ast.Import):
            yield from (
                (node.lineno, alias.name) for alias in node.names if alias.name.startswith("workbench")
            )
        elif isinstance(node, ast.ImportFrom) and (node.module or "").startswith("workbench"):
            for alias in node.names:
                yield (
                    node.lineno,
                    f"{node.module}.{alias.name}" if node.module == "workbench" else node.module,
                )


def modules():
    return sorted(path for path in PACKAGE.rglob("*.py") if path != PACKAGE / "__init__.py")


@pytest.mark.parametrize("path", modules(), ids=lambda path: str(path.relative_to(PACKAGE)))
def test_a_part_imports_only_from_the_parts_above_it(path):
    own = path.relative_to(PACKAGE).parts[0].removesuffix(".py")
    for line, module in imports_of(path):
        part = part_of(module)
        if part is None or part == "__version__" or (own == "__main__" and part == "cli"):
            continue
        assert part in ORDER, f"{path}:{line} imports the unknown part {part}"
        assert ORDER.index(part) <= ORDER.index(own), f"{path}:{line}: {own} imports {part}"


@pytest.mark.parametrize("part", INSIDE)
def test_inside_a_part_imports_run_one_way(part):
    for path in sorted((PACKAGE / part).rglob("*.py")):
        if path.name == "__init__.py" or (path.parent.name == part and path.stem in TOPMOST):
            continue
        own = COMMON if path.parent.name == part else path.parent.name
        for line, module in imports_of(path):
            names = module.split(".")
            if len(names) < 3 or names[1] != part:
                continue
            other = names[2] if names[2] in INSIDE[part] else COMMON
            assert other == own or other in INSIDE[part][own], f"{path}:{line}: {own} imports {other}"


@pytest.mark.parametrize("part", INSIDE)
def test_every_folder_inside_a_part_is_named(part):
    folders = {path.parent.name for path in (PACKAGE / part).rglob("*.py")} - {part}
    assert folders == set(INSIDE[part]) - {COMMON}


def test_the_order_names_every_part():
    parts = {path.relative_to(PACKAGE).parts[0].removesuffix(".py") for path in modules()}
    assert parts <= set(ORDER)


def test_the_engine_knows_no_files_and_no_tables():
    for path in sorted((PACKAGE / "engine").rglob("*.py")):
        for node in ast.walk(ast.parse(path.read_text("utf-8"))):
            names = [alias.name for alias in node.names] if isinstance(node, ast.Import) else []
            if isinstance(node, ast.ImportFrom):
                names = [node.module or ""]
            assert not {"pandas", "anndata", "pathlib", "io", "os"} & {
                name.split(".")[0] for name in names
            }, path


def test_init_files_list_names_and_do_nothing():
    for path in sorted(PACKAGE.rglob("*/__init__.py")):
        for node in ast.parse(path.read_text("utf-8")).body:
            allowed = isinstance(node, ast.Import | ast.ImportFrom | ast.Assign | ast.Expr)
            assert allowed, f"{path}:{node.lineno} does something"


def test_the_top_level_holds_what_was_agreed_and_nothing_else():
    here = {path.name for path in ROOT.iterdir() if not path.name.startswith(".")}
    assert here - {"dist", "build"} == TOP
