"""What the design can tell: groups and batches that go together, small groups, samples that tell nothing."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy.stats import t as student

from workbench.checks.data import CheckedBlock, StudyData, shared_rows
from workbench.checks.evidence import CrossTable
from workbench.checks.finding import Finding, Severity, accept_line, adjust_line, exclude_line, finding_id
from workbench.checks.sheet_columns import SheetColumn, read_column, unused_columns
from workbench.checks.words import percent, some
from workbench.engine.nuisance import Nuisance, aliased
from workbench.intake.faults import counted
from workbench.intake.suggest import suggest_columns

FloatArray = NDArray[np.float64]

CHECK = "tangled_design"
NEARLY = 0.25
SMALLEST_GROUP = 3
UNEQUAL = 4.0
LEAST_FREEDOM = 3
LITTLE_FREEDOM = 5
NO_ROOM = 1e-8
ONE_PAIR, MANY_PAIRS = 0.05, 1e-6


@dataclass(frozen=True, eq=False)
class Unit:
    """Samples that are analysed together, with the design that is taken from them.

    ``block`` is "" for the study, else the block that the design belongs to; ``words`` names the blocks;
    ``unread`` says that the design could not be read, which is a finding of its own.
    """

    block: str
    words: str
    samples: tuple[str, ...]
    columns: pd.DataFrame
    adjust: tuple[str, ...]
    nuisance: FloatArray
    nuisance_names: tuple[str, ...]
    group_codes: NDArray[np.intp]
    group_levels: tuple[str, ...]
    factors: str
    unread: bool = False

    @property
    def group(self) -> FloatArray:
        """Indicators of the groups that occur but the first of them."""
        used = np.unique(self.group_codes)
        return np.asarray(self.group_codes[:, None] == used[1:], dtype=np.float64)

    def nuisance_of(self, column: str) -> FloatArray:
        """Return the nuisance columns that come from one column of the sheet."""
        own = [name == column or name.startswith(f"{column}=") for name in self.nuisance_names]
        return self.nuisance[:, own]


def check_design(data: StudyData) -> list[Finding]:
    """Find what the design cannot tell apart, or only just.

    Looked at are the samples that two blocks of different layers share, with the nuisance of both; pairs of
    blocks with one design are told once. Errors: a column that is adjusted for and tells the same as the
    group or as other columns; fewer than three degrees of freedom. Warnings: less than a quarter of the
    difference between groups is free of the nuisance; a batch column that is not named and tells the group;
    a group of fewer than three samples; several samples of one subject.
    """
    found = [finding for unit in units(data) for finding in _of_unit(data, unit)]
    found += _unnamed(data) + _subjects(data) + _unread(data)
    return list({finding.id: finding for finding in reversed(found)}.values())


def units(data: StudyData) -> Iterator[Unit]:
    """Yield the sets of samples that are analysed together, each design once."""
    seen: dict[tuple[str, ...], Unit] = {}
    blocks = list(data.blocks.values())
    pairs = data.pairs or tuple((block, block) for block in blocks)
    designs = {tuple(dict.fromkeys([*one.adjust, *other.adjust])) for one, other in pairs}
    for one, other in pairs:
        unit = _unit(data, one, other, alone=len(designs) == 1)
        if unit.adjust not in seen:
            seen[unit.adjust] = unit
    yield from seen.values()


def _unit(data: StudyData, one: CheckedBlock, other: CheckedBlock, alone: bool) -> Unit:
    rows, others = shared_rows(one, other)
    new = [k for k, name in enumerate(other.nuisance_names) if name not in one.nuisance_names]
    names = (*one.nuisance_names, *(other.nuisance_names[k] for k in new))
    words = f"block '{one.name}'" if one is other else f"blocks '{one.name}' and '{other.name}'"
    owner = one.name if one.settings.adjust else other.name
    return Unit(
        block="" if alone else owner,
        words=words,
        samples=one.take(rows),
        columns=one.columns.iloc[rows],
        adjust=tuple(dict.fromkeys([*one.adjust, *other.adjust])),
        nuisance=np.hstack([one.nuisance[rows], other.nuisance[others][:, new]]),
        nuisance_names=names,
        group_codes=one.group_codes[rows],
        group_levels=one.group_levels,
        factors="+".join(data.settings.samples.group),
        unread=bool(one.design_fault or other.design_fault),
    )


def _of_unit(data: StudyData, unit: Unit) -> list[Finding]:
    if len(unit.samples) < 2 or unit.unread:
        return []
    found = _aliased(data, unit)
    if unit.group_levels:
        found += _sizes(unit)
    if all(finding.severity != "error" for finding in found):
        freedom = _freedom(unit)
        if data.settings.samples.subject is not None:
            fewer = "; several samples of one subject leave fewer (`workbench plan`)"
            freedom = [replace(one, what=one.what + fewer) for one in freedom]
        found += (_nearly(unit) if unit.group_levels else []) + freedom
        found += _without_room(unit) if freedom[0].severity != "error" else []
    return found


def _aliased(data: StudyData, unit: Unit) -> list[Finding]:
    """Find columns of the design that others tell already: the analysis cannot be made."""
    group = [f"{unit.factors} (group)"] * unit.group.shape[1]
    both = np.hstack([unit.nuisance, unit.group])
    found = []
    for name in aliased(both, [*unit.nuisance_names, *group]):
        column = unit.factors if name.endswith(" (group)") else name.split("=")[0]
        culprits = _culprits(unit, column)
        do = "does not tell" if len(culprits) == 1 else "do not tell together"
        what = (
            f"column '{column}' tells nothing that {some(culprits)} {do} on the {len(unit.samples)} samples "
            f"of {unit.words}: their effects cannot be told apart, and the analysis stops"
        )
        which = f"'{culprits[0]}'" if len(culprits) == 1 else f"one of them, such as '{culprits[0]}',"
        todo = (
            f"take {which} out of adjust ({_without(data, culprits[0])}), which leaves its effect in that of "
            f"'{column}'; no analysis can part the two"
        )
        table = _table(unit, culprits[0]) if column == unit.factors else None
        identity = finding_id(CHECK, unit.block, column, *culprits)
        found.append(
            Finding(identity, CHECK, "error", unit.block, what, (), (), todo, table, acceptable=False)
        )
    return found


def _without(data: StudyData, column: str) -> str:
    """Return the adjust lines of the study and of the blocks that name a column, without it."""
    lines = []
    named = {"": data.settings.samples.adjust} | {
        name: block.settings.adjust for name, block in data.blocks.items()
    }
    for owner, columns in named.items():
        if column in columns:
            lines.append(adjust_line(owner, [one for one in columns if one != column]))
    return "; ".join(lines)


def _culprits(unit: Unit, column: str) -> list[str]:
    """Return the one adjusted column that tells all of ``column``, or all of them together."""
    wanted = unit.group if column == unit.factors else unit.nuisance_of(column)
    others = [one for one in unit.adjust if one != column]
    for one in others:
        if _share_left(wanted, unit.nuisance_of(one)) < NO_ROOM:
            return [one]
    return others or [column]


def _share_left(wanted: FloatArray, nuisance: FloatArray) -> float:
    """Return the smallest share that is left of any contrast of ``wanted`` outside the nuisance (0 to 1)."""
    centred = wanted - wanted.mean(axis=0)
    left, size, _ = np.linalg.svd(centred, full_matrices=False)
    directions = left[:, size > NO_ROOM * max(size.max(initial=0.0), 1e-300)]
    if directions.shape[1] == 0:
        return 1.0
    inside = np.linalg.svd(Nuisance.of(nuisance, len(wanted)).basis.T @ directions, compute_uv=False)
    return float(max(0.0, 1.0 - inside.max(initial=0.0) ** 2))


def _table(unit: Unit, column: str) -> CrossTable | None:
    read = read_column(column, unit.columns[column]) if column in unit.columns else None
    if read is None or not read.levels:
        return None
    counts = np.zeros((len(unit.group_levels), len(read.levels)), dtype=np.intp)
    held = (unit.group_codes >= 0) & (read.codes >= 0)
    np.add.at(counts, (unit.group_codes[held], read.codes[held]), 1)
    return CrossTable(unit.factors, unit.group_levels, column, read.levels, counts)


def _sizes(unit: Unit) -> list[Finding]:
    sizes = np.bincount(unit.group_codes, minlength=len(unit.group_levels))
    told = ", ".join(f"{level} {size}" for level, size in zip(unit.group_levels, sizes, strict=True))
    if np.count_nonzero(sizes) < 2:
        what = f"the {len(unit.samples)} samples of {unit.words} are of one group: {told}"
        todo = "take group out of [samples], or add samples of another group"
        identity = finding_id("one_group", unit.block, unit.factors)
        return [Finding(identity, "one_group", "error", unit.block, what, (), (), todo, acceptable=False)]
    smallest, largest = int(sizes.min()), int(sizes.max())
    if smallest >= SMALLEST_GROUP and largest < UNEQUAL * smallest:
        return []
    severity: Severity = "warning" if smallest < SMALLEST_GROUP else "note"
    check = "unbalanced_groups" if largest >= UNEQUAL * smallest else "small_groups"
    which = "groups of very unequal size" if check == "unbalanced_groups" else "groups of few samples"
    what = f"{which} among the {len(unit.samples)} samples of {unit.words}: {told}"
    todo = (
        "what is told of a small group rests on its few samples alone; add samples, or join groups where that makes "
        "sense"
    )
    return [
        Finding(finding_id(check, unit.block, unit.factors), check, severity, unit.block, what, (), (), todo)
    ]


def _nearly(unit: Unit) -> list[Finding]:
    """Find the nuisance column that nearly tells the group."""
    left = _share_left(unit.group, unit.nuisance)
    if left >= NEARLY:
        return []
    by_column = {one: _share_left(unit.group, unit.nuisance_of(one)) for one in unit.adjust}
    column = min(by_column, key=lambda one: by_column[one])
    what = (
        f"group '{unit.factors}' goes with what is adjusted for, most with '{column}': {percent(left)} of the "
        f"difference between groups is left to tell, as if {max(1, round(left * len(unit.samples)))} of "
        f"{len(unit.samples)} samples of {unit.words} had been measured in a balanced design"
    )
    identity = finding_id(CHECK, unit.block, unit.factors, column)
    todo = (
        "trust effects of the group little (pairs within groups are not touched); keep it with "
        f"{accept_line(identity)}"
    )
    return [Finding(identity, CHECK, "warning", unit.block, what, (), (), todo, _table(unit, column))]


def _freedom(unit: Unit) -> list[Finding]:
    n = len(unit.samples)
    rank = Nuisance.of(np.hstack([unit.nuisance, unit.group]), n).rank
    freedom = n - rank - 1
    parts = ["mean", *(["nuisance"] if unit.adjust else []), *(["group"] if unit.group_levels else [])]
    left = counted(freedom, "degree") + " of freedom" if freedom > 0 else "no degree of freedom"
    what = f"{n} samples of {unit.words} less {rank} for {_joined(parts)} leave {left} for a correlation"
    if freedom >= LEAST_FREEDOM:
        one, many = smallest_r(freedom, ONE_PAIR), smallest_r(freedom, MANY_PAIRS)
        what += (
            f": one pair alone passes from |r| {_as_r(one)} on (p {ONE_PAIR}), one among a million "
            f"from |r| {_as_r(many)} on (p {MANY_PAIRS:.0e})"
        )
    else:
        what += f", and {LEAST_FREEDOM} are the least"
    severity: Severity = (
        "error" if freedom < LEAST_FREEDOM else "warning" if freedom < LITTLE_FREEDOM else "note"
    )
    less = "take columns out of adjust that matter little, or " if unit.adjust else ""
    wanted = rank + 1 + (LEAST_FREEDOM if severity == "error" else LITTLE_FREEDOM)
    todo = "" if severity == "note" else f"{less}add samples: with this design {wanted} at least"
    identity = finding_id("degrees_of_freedom", unit.block, *unit.adjust)
    usable = severity != "error"
    return [
        Finding(identity, "degrees_of_freedom", severity, unit.block, what, (), (), todo, acceptable=usable)
    ]


def _joined(words: list[str]) -> str:
    return words[0] if len(words) == 1 else f"{', '.join(words[:-1])} and {words[-1]}"


def _as_r(value: float) -> str:
    """Return a correlation with two digits, with as many nines as it takes near 1."""
    digits = next(digits for digits in range(2, 16) if digits == 15 or round(value, digits) < 1.0)
    return f"{value:.{digits}f}"


def smallest_r(freedom: int, p: float) -> float:
    """Return the correlation whose two-sided p is the given one.

    >>> round(smallest_r(10, 0.05), 3)  # printed tables: 0.576
    0.576
    """
    t = student.isf(p / 2, freedom)
    return float(t / np.sqrt(freedom + t**2))


def _without_room(unit: Unit) -> list[Finding]:
    """Find samples that the design fits exactly: they take part in name only."""
    basis = Nuisance.of(np.hstack([unit.nuisance, unit.group]), len(unit.samples)).basis
    alone = np.flatnonzero(1.0 - np.sum(basis**2, axis=1) < NO_ROOM)
    if not alone.size:
        return []
    names = tuple(unit.samples[row] for row in alone)
    only = "the only one of a level" if len(names) == 1 else "each the only one of a level"
    what = (
        f"{counted(len(names), 'sample')} of {unit.words} ({some(names)}), {only} of the design: with the design taken "
        "out nothing is left to tell"
    )
    todo = f"nothing, or say so: {exclude_line('', names, 'alone on its level')}"
    identity = finding_id("samples_alone", unit.block, *unit.adjust)
    return [Finding(identity, "samples_alone", "note", unit.block, what, names, (), todo)]


def _unnamed(data: StudyData) -> list[Finding]:
    """Find batch columns that are not adjusted for and tell the group."""
    found = []
    named = {column for block in data.blocks.values() for column in block.adjust}
    for block in data.blocks.values():
        for column in unused_columns(data, block):
            if column.technical and column.name not in named and block.group_levels:
                found += _told_by(data, block, column)
    return found


def _told_by(data: StudyData, block: CheckedBlock, column: SheetColumn) -> list[Finding]:
    rows = block.usable[column.held[block.usable]]
    mask = np.zeros(len(block.samples), dtype=bool)
    mask[rows] = True
    group = block.group_columns[rows]
    if rows.size < 4 or not np.ptp(group, axis=0).any():
        return []
    left = _share_left(group[:, np.ptp(group, axis=0) > 0], column.indicators(mask))
    if left >= NEARLY:
        return []
    factors = "+".join(data.settings.samples.group)
    which = "tells" if left < NO_ROOM else f"tells all but {percent(left)} of"
    what = (
        f"column '{column.name}' of the sample sheet {which} the group '{factors}': what differs between groups may "
        f"as well be an effect of '{column.name}'"
    )
    todo = "say so with every effect of the group; pairs within groups are touched only if the levels differ in them"
    if left >= NO_ROOM:
        todo += f"; or adjust for it: {adjust_line('', [*data.settings.samples.adjust, column.name])}"
    identity = finding_id(CHECK, "", factors, column.name)
    table = None
    if column.levels:
        counts = np.zeros((len(block.group_levels), len(column.levels)), dtype=np.intp)
        np.add.at(counts, (block.group_codes[rows], column.codes[rows]), 1)
        table = CrossTable(factors, block.group_levels, column.name, column.levels, counts)
    return [Finding(identity, CHECK, "warning", "", what, (), (), todo, table)]


def _subjects(data: StudyData) -> list[Finding]:
    """Find a column that says which samples are of one subject, when the settings name none."""
    if data.settings.samples.subject is not None:
        return []
    sheet = data.kept_sheet
    used = {*data.settings.samples.group, *(one for block in data.blocks.values() for one in block.adjust)}
    columns = [one for one in suggest_columns(sheet).subject if one not in used]
    found = []
    for column in columns:
        sizes = sheet[column].value_counts()
        repeated = int((sizes > 1).sum())
        what = (
            f"column '{column}' looks like the subject of several samples: {counted(repeated, 'subject')} of "
            f"{len(sizes)} with 2 to {int(sizes.max())} samples each; taken as independent, they make chance look "
            "like evidence"
        )
        todo = f'say so with [samples] subject = "{column}", or keep one sample of each with exclude and its reason'
        identity = finding_id("repeated_subjects", "", column)
        found.append(Finding(identity, "repeated_subjects", "warning", "", what, (), (), todo))
    return found


def _unread(data: StudyData) -> list[Finding]:
    """Pass on why the nuisance columns of a block could not be read; once, where it is the same for all blocks."""
    faults = {block.design_fault for block in data.blocks.values()}
    if len(faults) == 1 and len(data.blocks) > 1:
        named = [("", "the samples are", fault) for fault in faults if fault]
    else:
        named = [
            (block.name, f"block '{block.name}' is", block.design_fault) for block in data.blocks.values()
        ]
    return [
        Finding(
            finding_id("unread_design", name),
            "unread_design",
            "error",
            name,
            f"the columns that {words} adjusted for cannot be used: {fault}",
            todo="mend the sample sheet or the settings as the message says",
            acceptable=False,
        )
        for name, words, fault in named
        if fault
    ]
