"""The settings against what they speak of: the sample sheet, the files, each other."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from pathlib import Path, PurePosixPath
from typing import TYPE_CHECKING

from workbench.settings.faults import key_text
from workbench.settings.names import hint
from workbench.settings.schema import BlockSettings, Settings

if TYPE_CHECKING:
    import pandas as pd

_FILE = "project.toml"
_MISSING = frozenset(["", "NA", "NaN", "nan", "N/A", "#N/A", "null", "NULL", "<NA>", "NaT"])
"""Cells of a sample sheet that stand for a missing value."""

_SHOWN = 12
"""Allowed names that a fault lists at most; a sheet may have hundreds of samples."""


RunColumns = Mapping[str, Sequence[str]]
"""For a block with a run sheet, the run sheet's columns."""


def cross_check(
    settings: Settings, sheet: pd.DataFrame, root: Path, run_columns: RunColumns | None = None
) -> list[str]:
    """Return every fault of the settings against what they name, a line each; an empty list is none.

    Parameters
    ----------
    settings : Settings
    sheet : DataFrame
        The sample sheet: one row per sample, named by the index (whose name is the id column).
    root : Path
        The project's directory.
    run_columns : mapping of str to sequence of str, optional
        For blocks with a run sheet, its columns: a block's ``adjust`` may name them too. The columns of a run
        sheet that is not given here are not known, and what may be one of them is no fault.

    Notes
    -----
    Looked at: columns of the sheet (``group``, ``subject``, ``adjust``, ``kinds``, ``order``, a block's
    ``adjust``), levels in ``order``, excluded and swapped samples, blocks and layers of an analysis that lists
    its blocks, and files. An analysis over ``"all"`` blocks is possible or not as blocks come and go: no fault
    of the settings.
    """
    samples, columns = _samples_of(settings, sheet), list(map(str, sheet.columns))
    known = {} if run_columns is None else run_columns
    faults = list(_sample_faults(settings, sheet, samples, columns))
    faults += _kind_faults(settings, columns, known)
    for name, block in settings.blocks.items():
        faults += _block_faults(settings, name, samples, root)
        if block.runs is None or name in known:
            faults += _block_adjust_faults(
                settings, name, list(dict.fromkeys([*columns, *known.get(name, ())]))
            )
    for name in settings.analyses:
        faults += _analysis_faults(settings, name)
        faults += _method_faults(settings, name, columns)
        faults += _pathway_faults(settings, name, root)
    return faults


def _fault(key: tuple[str | int, ...], told: str) -> str:
    return f"{_FILE}: {key_text(key)}: {told}"


def _samples_of(settings: Settings, sheet: pd.DataFrame) -> list[str]:
    if settings.samples.id in sheet.columns and sheet.index.name != settings.samples.id:
        return [str(name) for name in sheet[settings.samples.id]]
    return [str(name) for name in sheet.index]


def _sample_faults(
    settings: Settings, sheet: pd.DataFrame, samples: Sequence[str], columns: Sequence[str]
) -> Iterator[str]:
    chosen = settings.samples
    if chosen.id not in columns and sheet.index.name != chosen.id:
        known = [*([str(sheet.index.name)] if sheet.index.name else []), *columns]
        yield _fault(("samples", "id"), _unknown(chosen.id, known, "column of samples.tsv"))
    parts: dict[str, Iterable[str]] = {
        "group": chosen.group,
        "subject": [] if chosen.subject is None else [chosen.subject],
        "time": [] if chosen.time is None else [chosen.time],
        "adjust": chosen.adjust,
    }
    for part, names in parts.items():
        for name in names:
            yield from _column_faults(("samples", part), name, settings, columns)
    yield from _part_faults(settings)
    yield from _order_faults(settings, sheet, samples, columns)
    yield from _excluded_faults(("samples", "exclude"), chosen.exclude, samples)


def _column_faults(
    key: tuple[str, ...],
    name: str,
    settings: Settings,
    columns: Sequence[str],
    what: str = "column of samples.tsv",
) -> Iterator[str]:
    if name == settings.samples.id:
        yield _fault(
            key, f"{name!r} is the column of the sample's name; allowed: another column of samples.tsv"
        )
    elif name not in columns:
        yield _fault(key, _unknown(name, columns, what))


def _part_faults(settings: Settings) -> Iterator[str]:
    """One column plays one part: the factor of interest is no nuisance, nor is the subject."""
    chosen = settings.samples
    if chosen.time is not None and chosen.subject is None:
        yield _fault(
            ("samples", "time"), "orders the samples of one subject, and no subject is named; add subject"
        )
    for name in chosen.adjust:
        if name in chosen.group:
            yield _fault(("samples", "adjust"), f"{name!r} is the group as well; take it out of one of them")
        if name == chosen.subject:
            yield _fault(
                ("samples", "adjust"), f"{name!r} is the subject as well; take it out of one of them"
            )
    if chosen.subject is not None and chosen.subject in chosen.group:
        yield _fault(
            ("samples", "subject"), f"{chosen.subject!r} is the group as well; take it out of one of them"
        )


