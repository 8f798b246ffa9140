"""What is said of private variation: what went, what stays undecided, and which samples were brought back to size."""

from types import SimpleNamespace

import numpy as np

from workbench.engine.private.private_variation import LayerBlock, RealComponent
from workbench.workflow.network.private import named_removals, private_lines
from workbench.workflow.network.screening import BlockRemoval


def component(number, stays, share=0.1):
    shared = "two" if stays == "shared" else ""
    return RealComponent(number, share, shared, 0.5, stays, np.zeros(4), np.zeros(1, int), np.zeros(1))


def removal(block, beside, *components, odd=()):
    rows = LayerBlock(block, block, np.zeros((4, 2)), np.arange(4), np.zeros((4, 0)))
    return BlockRemoval(
        block, beside, components, True, tuple("abcd"), rows, None, np.zeros(2, bool), np.ones(4), dict(odd)
    )


def said(*removals):
    view = SimpleNamespace(settings=SimpleNamespace(level=None))
    return private_lines(view, SimpleNamespace(removals=removals, off=()), {"one": 3})


def test_every_fate_of_a_component_is_told():
    lines = said(
        removal("one", "", component(1, "", 0.3), component(2, "shared"), component(3, "entangled", 0.07)),
        removal("two", "", component(1, "weak"), odd={"S07": 0.38, "S02": 0.5}.items()),
    )
    assert lines == [
        "one: 1 private component removed (30 % of its variance, private.tsv); 1 shared with two stays",
        "two: no private variation to remove",
        "one: 1 component (7.0 % of its variance) cannot be told from what other layers share, and stays: the "
        "intervals of its edges are of correlations with it left in (guide private)",
        "two: 2 odd samples, values large throughout, brought back to size: S07 (x 0.38) and S02 (x 0.50)",
        "one: 3 features with heavy tails enter by the normal scores of ranks (guide private)",
    ]


def test_a_block_with_a_removal_for_each_pair_is_named_with_the_other_block():
    pairs = [removal("one", "two"), removal("two", "one"), removal("one", "three"), removal("three", "one")]
    assert [name for name, _ in named_removals(pairs)] == [
        "one beside two",
        "two",
        "one beside three",
        "three",
    ]
