"""The handbook says what the program does: every key, column and command is in it."""

import pytest

from workbench.cli.guide import pages
from workbench.settings import (
    AnalysisSettings,
    BlockSettings,
    NetworkSettings,
    PathwaySettings,
    SamplesSettings,
    StudySettings,
)
from workbench.workflow.network.networking import EDGE_COLUMNS, FEATURE_COLUMNS

SECTIONS = [StudySettings, SamplesSettings, BlockSettings, AnalysisSettings, NetworkSettings, PathwaySettings]


@pytest.mark.parametrize("section", SECTIONS, ids=lambda section: section.__name__)
def test_every_key_of_the_settings_is_explained(section):
    text = pages()["settings"]
    lacking = [key for key in section.model_fields if f"`{key}`" not in text and f".{key}]" not in text]
    assert lacking == []


def test_every_column_of_edges_and_features_is_named():
    words = set(pages()["files"].replace("`", " ").split())
    assert set(EDGE_COLUMNS) | set(FEATURE_COLUMNS) <= words


def test_columns_of_a_real_run_are_named(run_once):
    words = set(pages()["files"].replace("`", " ").replace(",", " ").split())
    for file in ("edges.tsv", "group_pairs.tsv", "features.tsv"):
        header = (run_once / "results" / "main" / file).read_text().splitlines()[0].split("\t")
        assert {name for name in header if not name.startswith("pair")} <= words


def test_pages_are_listed_and_shown(command):
    code, out, _ = command("guide")
    assert (code, "workbench guide edges" in out) == (0, True)
    assert all(len(line.split()) > 3 for line in out.splitlines()[1:]), "every page says what it is about"
    for topic, text in pages().items():
        code, out, _ = command("guide", topic)
        assert code == 0
        assert out.strip() == text.strip()


def test_an_unknown_page_is_named_with_the_nearest(command):
    code, _, err = command("guide", "edgs")
    assert (code, "did you mean 'edges'" in err) == (2, True)


def test_the_commands_of_the_pages_exist(command):
    listed = command("--help")[1].split("Commands:")[1].split("\n\n")[0]
    names = {line.split()[0] for line in listed.splitlines() if line.strip()}
    for topic, text in pages().items():
        for line in text.replace("`", "\n").splitlines():
            words = line.split()
            if words[:1] == ["workbench"] and len(words) > 1 and not words[1].startswith("-"):
                assert words[1] in names, f"page {topic}: workbench {words[1]}"
