"""Pairs that correlate in one group alone, planted in a study on disk."""

import numpy as np
import pandas as pd

from workbench import Project


def test_a_pair_that_turns_round_between_the_groups_is_found(tmp_path):
    rng = np.random.default_rng(4)
    group = np.repeat(["control", "treated"], 30)
    x, y = rng.normal(size=(60, 12)), rng.normal(size=(60, 9))
    y[:, 4] = x[:, 7] * np.where(group == "treated", -1.0, 1.0) + 0.2 * y[:, 4]
    names = [f"S{k:02d}" for k in range(60)]
    pd.DataFrame({"sample": names, "group": group}).to_csv(tmp_path / "samples.csv", index=False)
    for name, values in (("a", x), ("b", y)):
        columns = [f"{name}{k:02d}" for k in range(values.shape[1])]
        frame = pd.DataFrame(values, index=pd.Index(names, name="sample"), columns=columns)
        frame.to_csv(tmp_path / f"{name}.csv")
    project = Project.create(tmp_path / "study")
    project.add_samples(tmp_path / "samples.csv", group="group")
    project.add_block("one", tmp_path / "a.csv", layer="proteins", values="continuous")
    project.add_block("two", tmp_path / "b.csv", layer="lipids", values="continuous")
    settings = project.paths.settings.read_text()
    project.paths.settings.write_text(settings + "permutations = 20\nrepeats = 1\nnetwork.stability = 2\n")
    project.network("main")
    table = project.result("main").differential
    assert (table.iloc[0]["source"], table.iloc[0]["target"]) == ("a07", "b04")
    assert len(table) == 1
    assert table.iloc[0]["r_first"] > 0.8 > -0.8 > table.iloc[0]["r_second"]
    edges = project.result("main").edges
    assert ("a07", "b04") not in set(zip(edges["source"], edges["target"], strict=True))
