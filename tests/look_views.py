"""Views of small invented blocks with a planted run day, a planted group and one odd sample."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from workbench.look import BlockView, levels_of

DAYS = ("day1", "day2", "day3")


def planted(n: int = 36, p: int = 200, seed: int = 0, odd: int | None = None, **changes: Any) -> BlockView:
    """Return a view: component 1 is the run day, component 2 the group, then nothing but noise.

    ``odd`` names the position of a sample that has a strong pattern of its own.
    """
    rng = np.random.default_rng(seed)
    day, group = np.arange(n) % 3, (np.arange(n) // 3) % 2
    x = rng.normal(size=(n, p))
    x += 2.0 * rng.normal(size=(3, p))[day]
    x[:, : p // 2] += 1.6 * group[:, None] * rng.choice([-1.0, 1.0], p // 2)
    if odd is not None:
        x[odd] += 6.0 * rng.normal(size=p)
    measured = 2.0 ** (x + 12.0)
    measured[measured < np.quantile(measured, 0.05)] = np.nan
    samples = tuple(f"S{i:03d}" for i in range(1, n + 1))
    sheet = {"run_day": np.array(DAYS)[day], "condition": np.array(["control", "drought"])[group]}
    columns = pd.DataFrame({**sheet, "age": rng.normal(50.0, 9.0, n).round(1).astype(str)}, index=samples)
    given: dict[str, Any] = {
        "name": "metabolites",
        "layer": "metabolites",
        "values": "intensities",
        "samples": samples,
        "features": tuple(f"m{j:04d}" for j in range(p)),
        "prepared": x,
        "columns": columns,
        "imputed": np.isnan(measured),
        "measured": measured,
        "groups": levels_of("condition", columns["condition"].tolist(), ["control", "drought"]),
        "adjust": ("run_day",),
        "shape_by": "run_day",
    }
    return BlockView(**{**given, **changes})


def bare(x: np.ndarray, **changes: Any) -> BlockView:
    """Return a view of values alone, with a sample sheet that knows nothing."""
    n, p = x.shape
    samples = tuple(f"S{i}" for i in range(n))
    given: dict[str, Any] = {
        "name": "block",
        "layer": "proteins",
        "values": "log",
        "samples": samples,
        "features": tuple(f"f{j}" for j in range(p)),
        "prepared": x,
        "columns": pd.DataFrame(index=pd.Index(samples)),
    }
    return BlockView(**{**given, **changes})
