"""Make the example project again: 48 barley plants, watered or in drought, two assays. All data are invented.

Run from the repository's root: ``python example_project/make_example.py``.

What is planted (``planted.tsv`` names every feature, ``planted_factors.tsv`` gives the hidden factors): four
modules of 45 transcripts and 10 metabolites that follow one hidden factor each, independent of the drought; 180
transcripts and 30 metabolites that merely follow the drought, and nothing else of the other layer; a private factor
in each layer (strong variation that the other layer does not share); three run days per assay, spread over both
conditions, that shift every feature.
The tables are delivered differently: counts with the features in rows, intensities with the samples in rows and
in another order, with gaps where a metabolite is scarce.

A table of pathways and one of known links are invented beside the data (``knowledge``): the pathways of the four
modules hold most of their features, others hold features at random; most known links lie inside modules.

Four mishaps are planted too, as they happen: two tubes exchanged in the metabolite assay, one extract that thawed, an
extraction batch that nobody names, and a spare table of gene symbols that went through a spreadsheet.  ``deliver``
writes the tables, ``build`` makes the project as a first user would, ``settle`` edits ``project.toml`` as that user
does after ``workbench check``.
"""

from __future__ import annotations

import json
import shutil
import tempfile
from pathlib import Path

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench import Project

HERE = Path(__file__).resolve().parent
SEED = 64
PLANTS, TRANSCRIPTS, METABOLITES = 48, 1500, 160
MODULES, IN_MODULE = 4, {"transcripts": 45, "metabolites": 10}
FOLLOW_DROUGHT = {"transcripts": 180, "metabolites": 30}
SPREAD = {"transcripts": 0.45, "metabolites": 0.40}
DAY_SHIFT = {"transcripts": 0.4, "metabolites": 0.3}
EXTRACTION_SHIFT = 0.6
PRIVATE_LOADING, PRIVATE_SHARE = 0.6, 0.6
SWAPPED, THAWED = ("B05", "B31"), "B17"
SYMBOLS_SPOILT = {"SEPT2": "2-Sep", "MARCH1": "1-Mar", "DEC1": "1-Dec"}
DATES_FINDING = "damaged_identifiers-symbols_old.tsv-symbol"
PATHWAYS = {
    "module 1": ("HP01", "raffinose family synthesis (invented)"),
    "module 2": ("HP02", "proline and polyamine turnover (invented)"),
    "module 3": ("HP03", "cuticular wax assembly (invented)"),
    "module 4": ("HP04", "starch mobilisation (invented)"),
    "follows the drought": ("HP05", "stomatal closure signalling (invented)"),
}
IN_PATHWAY, OTHERS_IN_PATHWAY, RANDOM_PATHWAYS = 0.7, 6, 20
LINKS_INSIDE, LINKS_ANYWHERE = 12, 6
KEPT = ("project.toml", "samples.tsv", "journal.jsonl", "source")


