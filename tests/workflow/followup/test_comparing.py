"""Two analyses on disk: a study in two halves, a module that one half lacks, a study against itself."""

from __future__ import annotations

import shutil
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from table_projects import project_of

from workbench import Project
from workbench.errors import InputError
from workbench.figures.comparison import draw_comparison
from workbench.store import read_table
from workbench.workflow.followup.comparing import run_compare

MODULES, TRANSCRIPTS, METABOLITES, HALF = 3, 15, 6, 60


def tables(seed: int, missing: int | None = None, prefix: str = "S") -> dict[str, pd.DataFrame]:
    """Return two tables of 60 samples; in each of three modules all features follow one factor, but for one module."""
    random = np.random.default_rng(seed)
    samples = [f"{prefix}{number:03d}" for number in range(HALF)]
    factors = random.normal(size=(HALF, MODULES))
    made = {}
    for name, letter, size in (("rna", "g", TRANSCRIPTS), ("lcms", "m", METABOLITES)):
        own = factors.copy()
        if missing is not None:
            own[:, missing] = random.normal(size=HALF)
        values = np.repeat(own, size, axis=1) + random.normal(0, 0.7, (HALF, MODULES * size))
        values = np.hstack([values, random.normal(size=(HALF, 20))])
        columns = [f"{letter}{number:03d}" for number in range(values.shape[1])]
        made[name] = pd.DataFrame(values, index=pd.Index(samples, name="sample"), columns=columns)
    return made


