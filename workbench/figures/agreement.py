"""Figure of the agreement between blocks."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes

from workbench.figures.style import GUIDE, INK, SMALL, figure_name, note, plain_ticks, say
from workbench.figures.variance import BLUES, SIGNIFICANT
from workbench.look.between import BetweenLook
from workbench.look.words import small

_PER_CELL = 6


def agreement_map(look: BetweenLook, axes: Axes) -> Axes:
    """Draw every two blocks: adjusted RV under the diagonal, Procrustes correlation above it, with p.

    Dark is strong; figures of pairs that do not pass p 0.05 are grey, pairs without a figure are crossed out.
    """
    count = len(look.blocks)
    if count < 2:
        return note(axes, "one block: nothing to compare")
    values = np.full((count, count), np.nan)
    texts: dict[tuple[int, int], tuple[str, float]] = {}
    place = {name: i for i, name in enumerate(look.blocks)}
    for pair in look.pairs:
        i, j = sorted((place[pair.one], place[pair.other]))
        found = pair.found
        if found is None:
            texts[i, j] = texts[j, i] = ("x", 1.0)
            continue
        values[j, i], values[i, j] = max(found.rv_adjusted, 0.0), found.procrustes
        texts[j, i] = (f"{found.rv_adjusted:.2f}\n{_p(found.rv_p)}", found.rv_p)
        texts[i, j] = (f"{found.procrustes:.2f}\n{_p(found.procrustes_p)}", found.procrustes_p)
    axes.imshow(values, cmap=BLUES, vmin=0.0, vmax=1.0, interpolation="nearest")
    for (i, j), (text, p) in texts.items():
        ink = "white" if values[i, j] > 0.45 else (INK if p <= SIGNIFICANT else GUIDE)
        size = SMALL if count <= _PER_CELL else SMALL * _PER_CELL / count
        say(axes, float(j), float(i), text, ha="center", va="center", fontsize=size, color=ink)
    names = [figure_name(name, 16) for name in look.blocks]
    plain_ticks(axes, "x", range(count), names, rotation=30, ha="right")
    plain_ticks(axes, "y", range(count), names)
    axes.tick_params(length=0.0)
    axes.spines[:].set_visible(False)
    axes.set_title("above the diagonal: Procrustes correlation;\nbelow: adjusted RV")
    return axes


def _p(p: float) -> str:
    return "no p" if np.isnan(p) else f"p {small(p)}"