def sample_sheet(rng: np.random.Generator) -> pd.DataFrame:
    """Return the plants with their condition and the run day of each assay, balanced over the conditions."""
    condition = np.repeat(["watered", "drought"], PLANTS // 2)
    days = {}
    for assay in ("rna_day", "ms_day"):
        halves = [rng.permutation(np.tile(["d1", "d2", "d3"], PLANTS // 6)) for _ in range(2)]
        days[assay] = np.concatenate(halves)
    plants = [f"B{number:02d}" for number in range(1, PLANTS + 1)]
    extraction = np.concatenate([rng.permutation(np.tile(["e1", "e2"], PLANTS // 4)) for _ in range(2)])
    return pd.DataFrame({"plant": plants, "condition": condition, **days, "extraction": extraction})


def planted_parts(layer: str, names: list[str]) -> pd.DataFrame:
    """Return which features are in a module, follow the drought, or neither."""
    part = np.full(len(names), "background", dtype=object)
    size = IN_MODULE[layer]
    for module in range(MODULES):
        part[module * size : (module + 1) * size] = f"module {module + 1}"
    start = MODULES * size
    part[start : start + FOLLOW_DROUGHT[layer]] = "follows the drought"
    return pd.DataFrame({"layer": layer, "feature": names, "planted": part})


def deviations(
    rng: np.random.Generator,
    layer: str,
    sheet: pd.DataFrame,
    planted: pd.Series,
    factors: pd.DataFrame,
) -> NDArray[np.float64]:
    """Return log2 deviations of every feature from its level (plants x features)."""
    p = len(planted)
    drought = (sheet["condition"] == "drought").to_numpy(float)
    day = sheet["rna_day" if layer == "transcripts" else "ms_day"].str[1].astype(int).to_numpy() - 1
    deviation = rng.normal(0, SPREAD[layer], (PLANTS, p))
    deviation += rng.normal(0, DAY_SHIFT[layer], (3, p))[day]
    if layer == "metabolites":
        deviation += np.outer(sheet["extraction"] == "e2", rng.normal(0, EXTRACTION_SHIFT, p))
    loadings = rng.normal(0, PRIVATE_LOADING, p) * (rng.random(p) < PRIVATE_SHARE)
    deviation += np.outer(factors[f"private {layer}"], loadings)
    for module in range(MODULES):
        inside = (planted == f"module {module + 1}").to_numpy()
        signs = rng.choice([-1.0, 1.0], inside.sum(), p=[0.3, 0.7])
        deviation[:, inside] += np.outer(
            factors[f"module {module + 1}"], signs * rng.uniform(0.8, 1.2, inside.sum())
        )
    follows = (planted == "follows the drought").to_numpy()
    deviation[:, follows] += np.outer(
        drought, rng.choice([-1, 1], follows.sum()) * rng.uniform(1.0, 2.0, follows.sum())
    )
    return deviation


def counts_table(
    rng: np.random.Generator, sheet: pd.DataFrame, names: list[str], log2: NDArray[np.float64]
) -> pd.DataFrame:
    """Return negative binomial counts, features in rows, at a different depth for each plant."""
    level = rng.normal(7.5, 2.0, len(names))
    share = 2.0 ** (level + log2)
    depth = rng.lognormal(np.log(600_000), 0.25, PLANTS)
    mean = share / share.sum(axis=1, keepdims=True) * depth[:, None]
    counts = rng.poisson(mean * rng.gamma(1 / 0.02, 0.02, mean.shape))
    return pd.DataFrame(counts.T, index=pd.Index(names, name="transcript"), columns=sheet["plant"])


def intensities_table(
    rng: np.random.Generator, sheet: pd.DataFrame, names: list[str], log2: NDArray[np.float64]
) -> pd.DataFrame:
    """Return peak areas, samples in rows and in run order, diluted differently, with censored gaps."""
    level = rng.normal(16, 2.0, len(names))
    thawed = (sheet["plant"] == THAWED).to_numpy()
    log2 = log2 + np.outer(thawed, rng.normal(-0.5, 1.6, len(names)) * (rng.random(len(names)) < 0.5))
    log_area = level + log2 + rng.normal(0, 0.25, (PLANTS, 1))
    limit = np.quantile(log_area, 0.06)
    area = np.round(2.0**log_area, 1)
    area[(log_area < limit) | (rng.random(area.shape) < 0.01)] = np.nan
    table = pd.DataFrame(area, index=pd.Index(sheet["plant"], name="plant"), columns=names)
    exchanged = table.rename(index=dict(zip(SWAPPED, reversed(SWAPPED), strict=True)))
    return exchanged.loc[:, exchanged.notna().sum() > 0].iloc[rng.permutation(PLANTS)]


def symbols_table(names: list[str]) -> pd.DataFrame:
    """Return gene symbols for the first transcripts, three of them turned into dates by a spreadsheet."""
    symbols = [f"HBT{number}" for number in range(1, 41)]
    for place, symbol in zip((3, 17, 29), SYMBOLS_SPOILT, strict=True):
        symbols[place] = SYMBOLS_SPOILT[symbol]
    return pd.DataFrame({"transcript": names[: len(symbols)], "symbol": symbols})


def knowledge(planted: pd.DataFrame, folder: Path) -> None:
    """Write ``pathways.tsv`` and ``known_links.tsv``, from what was planted and from chance."""
    rng = np.random.default_rng(SEED + 1)
    every = planted["feature"].to_numpy()
    rows: list[tuple[str, str, str]] = []
    for part, (identifier, name) in PATHWAYS.items():
        inside = planted.loc[planted["planted"] == part, "feature"].to_numpy()
        held = inside[rng.random(inside.size) < IN_PATHWAY]
        others = rng.choice(np.setdiff1d(every, inside), OTHERS_IN_PATHWAY, replace=False)
        rows += [(identifier, name, feature) for feature in [*held, *others]]
    for number in range(RANDOM_PATHWAYS):
        held = rng.choice(every, int(rng.integers(15, 45)), replace=False)
        identifier = f"HP{number + len(PATHWAYS) + 1:02d}"
        rows += [(identifier, f"pathway {identifier} (invented, at random)", feature) for feature in held]
    sets = pd.DataFrame(rows, columns=["set", "name", "feature"])
    sets.to_csv(folder / "pathways.tsv", sep="\t", index=False)
    links = []
    modules = [f"module {module + 1}" for module in range(MODULES)]
    for number in range(LINKS_INSIDE + LINKS_ANYWHERE):
        linked = planted
        if number < LINKS_INSIDE:
            linked = planted[planted["planted"] == modules[number % MODULES]]
        ends = [rng.choice(linked.loc[linked["layer"] == layer, "feature"]) for layer in IN_MODULE]
        links.append((*ends, "enzyme and product, by an invented data base"))
    known = pd.DataFrame(links, columns=["source", "target", "evidence"])
    known.to_csv(folder / "known_links.tsv", sep="\t", index=False)


def deliver(folder: Path) -> None:
    """Write the delivered tables into ``folder``, with what was planted."""
    rng = np.random.default_rng(SEED)
    sheet = sample_sheet(rng)
    hidden = [f"module {module + 1}" for module in range(MODULES)] + [f"private {layer}" for layer in SPREAD]
    factors = pd.DataFrame(rng.normal(size=(PLANTS, len(hidden))), columns=hidden)
    names = {
        "transcripts": [f"bt{number:04d}" for number in range(1, TRANSCRIPTS + 1)],
        "metabolites": [f"bm{number:03d}" for number in range(1, METABOLITES + 1)],
    }
    planted = {layer: planted_parts(layer, list(rng.permutation(ids))) for layer, ids in names.items()}
    log2 = {}
    for layer, ids in names.items():
        parts = planted[layer]
        values = pd.DataFrame(
            deviations(rng, layer, sheet, parts["planted"], factors), columns=parts["feature"]
        )
        log2[layer] = values[ids].to_numpy()
    sheet.to_csv(folder / "plants.tsv", sep="\t", index=False)
    factors.round(6).set_index(sheet["plant"]).to_csv(folder / "planted_factors.tsv", sep="\t")
    counts_table(rng, sheet, names["transcripts"], log2["transcripts"]).to_csv(
        folder / "counts.tsv", sep="\t"
    )
    intensities_table(rng, sheet, names["metabolites"], log2["metabolites"]).to_csv(
        folder / "metabolites.csv"
    )
    symbols_table(names["transcripts"]).to_csv(folder / "symbols_old.tsv", sep="\t", index=False)
    found = pd.concat(planted.values()).sort_values(["layer", "planted", "feature"])
    knowledge(found, folder)
    found[found["planted"] != "background"].to_csv(folder / "planted.tsv", sep="\t", index=False)


def build(delivered: Path, folder: Path) -> None:
    """Make a project of the delivered tables, as a first user would: the watered plants are the reference."""
    project = Project.create(folder, title="Barley under drought (invented data)")
    project.add_samples(delivered / "plants.tsv", group=["condition"])
    settings = folder / "project.toml"
    order = 'group = "condition"\norder = { condition = ["watered", "drought"] }\n'
    settings.write_text(settings.read_text("utf-8").replace('group = "condition"\n', order), "utf-8")
    project.add_block(
        "transcripts", delivered / "counts.tsv", layer="transcripts", values="counts", adjust=["rna_day"]
    )
    project.add_block(
        "metabolites",
        delivered / "metabolites.csv",
        layer="metabolites",
        values="intensities",
        adjust=["ms_day"],
    )
    for name in ("symbols_old.tsv", "pathways.tsv", "known_links.tsv"):
        shutil.copy(delivered / name, folder / "source" / name)
    text = settings.read_text("utf-8")
    paths = 'sets = "source/pathways.tsv"\nlinks = "source/known_links.tsv"\n'
    settings.write_text(f"{text.rstrip()}\n\n[analyses.main.pathways]\n{paths}", "utf-8")


def settle(folder: Path) -> None:
    """Edit ``project.toml`` as a user does who has read the findings of ``workbench check``."""
    settings = folder / "project.toml"
    text = settings.read_text("utf-8")
    swap = json.dumps(list(SWAPPED))
    own = (
        'adjust = ["ms_day", "extraction"]\n'
        f'swap = [{{ samples = {swap}, reason = "tubes exchanged on the sample tray, by the laboratory book" }}]\n'
        f'exclude = {{ {THAWED} = "the extract thawed before injection" }}\n'
    )
    text = text.replace('adjust = ["ms_day"]\n', own)
    accepted = '"a spare list that nothing uses; kept as it came"'
    text += f'\n[check]\naccept = {{ "{DATES_FINDING}" = {accepted} }}\n'
    settings.write_text(text, "utf-8")


def main() -> None:
    """Write the example beside this script."""
    with tempfile.TemporaryDirectory() as place:
        delivered, folder = Path(place) / "delivered", Path(place) / "project"
        delivered.mkdir()
        deliver(delivered)
        build(delivered, folder)
        settle(folder)
        for name in ("blocks", "prepared", "results", ".workbench", *KEPT):
            old = HERE / name
            shutil.rmtree(old) if old.is_dir() else old.unlink(missing_ok=True)
        for name in KEPT:
            new = folder / name
            shutil.copytree(new, HERE / name) if new.is_dir() else shutil.copy(new, HERE / name)
        for name in ("planted.tsv", "planted_factors.tsv"):
            shutil.copy(delivered / name, HERE / name)


if __name__ == "__main__":
    main()