def planted(table: pd.DataFrame, module: int) -> pd.Series:
    """Return which pairs lie inside one planted module."""
    ends = [table[end].str[1:].astype(int) for end in ("source", "target")]
    sizes = (
        table["source"].str[0].map({"g": TRANSCRIPTS, "m": METABOLITES}),
        table["target"].str[0].map({"g": TRANSCRIPTS, "m": METABOLITES}),
    )
    return (ends[0] // sizes[0] == module) & (ends[1] // sizes[1] == module)


@pytest.fixture(scope="module")
def halves(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Project]:
    folder = tmp_path_factory.mktemp("halves")
    return {
        "first": project_of(folder / "first", tables(1, prefix="A")),
        "second": project_of(folder / "second", tables(2, prefix="B")),
        "without": project_of(folder / "without", tables(3, missing=2, prefix="C"), renamed=True),
    }


def test_a_study_split_in_two_halves_keeps_its_modules(halves: dict[str, Project]) -> None:
    words = str(halves["first"].paths.root), str(halves["second"].paths.root)
    found, _ = run_compare(None, words, None)
    inside = sum(planted(found.pairs, module) for module in range(MODULES)) > 0
    assert (found.pairs.loc[inside, "status"] == "kept").mean() > 0.95
    assert inside.sum() >= 0.98 * MODULES * TRANSCRIPTS * METABOLITES
    assert (found.pairs.loc[~inside, "status"] != "kept").all()
    assert (found.pairs["changed"] == "yes").mean() <= 0.05
    assert found.agreement >= 0.9
    assert "not tested" not in set(found.pairs["changed"])


def test_a_module_that_one_half_lacks_is_lost_and_shown_to_differ(halves: dict[str, Project]) -> None:
    """The third module; features have other names there and are matched by their symbols, found by overlap.

    Nine of ten of its pairs pass Fisher's z over all 2,470 pairs at 60 against 60 samples; over the 304 pairs of the
    table alone nearly all would, and half of the chance edges with them. Of those that pass, one of twenty is chance.
    """
    words = str(halves["first"].paths.root), f"{halves['without'].paths.root}:main"
    found, folder = run_compare(halves["first"].paths, words, "label")
    gone = planted(found.pairs, 2)
    chance = ~sum(planted(found.pairs, module) for module in range(MODULES)).astype(bool)
    changed = found.pairs["changed"] == "yes"
    assert changed[chance].sum() <= 0.1 * changed.sum()
    assert (found.pairs.loc[gone, "status"] == "lost").all()
    assert (found.pairs.loc[gone, "changed"] == "yes").mean() > 0.8
    for module in (0, 1):
        stays = planted(found.pairs, module)
        assert (found.pairs.loc[stays, "status"] == "kept").mean() > 0.95
        assert (found.pairs.loc[stays, "changed"] == "yes").mean() <= 0.05
    written = read_table(folder / "compared.tsv")
    assert written["status"].tolist() == found.pairs["status"].tolist()
    assert set(written["source_second"].str[0]) == {"x"}
    assert folder.is_relative_to(halves["first"].paths.root / "results" / "compare")
    for file in (
        "communities.tsv",
        "settings.tsv",
        "summary.txt",
        "comparison.svg",
        "comparison.png",
        "captions.tsv",
    ):
        assert (folder / file).stat().st_size > 0


def test_features_are_matched_by_the_column_with_most_in_common(halves: dict[str, Project]) -> None:
    found, _ = run_compare(None, (str(halves["second"].paths.root), str(halves["without"].paths.root)), None)
    assert found.by == "label"


def test_a_study_against_itself_shows_no_change(halves: dict[str, Project]) -> None:
    found, _ = run_compare(halves["first"].paths, ("main", "main"), None)
    assert set(found.pairs["status"]) == {"kept"}
    assert set(found.pairs["changed"]) == {"not tested"}
    assert (found.agreement, len(found.settings)) == (1.0, 0)
    assert (found.pairs["r_first"] == found.pairs["r_second"]).all()
    told = "\n".join(found.sentences())
    assert "no setting differs" in told
    assert "differences are not tested: 60 samples are in both" in told


def test_a_copied_project_is_known_by_its_values(halves: dict[str, Project], tmp_path: Path) -> None:
    """The same samples under the same names in another folder: the correlations are not independent."""
    copy = Project.open(shutil.copytree(halves["first"].paths.root, tmp_path / "copy"))
    found, _ = run_compare(None, (str(halves["first"].paths.root), str(copy.paths.root)), None)
    assert set(found.pairs["changed"]) == {"not tested"}
    assert set(found.pairs["why"]) == {"samples in both"}
    assert set(found.pairs["source_layer"]) == {"transcripts"}
    drawn, captions = _drawn_texts(found.pairs)
    assert not any("changed)" in text for text in drawn)
    assert "no difference could be tested" in captions


def test_settings_that_differ_are_listed(halves: dict[str, Project], tmp_path: Path) -> None:
    other = Project.open(shutil.copytree(halves["second"].paths.root, tmp_path / "other"))
    settings = tmp_path / "other" / "project.toml"
    settings.write_text(settings.read_text().replace("stability = 0", "stability = 0\nfdr = 0.01"))
    other.network()
    found, _ = run_compare(other.paths, (str(halves["second"].paths.root), "main"), None)
    told = {row.setting: (row.first, row.second) for row in found.settings.itertuples()}
    assert told["analysis.network.fdr"] == ("0.05", "0.01")
    assert all(not name.startswith("versions") for name in told)
    assert "lost" in set(found.pairs["status"])
    assert "gained" not in set(found.pairs["status"])


def _drawn_texts(pairs: pd.DataFrame) -> tuple[list[str], str]:
    (drawing,) = draw_comparison(pairs, ("first", "second"))
    return [text.get_text() for axes in drawing.figure.axes for text in axes.texts], drawing.caption


def test_a_block_of_one_analysis_alone_is_one_difference(halves: dict[str, Project], tmp_path: Path) -> None:
    """Not one for each of its settings; its features and its values are no differences of what both have."""
    other = Project.open(shutil.copytree(halves["second"].paths.root, tmp_path / "other"))
    settings = tmp_path / "other" / "project.toml"
    table = pd.DataFrame(np.random.default_rng(5).normal(size=(60, 3)), columns=["a", "b", "c"])
    table.index = pd.read_csv(tmp_path / "other" / "samples.tsv", sep="\t").iloc[:, 0]
    table.to_csv(tmp_path / "readings.tsv", sep="\t")
    other.add_block("readings", tmp_path / "readings.tsv", layer="clinical", values="continuous")
    assert 'blocks = "all"' in settings.read_text()
    other.network()
    found, _ = run_compare(other.paths, (str(halves["second"].paths.root), "main"), None)
    told = {row.setting: (row.first, row.second) for row in found.settings.itertuples()}
    assert told["blocks.readings"] == ("", "clinical, in this analysis alone")
    assert [name for name in told if "readings" in name] == ["blocks.readings"]


def test_words_that_name_nothing_are_told(halves: dict[str, Project], tmp_path: Path) -> None:
    here = halves["first"].paths
    with pytest.raises(
        InputError, match="'mian': neither an analysis of this project \\(main\\) nor a folder"
    ):
        run_compare(here, ("main", "mian"), None)
    with pytest.raises(InputError, match="no column 'kegg' of identifiers; it has feature, label"):
        run_compare(here, ("main", str(halves["second"].paths.root)), "kegg")
    with pytest.raises(
        InputError, match=r"have no feature in common by column 'feature'.*--by: feature, label"
    ):
        run_compare(here, ("main", str(halves["without"].paths.root)), "feature")
    bare = Project.create(tmp_path / "bare", title="bare")
    with pytest.raises(InputError, match="which analysis is meant"):
        run_compare(here, ("main", str(bare.paths.root)), None)
