"""What ``project.toml`` may hold: strict, with no unknown keys.

A key that this version does not act on is not in the schema, and is refused like a misspelt one.
"""

from __future__ import annotations

import math
from pathlib import PurePosixPath
from typing import Annotated, Any, Literal, get_args

from pydantic import (
    AfterValidator,
    BaseModel,
    BeforeValidator,
    ConfigDict,
    Field,
    SerializeAsAny,
    ValidationInfo,
    field_validator,
)
from pydantic_core import PydanticCustomError

from workbench.settings.layers import layer_fault
from workbench.settings.names import name_fault
from workbench.settings.prepare_schema import PrepareSettings, validated

FORMAT = 1
"""Version of ``project.toml`` that this program reads and writes."""

Values = Literal["counts", "intensities", "log", "proportions", "beta", "continuous", "mixed"]
VALUES: tuple[str, ...] = get_args(Values)
Kind = Literal["classes", "number"]


def _fault(kind: str, message: str) -> PydanticCustomError:
    """Return an error whose message is taken word for word (braces are no placeholders)."""
    return PydanticCustomError("told", "{message}", {"message": message, "kind": kind})


def _one_or_more(value: Any) -> Any:
    """Read one text as a list of one."""
    return [value] if isinstance(value, str) else value


def _no_repeats(value: tuple[str, ...]) -> tuple[str, ...]:
    for place, item in enumerate(value):
        if item in value[:place]:
            raise _fault("repeat", f"names {item!r} twice; allowed: each once")
    return value


def _filled(value: str) -> str:
    if not value.strip():
        raise _fault("empty", "is empty; allowed: some text")
    return value


Text = Annotated[str, AfterValidator(_filled)]
Names = Annotated[tuple[Text, ...], Field(strict=False), AfterValidator(_no_repeats)]
OneOrMore = Annotated[Names, BeforeValidator(_one_or_more)]


def _checked_name(value: str) -> str:
    fault = name_fault(value)
    if fault is not None:
        raise _fault("name", fault)
    return value


Name = Annotated[str, AfterValidator(_checked_name)]


def _is_number(value: Any) -> bool:
    return isinstance(value, int | float) and not isinstance(value, bool)


def _checked_ridge(value: Any) -> Any:
    allowed = 'allowed: "auto", one number >= 0, or a list of them (one per layer)'
    if value == "auto":
        return value
    numbers = value if isinstance(value, list | tuple) else [value]
    if not all(_is_number(number) for number in numbers) or not numbers:
        raise _fault("ridge", f'must be "auto" or numbers, got {value!r}; {allowed}')
    if not all(math.isfinite(number) and number >= 0 for number in numbers):
        raise _fault("ridge", f"must not be negative or infinite, got {value!r}; {allowed}")
    if isinstance(value, list | tuple):
        if len(numbers) == 1:
            raise _fault("ridge", f"must be a number or several of them, got a list of one; {allowed}")
        return tuple(float(number) for number in numbers)
    return float(value)


def _checked_components(value: Any) -> Any:
    if value == "auto":
        return value
    if not isinstance(value, int) or isinstance(value, bool) or value < 1:
        raise _fault(
            "components", f'must be "auto" or a whole number, got {value!r}; allowed: "auto", 1, 2, ...'
        )
    return value


def _checked_blocks(value: Any) -> Any:
    if value == "all":
        return value
    if not isinstance(value, list | tuple) or not all(isinstance(item, str) for item in value):
        raise _fault(
            "blocks", f'must be "all" or a list of blocks, got {value!r}; allowed: "all", ["a", "b"]'
        )
    return _no_repeats(tuple(value))


Ridge = Annotated[Literal["auto"] | float | tuple[float, ...], BeforeValidator(_checked_ridge)]
Components = Annotated[Literal["auto"] | int, BeforeValidator(_checked_components)]
Blocks = Annotated[Literal["all"] | tuple[str, ...], BeforeValidator(_checked_blocks)]


class Section(BaseModel):
    """One table of ``project.toml``: read-only once read, no unknown keys, no conversions."""

    model_config = ConfigDict(extra="forbid", frozen=True, strict=True)


class StudySettings(Section):
    """``[study]``: what the project is about; free text."""

    title: str = ""
    organism: str = ""
    question: str = ""


class SamplesSettings(Section):
    """``[samples]``: which columns of ``samples.tsv`` play which part.

    Attributes
    ----------
    id : str
        Column that names the sample.
    group : tuple of str
        The factor of interest, or several (their cells are the groups); empty without one.
    subject : str or None
        Column that tells which samples are of one subject.
    time : str or None
        Column that orders the samples of one subject.
    order : dict of str to tuple of str
        For a factor, its levels in order; the first is the reference.
    adjust : tuple of str
        Nuisance columns of the study.
    kinds : dict of str to {"classes", "number"}
        How a nuisance column is to be read where it could be either.
    exclude : dict of str to str
        Sample and the reason why it is left out.
    """

    id: Text = "sample"
    group: OneOrMore = ()
    subject: Text | None = None
    time: Text | None = None
    order: dict[str, Names] = Field(default_factory=dict)
    adjust: Names = ()
    kinds: dict[str, Kind] = Field(default_factory=dict)
    exclude: dict[str, Text] = Field(default_factory=dict)


