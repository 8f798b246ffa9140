"""The referee: families of simulated studies, and what the screen finds in them beside two yardsticks.

Run: `python tests/benchmarks/referee.py --out FOLDER [--families WORD...] [--null 400] [--other 100]`. Every study
adds a line to `FOLDER/FAMILY.tsv`; a second run goes on where the first one stopped, and several may share the
families (`--part 1/2`, `--part 2/2`). `--report` alone reads what is there and writes `FOLDER/referee.tsv`:
for each family the share of studies with any edge, the realised false-discovery rate with its standard error,
the one-sided p of "not above 5 %" (Holm over all families in `p_holm`), and recall beside both yardsticks and
beside the pairs' own tests without modules (`alone_recall`).

Measured (seeds from 0) with modules and odd samples brought to size: 19,000 of the campaign's 19,600 studies. All 37
families in which nothing is shared, 400 studies each: 5.05 % of 14,800 with an edge. The highest is heavy tails at n =
48: 0.085 (p 0.0021, Holm 0.17; by hand 0.69), all by the pairs' own tests, one or two edges in a study; where features
are heavy-tailed the program says so. Next is n = 12 with 0.075, which is what the pairs give by hand. 43 of 48 others,
100 studies each (62 of three layers, 43 of trends): realised rate 0.013 to 0.053. None of the 80 is above 5 % (Holm at
0.01). One sample odd in both layers at n = 60: rate 0.033 +- 0.001, recall 0.96 (alone 0.77, oracle 0.74); before,
0.057 and 0.62.

| family | realised rate | recall | alone | by hand | oracle |
|---|---|---|---|---|---|
| strength 1.0, n = 96 | 0.028 | 0.96 | 0.69 | 0.13 | 0.66 |
| strength 1.4, n = 96 | 0.039 | 0.99 | 0.98 | 0.70 | 0.97 |
| strength 1.4, n = 48 | 0.026 | 0.85 | 0.54 | 0.17 | 0.54 |
| strength 0.7, n = 200 | 0.022 | 0.95 | 0.58 | 0.04 | 0.52 |
| strength 1.8, n = 30 | 0.025 | 0.41 | 0.24 | 0.15 | 0.21 |
| small, strength 2.5, n = 24 | 0.037 | 0.78 | 0.78 | 0.73 | 0.89 |

By hand nowhere more than 0.3 points above, the pairs' own tests nowhere more than 0.02. Not run to the
end with this version: three layers, trends, and pairs, visits, Spearman and intervals with something shared. The
families odd, small, modules and dense, and half of those without anything shared, ran before the limit for odd
samples in blocks of few features. Intervals cover 0.96 to 0.98 where the population
correlation after the same removal is known, but 0.63 with two strong factors in all features (dense-strong), where
what is private cannot be told and stays: there 0.96 hold the correlation with it left in (30 studies), and the
program says that it is left in. About 0.12 s of processor a study, 40 minutes for all.
"""

from __future__ import annotations

import argparse
import sys
import time
import warnings
from pathlib import Path

import numpy as np
import pandas as pd
from scipy import stats

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

from referee_families import FAMILIES, NULL_STUDIES, OTHER_STUDIES, Family
from referee_routes import Outcome, run_study

LEVEL, HOLM_LEVEL = 0.05, 0.01
FIELDS = list(Outcome.__dataclass_fields__)


def run_family(folder: Path, name: str, family: Family, studies: int) -> None:
    """Add the studies that are not there yet."""
    path = folder / f"{name}.tsv"
    done = set(pd.read_csv(path, sep="\t")["seed"]) if path.exists() else set()
    start = time.perf_counter()
    with path.open("a") as out:
        if not done:
            out.write("\t".join(FIELDS) + "\n")
        for seed in range(studies):
            if seed not in done:
                out.write("\t".join(run_study(name, family, seed).row()) + "\n")
                out.flush()
    print(f"{name}: {studies - len(done)} studies in {time.perf_counter() - start:.0f} s", flush=True)


