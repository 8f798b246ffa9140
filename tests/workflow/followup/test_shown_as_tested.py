"""What is shown of a pair, and what speaks for and against it, rests on the values that were tested."""

import numpy as np
import pandas as pd
import pytest

from workbench import Project
from workbench.workflow.followup.residual_blocks import ResidualViews
from workbench.workflow.state import load_state

QUICK = "permutations = 20\nrepeats = 1\nnetwork.stability = 0\n"


def blocks():
    """Return two blocks of 60 samples: private variation, heavy tails, one sample odd in both, and modules."""
    rng = np.random.default_rng(3)
    module = rng.normal(size=60)
    tables = []
    for width in (90, 50):
        x = rng.standard_t(3, size=(60, width)) + 2.0 * rng.normal(size=(60, 2)) @ rng.normal(size=(2, width))
        x[:, :8] += 3.0 * module[:, None]
        x[17] += 6.0 * rng.normal(size=width)
        tables.append(x)
    return tables


def study(folder, settings):
    names = [f"S{k:02d}" for k in range(60)]
    sheet = pd.DataFrame({"sample": names, "batch": np.arange(60) % 3})
    sheet.to_csv(folder / "samples.csv", index=False)
    project = Project.create(folder / "study")
    project.add_samples(folder / "samples.csv", adjust=["batch"])
    for name, layer, x in zip(("one", "two"), ("proteins", "lipids"), blocks(), strict=True):
        columns = [f"{name}{k:02d}" for k in range(x.shape[1])]
        pd.DataFrame(x, index=pd.Index(names, name="sample"), columns=columns).to_csv(folder / f"{name}.csv")
        project.add_block(name, folder / f"{name}.csv", layer=layer, values="continuous")
    text = project.paths.settings.read_text()
    project.paths.settings.write_text(text + settings + QUICK)
    project.network("main")
    return project


@pytest.mark.parametrize(
    ("correlation", "remove"), [("pearson", "true"), ("spearman", "true"), ("spearman", "false")]
)
def test_show_and_pathways_see_the_r_of_the_screen(tmp_path, correlation, remove):
    settings = f'network.correlation = "{correlation}"\nnetwork.remove_private = {remove}\n'
    project = study(tmp_path, settings)
    edges = project.result("main").edges
    assert len(edges) > 20
    held = ResidualViews.of_analysis(load_state(project.paths), "main").of(("one", "two")).values
    for _, edge in edges.iloc[[0, len(edges) // 2, -1]].iterrows():
        [story] = project.show(edge["source"], edge["target"])
        assert story.numbers["r_adjusted"] == pytest.approx(edge["r"], abs=1e-8)
        i, j = int(edge["source"][3:]), int(edge["target"][3:])
        assert held["one"][:, i] @ held["two"][:, j] == pytest.approx(edge["r"], abs=1e-8)
    private = project.result("main").private
    assert bool(len(private)) == (remove == "true")
    assert (edges["r_without_one"].abs() <= edges["r"].abs() + 1e-9).all()
    odd = project.result("main").record["private_variation"]
    if (correlation, remove) == ("pearson", "true"):
        found = odd["odd_brought_back_to_size"]
        assert {name: min(sizes, key=sizes.get) for name, sizes in found.items()} == {
            "one": "S17",
            "two": "S17",
        }
    if correlation == "spearman":
        np.testing.assert_allclose(edges["r_spearman"], edges["r"], atol=1e-9)