def _checked_cycle(value: tuple[str, ...]) -> tuple[str, ...]:
    if len(value) < 2:
        raise _fault("swap", f"names {len(value)} sample{'s' * (len(value) != 1)}; allowed: two or more")
    return value


def _checked_swaps(value: Any) -> Any:
    if not isinstance(value, list | tuple):
        raise _fault(
            "swap", f'must be a list, like [{{ samples = ["S03", "S31"], reason = "..." }}], got {value!r}'
        )
    return value


class Swap(Section):
    """One item of ``swap``: samples whose rows were exchanged, and how that is known.

    Attributes
    ----------
    samples : tuple of str
        Each name's row belongs to the next one, the last's to the first.
    reason : str
    """

    samples: Annotated[Names, AfterValidator(_checked_cycle)]
    reason: Text


Swaps = Annotated[tuple[Swap, ...], Field(strict=False), BeforeValidator(_checked_swaps)]


class BlockSettings(Section):
    """``[blocks.NAME]``: one table of one layer, and how it is read.

    Attributes
    ----------
    file : str
        The delivered table, relative to the project.
    layer : str
        The biological kind, one of `LAYERS` or a name of the user's.
    own_layer : bool
        Whether ``layer`` is a name of the user's though it is much like a known one.
    values : {"counts", "intensities", "log", "proportions", "beta", "continuous", "mixed"}
        What the numbers are.
    samples_in : {"rows", "columns"} or None
        Where the samples stand; None: found by their names.
    sheet, array : str or None
        Sheet of an .xlsx file; ``X`` or a layer of an .h5ad file.
    decimal : {".", ","} or None
        Decimal mark of numbers that are text; None: found where all numbers agree on one.
    names : str or None
        Table of delivered names and the samples (or runs) that they stand for, relative to the project.
    runs : str or None
        Run sheet, relative to the project: the table's ids are then runs.
    annotations : str or None
        Table of feature identifiers, relative to the project.
    adjust : tuple of str
        Nuisance columns of this assay alone.
    exclude : dict of str to str
        Sample of this block and the reason why it is left out.
    swap : tuple of Swap
        Samples whose rows were exchanged in the laboratory; each sample in one item at most.
    prepare : PrepareSettings
        The choices of the preparation; which there are depends on layer and values.
    """

    file: Text
    own_layer: bool = False
    layer: str
    values: Values
    samples_in: Literal["rows", "columns"] | None = None
    sheet: Text | None = None
    array: Text | None = None
    decimal: Literal[".", ","] | None = None
    names: Text | None = None
    runs: Text | None = None
    annotations: Text | None = None
    adjust: Names = ()
    exclude: dict[str, Text] = Field(default_factory=dict)
    swap: Swaps = ()
    prepare: SerializeAsAny[PrepareSettings] = Field(default_factory=PrepareSettings, validate_default=True)

    @field_validator("layer")
    @classmethod
    def _known_or_own(cls, value: str, info: ValidationInfo) -> str:
        fault = layer_fault(value, bool(info.data.get("own_layer")))
        if fault is not None:
            raise _fault("layer", fault)
        return value

    @field_validator("prepare", mode="before")
    @classmethod
    def _prepared_by_kind(cls, value: Any, info: ValidationInfo) -> PrepareSettings:
        layer, values = info.data.get("layer"), info.data.get("values")
        if layer is None or values is None:
            return PrepareSettings()
        return validated(layer, values, value)

    @field_validator("runs")
    @classmethod
    def _runs_can_be_combined(cls, value: str | None, info: ValidationInfo) -> str | None:
        if value is not None and info.data.get("values") == "mixed":
            raise _fault(
                "runs", 'is for tables of numbers, whose runs have a mean; allowed: no runs with "mixed"'
            )
        return value

    @field_validator("sheet", "array")
    @classmethod
    def _fits_the_file(cls, value: str | None, info: ValidationInfo) -> str | None:
        suffix = {"sheet": ".xlsx", "array": ".h5ad"}[str(info.field_name)]
        file = info.data.get("file")
        if value is not None and file is not None and PurePosixPath(file).suffix.lower() != suffix:
            raise _fault("suffix", f"is for {suffix} files, and this block's file is {file!r}; leave it out")
        return value