def _kind_faults(settings: Settings, columns: Sequence[str], run_columns: RunColumns) -> Iterator[str]:
    used = [*settings.samples.adjust, *(name for block in settings.blocks.values() for name in block.adjust)]
    of_runs = {name for own in run_columns.values() for name in own}
    unknown = [block for name, block in settings.blocks.items() if block.runs and name not in run_columns]
    of_runs.update(name for block in unknown for name in block.adjust)
    for name in settings.samples.kinds:
        if name not in columns and name not in of_runs:
            yield _fault(("samples", "kinds", name), _unknown(name, columns, "column of samples.tsv"))
        elif name not in used:
            told = f"no adjust names this column; allowed: {_listed(used)}{hint(name, used)}"
            yield _fault(("samples", "kinds", name), told)


def _order_faults(
    settings: Settings, sheet: pd.DataFrame, samples: Sequence[str], columns: Sequence[str]
) -> Iterator[str]:
    chosen = settings.samples
    for factor, order in chosen.order.items():
        key = ("samples", "order", factor)
        allowed = [*chosen.group, *([] if chosen.time is None else [chosen.time])]
        if factor not in allowed:
            yield _fault(
                key, f"is not the group or the time; allowed: {_listed(allowed)}{hint(factor, allowed)}"
            )
        elif factor in columns:
            pairs = zip(samples, sheet[factor].tolist(), strict=True)
            cells = [(sample, level_text(cell)) for sample, cell in pairs]
            known = list(dict.fromkeys(level for _, level in cells if level is not None))
            needed = {level for sample, level in cells if sample not in chosen.exclude}
            yield from (_fault(key, _unknown(level, known, "level")) for level in order if level not in known)
            lacking = [level for level in known if level in needed and level not in order]
            if lacking:
                yield _fault(key, f"lacks {_listed(lacking)}; name every level of {factor!r} once")


def level_text(cell: object) -> str | None:
    """Return a level as it is written in the settings; None for a missing one.

    Examples
    --------
    >>> level_text(2.0), level_text("drought"), level_text(float("nan"))
    ('2', 'drought', None)
    """
    if isinstance(cell, float):
        return None if cell != cell else str(int(cell)) if cell.is_integer() else str(cell)
    text = str(cell).strip()
    return None if cell is None or text in _MISSING else text


def _excluded_faults(
    key: tuple[str, ...], exclude: Mapping[str, str], samples: Sequence[str]
) -> Iterator[str]:
    for sample in exclude:
        if sample not in samples:
            yield _fault((*key, sample), _unknown(sample, samples, "sample of samples.tsv"))
    if samples and set(samples) <= set(exclude):
        yield _fault(key, "leaves out every sample; take some out of it")


def _block_faults(settings: Settings, name: str, samples: Sequence[str], root: Path) -> Iterator[str]:
    key, block = ("blocks", name), settings.blocks[name]
    for entry in ("file", "annotations", "names", "runs"):
        file = getattr(block, entry)
        told = None if file is None else file_fault(root, file)
        if told is not None:
            yield _fault((*key, entry), told)
    yield from _excluded_faults((*key, "exclude"), block.exclude, samples)
    yield from _swap_faults((*key, "swap"), block, samples)


def _block_adjust_faults(settings: Settings, name: str, columns: Sequence[str]) -> Iterator[str]:
    key, block = ("blocks", name, "adjust"), settings.blocks[name]
    what = "column of samples.tsv" if block.runs is None else "column of samples.tsv or the run sheet"
    for column in block.adjust:
        yield from _column_faults(key, column, settings, columns, what)
        if column in settings.samples.group:
            yield _fault(key, f"{column!r} is the group as well; take it out of one of them")


def _swap_faults(key: tuple[str, ...], block: BlockSettings, samples: Sequence[str]) -> Iterator[str]:
    named: dict[str, int] = {}
    for place, swap in enumerate(block.swap):
        for sample in swap.samples:
            if sample not in samples:
                yield _fault((*key, place, "samples"), _unknown(sample, samples, "sample of samples.tsv"))
            elif sample in named:
                told = f"{sample!r} is in item {named[sample] + 1} too; name each sample once: join the two chains"
                yield _fault((*key, place, "samples"), told)
            named.setdefault(sample, place)


def file_fault(root: Path, file: str) -> str | None:
    """Return what is wrong with a file that the settings name; None when nothing is.

    Allowed is a plain file inside the project, named relative to it with ``/``; also when a link stands
    on the way, what it leads to has to be inside.
    """
    parts = PurePosixPath(file).parts
    if (
        not parts
        or "\0" in file
        or "\\" in file
        or PurePosixPath(file).is_absolute()
        or ".." in parts
        or ":" in parts[0]
    ):
        return f"{file!r} leads out of the project; allowed: a path inside it, like 'source/table.tsv'"
    path = root / file
    if not path.exists():
        siblings = [f"{path.parent.relative_to(root).as_posix()}/{other}" for other in _names_in(path.parent)]
        return f"{file!r} is not there; put the file back, or name another{hint(file, siblings)}"
    if not path.resolve().is_relative_to(root.resolve()):
        return f"{file!r} is a link that leads out of the project; put a copy in its place"
    return None if path.is_file() else f"{file!r} is not a file; allowed: a file inside the project"


