"""The figure of private variation tells what was removed from what stays."""

from workbench.figures.private import ComponentBar, draw_private


def test_what_stays_undecided_is_not_drawn_as_removed() -> None:
    bars = {
        "one": [ComponentBar(1, 0.3, ""), ComponentBar(2, 0.2, "shared"), ComponentBar(3, 0.1, "weak")],
        "two": [ComponentBar(1, 0.2, "entangled")],
    }
    [drawing] = draw_private(bars)
    one, two = drawing.figure.axes[:2]
    assert [text.get_text() for text in one.get_legend().get_texts()] == [
        "shared, stays",
        "undecided, stays",
        "private, removed",
    ]
    assert [text.get_text() for text in two.get_legend().get_texts()] == ["undecided, stays"]
    assert "one: 3 real components, 1 removed; two: 1 real components, 0 removed" in drawing.caption