class NetworkSettings(Section):
    """``[analyses.NAME.network]``: which pairs of features become edges.

    Attributes
    ----------
    correlation : {"pearson", "spearman"}
    fdr : float
        Level of the false-discovery rate, above 0 and below 1.
    select : {"within", "total"}
        Edges are selected with the group removed, or with it left in.
    minimum_r : float
        Smallest ``|r|`` of an edge, from 0 to below 1.
    maximum_edges : int
        Most edges that are kept, strongest first.
    remove_private : bool
        Remove from each block the strong variation that no other layer shares.
    stability : int
        Half-samples of the stability of edges; 0 leaves it out.
    """

    correlation: Literal["pearson", "spearman"] = "pearson"
    fdr: float = Field(default=0.05, gt=0, lt=1)
    select: Literal["within", "total"] = "within"
    minimum_r: float = Field(default=0.0, ge=0, lt=1)
    maximum_edges: int = Field(default=20000, ge=1)
    remove_private: bool = True
    stability: int = Field(default=100, ge=0)


class PathwaySettings(Section):
    """``[analyses.NAME.pathways]``: what is known beforehand, in tables of the user's.

    Attributes
    ----------
    sets : str or None
        Table of sets of features (TSV, or .gmt), relative to the project.
    links : str or None
        Table of known links between features, relative to the project.
    """

    sets: Text | None = None
    links: Text | None = None


class AnalysisSettings(Section):
    """``[analyses.NAME]``: one integration of two or more blocks.

    Attributes
    ----------
    blocks : "all" or tuple of str
    method : {"auto", "ridge_cca", "generalised_cca", "multiblock_pls"}
    outcome : str or None
        What multi-block PLS explains: a column of the sample sheet, or the name of a block.
    outcome_kind : {"classes", "number"} or None
        How an outcome column is to be read where it could be either.
    level : {"visits", "subjects"} or None
        With several samples of one subject: the changes between its visits, or differences between subjects.
    ridge : "auto", float or tuple of float
        In multiples of each layer's noise level; 0 = none.
    components : "auto" or int
    folds, repeats : int
        Of the outer cross-validation: at least 2 folds, at least 1 repeat.
    permutations : int
        Most permutations of a test, at least 1.
    seed : int
        At least 0.
    network : NetworkSettings
    pathways : PathwaySettings
    """

    blocks: Blocks
    method: Literal["auto", "ridge_cca", "generalised_cca", "multiblock_pls"] = "auto"
    outcome: Text | None = None
    outcome_kind: Kind | None = None
    level: Literal["visits", "subjects"] | None = None
    ridge: Ridge = "auto"
    components: Components = "auto"
    folds: int = Field(default=5, ge=2)
    repeats: int = Field(default=5, ge=1)
    permutations: int = Field(default=1000, ge=1)
    seed: int = Field(default=20260101, ge=0)
    network: NetworkSettings = Field(default_factory=NetworkSettings)
    pathways: PathwaySettings = Field(default_factory=PathwaySettings)


class CheckSettings(Section):
    """``[check]``: what the analyst has settled.

    Attributes
    ----------
    accept : dict of str to str
        Id of a finding and the reason why it is accepted.
    """

    accept: dict[str, Text] = Field(default_factory=dict)


def _checked_format(value: Any) -> Any:
    if _is_number(value) and value > FORMAT:
        raise _fault("format", f"is {value!r}: a newer version of this program wrote it; allowed: {FORMAT}")
    return value


def _one_case(value: dict[str, Any]) -> dict[str, Any]:
    """Refuse names that differ in case alone: on some disks they are one file."""
    seen: dict[str, str] = {}
    for name in value:
        if name.lower() in seen:
            raise _fault(
                "case", f"{seen[name.lower()]!r} and {name!r} differ in case alone; rename one of them"
            )
        seen[name.lower()] = name
    return value


class Settings(Section):
    """The whole of ``project.toml``.

    Attributes
    ----------
    format : int
        Version of the file, `FORMAT`.
    study : StudySettings
    samples : SamplesSettings
    blocks : dict of str to BlockSettings
        In the order of the file.
    analyses : dict of str to AnalysisSettings
        In the order of the file.
    check : CheckSettings
    """

    format: Annotated[Literal[1], BeforeValidator(_checked_format)] = 1
    study: StudySettings = Field(default_factory=StudySettings)
    samples: SamplesSettings = Field(default_factory=SamplesSettings)
    blocks: Annotated[dict[Name, BlockSettings], AfterValidator(_one_case)] = Field(default_factory=dict)
    analyses: Annotated[dict[Name, AnalysisSettings], AfterValidator(_one_case)] = Field(default_factory=dict)
    check: CheckSettings = Field(default_factory=CheckSettings)

    def blocks_of(self, analysis: str) -> tuple[str, ...]:
        """Return the names of the blocks that an analysis takes, in the order of the file's blocks."""
        chosen = self.analyses[analysis].blocks
        return tuple(self.blocks) if chosen == "all" else tuple(b for b in self.blocks if b in chosen)