def summary(rows: pd.DataFrame, null: bool) -> dict[str, float]:
    """Return one family's figures."""
    share = rows["false"] / rows["edges"].clip(lower=1)
    hand = rows["hand_false"] / rows["hand_edges"].clip(lower=1)
    count, spread = len(rows), share.std(ddof=1)
    error = spread / np.sqrt(count) if count > 1 else np.nan
    any_edge = int((rows["edges"] > 0).sum())
    if null:
        p = stats.binomtest(any_edge, count, LEVEL, alternative="greater").pvalue
    elif error > 0:
        p = stats.t.sf((share.mean() - LEVEL) / error, count - 1)
    else:
        p = 1.0 if share.mean() <= LEVEL else 0.0
    figures = {
        "studies": count,
        "any_edge": any_edge / count,
        "false_rate": share.mean(),
        "error": error,
        "p": p,
        "alone_false_rate": (rows["alone_false"] / rows["alone_edges"].clip(lower=1)).mean(),
        "alone_any_edge": float((rows["alone_edges"] > 0).mean()),
        "module_share": (rows["module_edges"] / rows["edges"].clip(lower=1)).mean(),
        "module_false_rate": (rows["module_false"] / rows["module_edges"].clip(lower=1)).mean(),
        "hand_false_rate": hand.mean(),
        "hand_any_edge": float((rows["hand_edges"] > 0).mean()),
        "oracle_false_rate": (rows["oracle_false"] / rows["oracle_edges"].clip(lower=1)).mean(),
    }
    if not null:
        figures |= _recall(rows)
    if rows["intervals"].sum():
        figures["coverage"] = rows["covered"].sum() / rows["intervals"].sum()
    for name in ("real", "removed", "lost", "left", "off"):
        figures[name] = rows[name].mean()
    return figures


def _recall(rows: pd.DataFrame) -> dict[str, float]:
    true = rows["true"]
    ours = ((rows["edges"] - rows["false"]) / true).mean()
    oracle = ((rows["oracle_edges"] - rows["oracle_false"]) / true).mean()
    return {
        "recall": ours,
        "alone_recall": ((rows["alone_edges"] - rows["alone_false"]) / true).mean(),
        "hand_recall": ((rows["hand_edges"] - rows["hand_false"]) / true).mean(),
        "hand_cut_recall": rows["hand_cut"].mean(),
        "oracle_recall": oracle,
        "of_oracle": ours / oracle if oracle > 0 else np.nan,
    }


def holm(p: np.ndarray) -> np.ndarray:
    """Return p adjusted over all families (Holm 1979, Scand J Stat 6:65)."""
    order = np.argsort(p)
    steps = np.maximum.accumulate(p[order] * np.arange(p.size, 0, -1))
    adjusted = np.empty(p.size)
    adjusted[order] = np.minimum(steps, 1.0)
    return adjusted


def report(folder: Path) -> pd.DataFrame:
    """Return and write the table of all families that are there."""
    lines = []
    for name, family in FAMILIES.items():
        path = folder / f"{name}.tsv"
        rows = pd.read_csv(path, sep="\t") if path.exists() else pd.DataFrame()
        if len(rows):
            lines.append({"family": name, **summary(rows, family.null)})
    table = pd.DataFrame(lines)
    table.insert(6, "p_holm", holm(table["p"].to_numpy()))
    table.to_csv(folder / "referee.tsv", sep="\t", index=False, float_format="%.4g")
    return table


def main() -> None:
    """Run what is asked for, then print the report."""
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument("--out", type=Path, required=True)
    parser.add_argument("--families", nargs="*", default=[""], help="families whose name holds a word")
    parser.add_argument(
        "--null", type=int, default=NULL_STUDIES, help="studies of each family with nothing shared"
    )
    parser.add_argument("--other", type=int, default=OTHER_STUDIES, help="studies of each other family")
    parser.add_argument("--part", default="1/1", help="this part of the families, as 1/2")
    parser.add_argument("--report", action="store_true", help="run nothing")
    chosen = parser.parse_args()
    warnings.simplefilter("error")
    chosen.out.mkdir(parents=True, exist_ok=True)
    part, parts = (int(word) for word in chosen.part.split("/"))
    names = [name for name in FAMILIES if any(word in name for word in chosen.families)]
    for name in names[part - 1 :: parts] if not chosen.report else []:
        family = FAMILIES[name]
        run_family(chosen.out, name, family, chosen.null if family.null else chosen.other)
    table = report(chosen.out)
    print(table.to_string(index=False, float_format=lambda value: f"{value:.3f}"))
    above = table.loc[table["p_holm"] <= HOLM_LEVEL, "family"].tolist()
    print(f"families above {LEVEL} (Holm at {HOLM_LEVEL}): {', '.join(above) or 'none'}")


if __name__ == "__main__":
    main()