def _names_in(folder: Path) -> list[str]:
    try:
        return sorted(path.name for path in folder.iterdir() if not path.name.startswith("."))
    except OSError:
        return []


def _analysis_faults(settings: Settings, name: str) -> Iterator[str]:
    key = ("analyses", name, "blocks")
    chosen = settings.analyses[name].blocks
    if chosen == "all":
        return
    unknown = [block for block in chosen if block not in settings.blocks]
    for block in unknown:
        yield _fault(key, _unknown(block, settings.blocks, "block"))
    layers = {settings.blocks[block].layer for block in chosen if block in settings.blocks}
    if unknown:
        return
    if len(chosen) < 2:
        yield _fault(
            key, f"names {len(chosen)} block{'s' * (len(chosen) != 1)}; allowed: two or more, of two layers"
        )
    elif len(layers) < 2:
        yield _fault(
            key, f"all these blocks are of the layer {min(layers)!r}; allowed: blocks of two or more layers"
        )


def _method_faults(settings: Settings, name: str, columns: Sequence[str]) -> Iterator[str]:
    """Hold the method against the outcome, the level and the ridges that it takes."""
    key, chosen = ("analyses", name), settings.analyses[name]
    supervised = chosen.method == "multiblock_pls"
    if supervised and chosen.outcome is None:
        yield _fault(
            (*key, "outcome"), "is not given; multiblock_pls needs a column of samples.tsv or a block"
        )
    if not supervised and chosen.outcome is not None:
        yield _fault((*key, "outcome"), 'is for method = "multiblock_pls"; leave it out, or set the method')
    if chosen.outcome_kind is not None and chosen.outcome is None:
        yield _fault((*key, "outcome_kind"), "is for an outcome, and none is named; leave it out")
    if chosen.outcome is not None:
        yield from _outcome_faults((*key, "outcome"), settings, chosen.outcome, columns)
    if chosen.level is not None and settings.samples.subject is None:
        yield _fault(
            (*key, "level"),
            "is for several samples of one subject; name samples.subject "
            "(`add-samples FILE --subject COLUMN`), or leave it out",
        )
    layers = {settings.blocks[block].layer for block in settings.blocks_of(name)}
    if chosen.method == "ridge_cca" and len(layers) > 2:
        yield _fault(
            (*key, "method"),
            f"'ridge_cca' has two sides, and the blocks of this analysis are of {len(layers)} layers "
            f'({_listed(sorted(layers))}); write method = "auto", or list the blocks of two layers in blocks',
        )
    if isinstance(chosen.ridge, tuple) and layers and len(chosen.ridge) != len(layers):
        yield _fault(
            (*key, "ridge"),
            f"has {len(chosen.ridge)} numbers; allowed: one, or one per layer ({len(layers)})",
        )


def _outcome_faults(
    key: tuple[str, ...], settings: Settings, outcome: str, columns: Sequence[str]
) -> Iterator[str]:
    if outcome in columns and outcome in settings.blocks:
        yield _fault(key, f"{outcome!r} is a column of samples.tsv and a block; rename one of them")
    elif outcome not in columns and outcome not in settings.blocks:
        known = [*columns, *settings.blocks]
        yield _fault(key, _unknown(outcome, known, "column of samples.tsv or block"))
    elif outcome in (settings.samples.id, settings.samples.subject):
        yield _fault(key, f"{outcome!r} names samples or subjects; allowed: another column of samples.tsv")
    adjusting = [name for name in settings.blocks_of(key[1]) if outcome in settings.blocks[name].adjust]
    where = ["[samples]"] * (outcome in settings.samples.adjust) + [f"[blocks.{name}]" for name in adjusting]
    if where and outcome in columns:
        told = f"{outcome!r} is nuisance as well (adjust of {', '.join(where)}) and would be removed"
        yield _fault(key, f"{told}; take it out of one of them")


def _pathway_faults(settings: Settings, name: str, root: Path) -> Iterator[str]:
    chosen = settings.analyses[name].pathways
    for entry in ("sets", "links"):
        file = getattr(chosen, entry)
        told = None if file is None else file_fault(root, file)
        if told is not None:
            yield _fault(("analyses", name, "pathways", entry), told)


def _unknown(name: str, known: Iterable[str], what: str) -> str:
    known = list(known)
    return f"there is no {what} {name!r}; allowed: {_listed(known)}{hint(name, known)}"


def _listed(names: Iterable[str]) -> str:
    names = list(names)
    shown = ", ".join(map(repr, names[:_SHOWN])) or "none"
    return shown if len(names) <= _SHOWN else f"{shown} and {len(names) - _SHOWN} more"
