"""What is said of the edges that a module carries alone, and of the couples that carry none."""

from types import SimpleNamespace

import numpy as np

from workbench.workflow.network.record import support_counts, support_lines


def screen(support, couples=0, mixed=0):
    return SimpleNamespace(support=np.array(support), couples=couples, mixed=mixed)


def test_edges_that_their_module_alone_carries_are_counted():
    found = screen(["pair", "module", "both", "module", "both", "both"], couples=2)
    assert support_counts(found) == {"both": 3, "module": 2, "pair": 1}
    assert support_lines(found) == ["2 edges are carried by their module alone (column support; guide edges)"]


def test_couples_that_mix_factors_are_told_and_nothing_is_said_where_nothing_is_to_say():
    assert support_lines(screen(["pair"], couples=3, mixed=1)) == [
        "1 of 3 couples of shared components mix several factors: no edge is carried by them"
    ]
    assert support_lines(screen([])) == []
