"""model.h5: the fitted model of an analysis, in one layout for all methods.

::

    /                  attrs: format, method
    units              names of the rows of the scores
    components/        correlation (k,), correlation_cv (k,) where cross-validated
    blocks/NAME/       attrs: layer; feature (p,), own, other, weights, all (p, k)
    layers/NAME/       scores (n, k), NaN for a unit that the layer lacks; attrs: ridge, noise_level
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path

import h5py
import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.errors import DamageError
from workbench.store import Change, check_file
from workbench.workflow.state import ProjectState

FloatArray = NDArray[np.float64]
FORMAT = 2
PARTS = ("own", "other", "weights")


@dataclass(frozen=True, eq=False)
class BlockModel:
    """One block's features: correlation with the own and with the other side's variates, and weights, (p, k)."""

    layer: str
    features: tuple[str, ...]
    own: FloatArray
    other: FloatArray
    weights: FloatArray


@dataclass(frozen=True, eq=False)
class LayerModel:
    """One layer's variates of all units, and its ridge as an absolute penalty beside the noise level."""

    scores: FloatArray
    ridge: float
    noise_level: float


@dataclass(frozen=True, eq=False)
class ModelFile:
    """A fitted model as it is stored.

    ``correlation_cv`` is None where samples did not allow a cross-validation, or the method has none.
    """

    method: str
    units: tuple[str, ...]
    blocks: Mapping[str, BlockModel]
    correlation: FloatArray
    correlation_cv: FloatArray | None
    layers: Mapping[str, LayerModel] = field(default_factory=dict)

    def feature_columns(self) -> pd.DataFrame:
        """Return ``pair1_own``, ``pair1_other``, ... by (block, feature)."""
        return pd.concat([_columns(name, block) for name, block in self.blocks.items()])


def write_model(change: Change, path: str, model: ModelFile) -> None:
    """Write a model into a file of the project."""
    text = h5py.string_dtype("utf-8")
    with h5py.File(change.new_file(path), "w") as file:
        file.attrs["format"] = FORMAT
        file.attrs["method"] = model.method
        file.create_dataset("units", data=list(model.units), dtype=text)
        components = file.create_group("components")
        components.create_dataset("correlation", data=model.correlation)
        if model.correlation_cv is not None:
            components.create_dataset("correlation_cv", data=model.correlation_cv)
        for name, block in model.blocks.items():
            group = file.create_group(f"blocks/{name}")
            group.attrs["layer"] = block.layer
            group.create_dataset("feature", data=list(block.features), dtype=text)
            for part in PARTS:
                group.create_dataset(part, data=getattr(block, part))
        for name, layer in model.layers.items():
            group = file.create_group(f"layers/{name}")
            group.attrs["ridge"], group.attrs["noise_level"] = layer.ridge, layer.noise_level
            group.create_dataset("scores", data=layer.scores)


def read_model(state: ProjectState, analysis: str) -> ModelFile:
    """Return the model of an analysis, its file checked against its hash.

    Raises
    ------
    DamageError
        When the file is not what the program wrote.
    """
    relative = f"results/{analysis}/model.h5"
    check_file(state.root, relative)
    return model_at(state.root / relative)


def model_at(path: Path) -> ModelFile:
    """Return the model in a file of this layout."""
    with h5py.File(path, "r") as file:
        if "blocks" not in file or "components" not in file:
            raise DamageError(
                f"{path}: written by another version; delete it and run `workbench integrate` again"
            )
        blocks = {name: _read_block(file["blocks"][name]) for name in file["blocks"]}
        components = file["components"]
        some = next(iter(blocks.values())).own.shape[1]
        return ModelFile(
            method=str(file.attrs["method"]),
            units=tuple(file["units"].asstr()[()]) if "units" in file else (),
            blocks=blocks,
            correlation=components["correlation"][()]
            if "correlation" in components
            else np.full(some, np.nan),
            correlation_cv=components["correlation_cv"][()] if "correlation_cv" in components else None,
            layers={name: _read_layer(file["layers"][name]) for name in file.get("layers", {})},
        )


def _read_block(group: h5py.Group) -> BlockModel:
    parts = {part: group[part][()] for part in PARTS}
    return BlockModel(str(group.attrs.get("layer", "")), tuple(group["feature"].asstr()[()]), **parts)


def _read_layer(group: h5py.Group) -> LayerModel:
    return LayerModel(group["scores"][()], float(group.attrs["ridge"]), float(group.attrs["noise_level"]))


def _columns(name: str, block: BlockModel) -> pd.DataFrame:
    index = pd.MultiIndex.from_arrays([[name] * len(block.features), list(block.features)])
    columns = {}
    for k in range(block.own.shape[1]):
        columns[f"pair{k + 1}_own"] = block.own[:, k]
        columns[f"pair{k + 1}_other"] = block.other[:, k]
    return pd.DataFrame(columns, index=index)
