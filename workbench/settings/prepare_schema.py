"""``[blocks.NAME.prepare]``: every choice of the preparation, by layer and values, with its default and the reason.

Each kind of values has a table of its own; a key of another kind is refused like a misspelt one.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Annotated, Any, Literal

from pydantic import AfterValidator, BaseModel, BeforeValidator, ConfigDict, Field, ValidationError
from pydantic_core import InitErrorDetails, PydanticCustomError

from workbench.errors import SettingsError
from workbench.settings.told import key_of, key_text, told


class PrepareSettings(BaseModel):
    """One table of ``[blocks.NAME.prepare]``: read-only once read, no unknown keys, no conversions."""

    model_config = ConfigDict(extra="forbid", frozen=True, strict=True)


SeenShare = Annotated[
    float,
    Field(
        gt=0,
        le=1,
        description="a feature is kept when at least this share of the smallest group's size has it: what one group "
        "has and the other lacks stays, what nearly nobody has goes (80 % of a group is common practice; 70 % keeps "
        "groups of five at four)",
    ),
]
CheckValues = Annotated[
    bool,
    Field(
        description="tables that do not look like what they are declared to be are refused (logarithms of logarithms "
        "raise no error anywhere); false takes them as declared"
    ),
]
Gaps = Annotated[
    Literal["evidence", "draws", "neighbours"],
    Field(
        description="evidence: where missingness falls with abundance, a gap of a weak feature becomes the value to be "
        "expected, between that under the detection limit and that of similar samples by the chances of the two; the "
        "others are filled from similar samples; draws: a gap under the limit is drawn at random from there, which "
        "keeps a feature's spread and weakens its correlations (5 points of recall at 25 % gaps); neighbours: all gaps "
        "are filled from similar samples"
    ),
]
Drift = Annotated[
    Literal["pools", "none"],
    Field(
        description="pools: each feature's course over the run order is read off the pools and taken away, where "
        "leaving pools out shows that this helps; needs a run sheet (Dunn et al. 2011, Nat Protoc 6:1060)"
    ),
]
FewestPools = Annotated[
    int,
    Field(
        ge=5,
        description="with fewer pools in a batch no curve is fitted: a local line through four pools fits them "
        "perfectly and says nothing of what lies between",
    ),
]
Span = Annotated[
    float,
    Field(
        gt=0,
        le=1,
        description="share of the pools in the window of the local regression, never fewer than six pools: wide "
        "windows follow slow drift and not the noise of single pools",
    ),
]
PoolFilter = Annotated[
    Literal["scatter", "none"],
    Field(description="scatter: features that the assay cannot repeat on one and the same pool are dropped"),
]
PoolScatter = Annotated[
    float,
    Field(
        gt=0,
        description="largest relative standard deviation in the pools (0.3 for untargeted work, 0.2 for targeted "
        "work: common practice)",
    ),
]
Transform = Annotated[
    Literal["none", "log", "rank"],
    Field(
        description="readings are taken as delivered; log (base 2) or rank (normal scores) for skewed ones, whose "
        "largest values would carry every correlation"
    ),
]


def _fault(message: str) -> PydanticCustomError:
    return PydanticCustomError("told", "{message}", {"message": message})


def _checked_features(value: Any) -> Any:
    if value in ("all", "skewed"):
        return value
    if not isinstance(value, list | tuple) or not all(isinstance(item, str) for item in value):
        allowed = 'allowed: "all", "skewed", ["a", "b"]'
        raise _fault(f'must be "all", "skewed" or a list of features, got {value!r}; {allowed}')
    return tuple(value)


def _checked_levels(value: tuple[str, ...]) -> tuple[str, ...]:
    if len(value) < 2 or len(set(value)) < len(value):
        raise _fault(f"must be two or more different levels, lowest first, got {list(value)!r}")
    return value


Levels = Annotated[tuple[str, ...], Field(strict=False), AfterValidator(_checked_levels)]
TransformFeatures = Annotated[
    Literal["all", "skewed"] | tuple[str, ...],
    BeforeValidator(_checked_features),
    Field(
        description="which numbers are transformed: all, those with a skewness over 1 in the training samples, or "
        "the features named"
    ),
]


class CountsPreparation(PrepareSettings):
    """Counts of reads (transcripts and others)."""

    smallest_count: int = Field(
        default=10, ge=1, description="fewer reads than this do not show a feature clearly (common practice)"
    )
    smallest_share: float = Field(
        default=0.2,
        gt=0,
        le=1,
        description="without groups: share of the samples that must show a feature clearly; with groups it is the size "
        "of the smallest one",
    )
    normalisation: Literal["median_of_ratios", "upper_quartile", "trimmed_mean", "none"] = Field(
        default="median_of_ratios",
        description="median_of_ratios (Anders & Huber 2010) is not moved by the few features that most reads go to; "
        "upper_quartile (Bullard et al. 2010) needs no reference; trimmed_mean (Robinson & Oshlack 2010) is for "
        "compositions that differ much; none for counts that are scaled already",
    )
    prior_count: float = Field(
        default=3.0,
        gt=0,
        description="added before the logarithm, in proportion to library size: it keeps small counts, which are "
        "mostly noise, from having the largest variance (0.5 to 5: common practice)",
    )


class CompositionPreparation(PrepareSettings):
    """Counts of microbes, and proportions: parts of a whole."""

    prevalence: float = Field(
        default=0.1,
        ge=0,
        le=1,
        description="share of the samples that must have a feature: what hardly anybody has is zeros and guesses",
    )
    zero_share: float = Field(
        default=0.65,
        gt=0,
        lt=1,
        description="a zero becomes this share of the detection limit (Martin-Fernandez et al. 2003, who found 65 % to "
        "distort covariances least)",
    )
    log_ratio: Literal["centred", "none"] = Field(
        default="centred",
        description="centred: logarithms against the sample's geometric mean (Aitchison 1986), as shares of a whole "
        "say nothing of amounts; none: logarithms of the shares",
    )


class IntensitiesPreparation(PrepareSettings):
    """Intensities of mass spectrometry and the like."""

    check_values: CheckValues = True
    zeros: Literal["missing", "amounts"] = Field(
        default="missing",
        description="missing: the instrument saw nothing, which is not an amount of nothing; amounts: a zero is a "
        "measured zero, and half of the feature's smallest value is added before the logarithm",
    )
    blanks: Literal["filter", "none"] = Field(
        default="filter",
        description="filter: features that the blanks explain are dropped; needs a run sheet",
    )
    blank_ratio: float = Field(
        default=3.0,
        gt=1,
        description="a feature must be this many times as strong in samples as in blanks (3 to 10: common practice)",
    )
    drift: Drift = "pools"
    fewest_pools: FewestPools = 6
    span: Span = 0.75
    pool_filter: PoolFilter = "scatter"
    pool_scatter: PoolScatter = 0.3
    seen_share: SeenShare = 0.7
    normalisation: Literal["quotient", "none"] = Field(
        default="quotient",
        description="quotient: samples differ in dilution, and the typical quotient to a reference finds it without "
        "being moved by the features that change (Dieterle et al. 2006); none where the amount is known",
    )
    gaps: Gaps = "evidence"


class LogPreparation(PrepareSettings):
    """Values that are logarithms already."""

    check_values: CheckValues = True
    drift: Drift = "pools"
    fewest_pools: FewestPools = 6
    span: Span = 0.75
    pool_filter: PoolFilter = "scatter"
    pool_scatter: PoolScatter = 0.3
    seen_share: SeenShare = 0.7
    centring: Literal["median", "none"] = Field(
        default="median",
        description="median: samples differ in how much was loaded, which shifts all logarithms alike; none where that "
        "is corrected already",
    )
    gaps: Gaps = "evidence"


class BetaPreparation(PrepareSettings):
    """Methylated shares from 0 to 1."""

    seen_share: SeenShare = 0.7
    offset: float = Field(
        default=0.001,
        gt=0,
        le=0.1,
        description="added to the methylated and to the unmethylated share, so that 0 and 1 have a logarithm; a "
        "thousandth is one unit of intensity in a probe of a thousand (Du et al. 2010 add one unit)",
    )


class ContinuousPreparation(PrepareSettings):
    """Continuous readings."""

    seen_share: SeenShare = 0.7
    transform: Transform = "none"
    transform_features: TransformFeatures = "all"


class MixedPreparation(PrepareSettings):
    """Numbers and text, clinical readings for one."""

    seen_share: SeenShare = 0.7
    ordered: dict[str, Levels] = Field(
        default_factory=dict,
        description="text whose levels have an order, lowest first: it becomes 0, 1, 2, ... instead of one column per "
        "level; nobody but its owner knows the order",
    )
    transform: Transform = "none"
    transform_features: TransformFeatures = "all"


_MODELS: dict[str, type[PrepareSettings]] = {
    "counts": CountsPreparation,
    "proportions": CompositionPreparation,
    "intensities": IntensitiesPreparation,
    "log": LogPreparation,
    "beta": BetaPreparation,
    "continuous": ContinuousPreparation,
    "mixed": MixedPreparation,
}


def preparation_model(layer: str, values: str) -> type[PrepareSettings]:
    """Return the table that a layer and a kind of values have.

    Raises
    ------
    KeyError
        For values that are none.

    Examples
    --------
    >>> preparation_model("microbes", "counts").__name__, preparation_model("transcripts", "counts").__name__
    ('CompositionPreparation', 'CountsPreparation')
    """
    return CompositionPreparation if (layer, values) == ("microbes", "counts") else _MODELS[values]


def prepare_settings(
    layer: str, values: str, table: Mapping[str, Any], where: str = "project.toml: prepare"
) -> PrepareSettings:
    """Return the preparation's settings of a block.

    Parameters
    ----------
    layer, values : str
        Of the block.
    table : mapping
        What ``[blocks.NAME.prepare]`` holds.
    where : str
        Start of every fault's line.

    Raises
    ------
    SettingsError
        With every fault, a line each: key, what is wrong, what is allowed, the nearest spelling.

    Examples
    --------
    >>> prepare_settings("metabolites", "intensities", {"blank_ratio": 5.0}).blank_ratio
    5.0
    """
    try:
        return validated(layer, values, table)
    except ValidationError as error:
        lines = [
            f"{where}{'.' if fault['loc'] else ''}{key_text(key_of(fault)) if fault['loc'] else ''}: {fault['msg']}"
            for fault in error.errors(include_url=False)
        ]
        raise SettingsError(lines) from error


def validated(layer: str, values: str, table: Any) -> PrepareSettings:
    """Return the settings, or raise pydantic's error with every message in plain words already."""
    model = preparation_model(layer, values)
    if type(table) is PrepareSettings:
        return model()
    try:
        return model.model_validate(table)
    except ValidationError as error:
        plain = [
            InitErrorDetails(
                type=PydanticCustomError(
                    "told", "{message}", {"message": _told(fault, model, layer, values)}
                ),
                loc=fault["loc"],
                input=fault["input"],
            )
            for fault in error.errors(include_url=False)
        ]
        raise ValidationError.from_exception_data("prepare", plain) from error


def _told(fault: Any, model: type[PrepareSettings], layer: str, values: str) -> str:
    message = told(fault, model)
    if fault["type"] != "extra_forbidden":
        return message
    key = str(fault["loc"][0])
    others = [kind for kind, other in _MODELS.items() if key in other.model_fields]
    if others:
        return f"is for values {' or '.join(map(repr, others))}, not for {values!r} of layer {layer!r}; take it out"
    return message
