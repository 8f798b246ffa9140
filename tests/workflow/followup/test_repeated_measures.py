"""Several samples of one subject, from delivered tables to edges: what is found, and what is not made up."""

import numpy as np
import pandas as pd
import pytest

from workbench import Project
from workbench.errors import InputError
from workbench.workflow.analysis_view import view_analysis
from workbench.workflow.followup.residual_blocks import ResidualViews
from workbench.workflow.network.planning import design_sizes
from workbench.workflow.state import load_state

QUICK = "permutations = 20\nrepeats = 1\nnetwork.stability = 0\n"


def study(folder, x, y, sheet, **factors):
    names = [f"S{k:03d}" for k in range(len(sheet))]
    sheet.assign(sample=names)[["sample", *sheet]].to_csv(folder / "samples.csv", index=False)
    for name, values in (("a", x), ("b", y)):
        columns = [f"{name}{k:02d}" for k in range(values.shape[1])]
        frame = pd.DataFrame(values, index=pd.Index(names, name="sample"), columns=columns)
        frame.to_csv(folder / f"{name}.csv")
    project = Project.create(folder / "study")
    project.add_samples(folder / "samples.csv", subject="donor", time="day", **factors)
    project.add_block("one", folder / "a.csv", layer="proteins", values="continuous")
    project.add_block("two", folder / "b.csv", layer="lipids", values="continuous")
    return project


def ask(project, level):
    text = project.paths.settings.read_text()
    project.paths.settings.write_text(text + f'level = "{level}"\n' + QUICK)
    project.network("main")
    edges = project.result("main").edges
    return list(zip(edges["source"], edges["target"], strict=True))


def visits(subjects, times):
    donors = np.repeat([f"D{k:02d}" for k in range(subjects)], times)
    return pd.DataFrame({"donor": donors, "day": np.tile(np.arange(times), subjects)})


@pytest.fixture
def blocks():
    """Return two blocks of 24 donors with 3 visits: one pair changes together, another differs between donors."""
    rng = np.random.default_rng(8)
    sheet = visits(24, 3)
    person = np.repeat(np.arange(24), 3)
    x = rng.normal(size=(72, 10)) + 3.0 * rng.normal(size=(24, 10))[person]
    y = rng.normal(size=(72, 8)) + 3.0 * rng.normal(size=(24, 8))[person]
    change, trait = rng.normal(size=72), 3.0 * rng.normal(size=24)[person]
    x[:, 2] += 3.0 * change
    y[:, 5] += 3.0 * change
    x[:, 7], y[:, 1] = trait + 0.3 * rng.normal(size=72), trait + 0.3 * rng.normal(size=72)
    trend = 4.0 * sheet["day"].to_numpy()[:, None]
    return x + trend, y + trend, sheet


def test_between_visits_changes_are_found_and_a_common_trend_is_not(tmp_path, blocks):
    assert ask(study(tmp_path, *blocks), "visits") == [("a02", "b05")]


def test_between_subjects_traits_are_found(tmp_path, blocks):
    found = ask(study(tmp_path, *blocks), "subjects")
    assert found[0] == ("a07", "b01")
    assert ("a02", "b05") not in found


def test_without_a_level_nothing_is_pooled(tmp_path, blocks):
    project = study(tmp_path, *blocks)
    with pytest.raises(InputError, match="column 'donor' has several samples of one subject"):
        project.network("main")


@pytest.mark.parametrize(
    ("level", "pair", "rows"), [("visits", ("a02", "b05"), 72), ("subjects", ("a07", "b01"), 24)]
)
def test_a_pair_is_shown_at_the_level_that_was_asked_for(tmp_path, blocks, level, pair, rows):
    project = study(tmp_path, *blocks)
    ask(project, level)
    [story] = project.show(*pair)
    assert story.lines[0].startswith("an edge: r = ")
    assert story.numbers["r_adjusted"] == pytest.approx(story.numbers["r"], abs=1e-8)
    assert story.drawing is not None
    view = view_analysis(load_state(project.paths), "main")
    sizes = design_sizes(view, [view.shared(("one", "two"))], within=False)
    assert sizes == [(48, 2) if level == "visits" else (24, 1)]  # 2 changes a donor less two for the course
    assert f"on {rows} samples" in story.drawing.caption


@pytest.fixture
def hidden():
    """Return blocks whose private variation, of visits and of donors, hides a pair that goes together in both."""
    rng = np.random.default_rng(9)
    sheet = visits(30, 4)
    person = np.repeat(np.arange(30), 4)
    shared = 1.6 * rng.normal(size=120) + 3.0 * rng.normal(size=30)[person]
    tables = []
    for width, place in ((120, 3), (60, 7)):
        states = rng.normal(size=(120, 2)) + rng.normal(size=(30, 2))[person]
        x = rng.normal(size=(120, width)) + rng.normal(size=(30, width))[person]
        x += 2.0 * states @ rng.normal(size=(2, width))
        x[:, place] += shared
        tables.append((x, states))
    (x, states), (y, _) = tables
    return x, y, sheet.assign(state=states[:, 0])


@pytest.mark.parametrize(("level", "correlation"), [("visits", "pearson"), ("subjects", "spearman")])
def test_private_variation_is_removed_and_every_route_sees_the_same_r(tmp_path, hidden, level, correlation):
    project = study(tmp_path, *hidden)
    found = ask(project, f'{level}"\nnetwork.correlation = "{correlation}')
    assert ("a03", "b07") in found
    private = project.result("main").private
    assert set(private["block"]) == {"one", "two"}
    assert private["goes_with"].str.contains("state").any()
    edge = project.result("main").edges.iloc[0]
    assert edge["n"] == 120
    assert edge["changes" if level == "visits" else "subjects"] == (90 if level == "visits" else 30)
    [story] = project.show(edge["source"], edge["target"])
    assert story.numbers["r_adjusted"] == pytest.approx(edge["r"], abs=1e-8)
    assert "private variation of one" in story.drawing.caption
    views = ResidualViews.of_analysis(load_state(project.paths), "main")
    held = views.of(("one", "two")).values
    places = int(edge["source"][1:]), int(edge["target"][1:])
    assert held["one"][:, places[0]] @ held["two"][:, places[1]] == pytest.approx(edge["r"], abs=1e-8)


def test_changes_that_turn_round_between_groups_of_subjects_are_found(tmp_path, blocks):
    x, y, sheet = blocks
    arm = np.repeat(np.arange(24) % 2, 3)
    turned = np.where(arm == 1, -1.0, 1.0) * (x[:, 6] - 4.0 * sheet["day"])
    y[:, 3] = 2.0 * turned + 4.0 * sheet["day"] + y[:, 3] / 3.0
    project = study(tmp_path, x, y, sheet.assign(arm=np.array(["x", "y"])[arm]), group="arm")
    ask(project, "visits")
    table = project.result("main").differential
    assert list(zip(table["source"], table["target"], strict=True)) == [("a06", "b03")]
    assert table.iloc[0]["r_first"] > 0.7
    assert table.iloc[0]["r_second"] < -0.7
    assert (table.iloc[0]["n_first"], table.iloc[0]["n_second"]) == (24, 24)
