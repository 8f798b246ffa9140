"""Files of the figures: the same bytes twice, legal, of print resolution, with captions that warn."""

from __future__ import annotations

import dataclasses
import io
import time

import matplotlib as mpl
import numpy as np
import pytest
from look_views import planted
from lxml import etree
from PIL import Image

from workbench.figures import caption_text, draw_between, draw_look, figure_files
from workbench.look import look_at_block, look_between


def files(**changes: object) -> dict[str, bytes]:
    view = dataclasses.replace(planted(n=24, p=80), **changes)
    return dict(figure_files(draw_look(look_at_block(view, seed=1))))


FILES = files()


def test_a_second_run_gives_the_same_bytes(monkeypatch: pytest.MonkeyPatch) -> None:
    """With the clock moved by a day, and with settings of the user that draw otherwise."""
    now = time.time()
    monkeypatch.setattr(time, "time", lambda: now + 86_400.0)
    with mpl.rc_context(
        {"font.size": 20.0, "axes.facecolor": "red", "svg.hashsalt": "mine", "savefig.dpi": 50}
    ):
        assert files() == FILES


def test_the_user_s_settings_stay_as_they_were() -> None:
    with mpl.rc_context({"font.size": 21.0}):
        files()
        assert mpl.rcParams["font.size"] == 21.0


def test_every_figure_comes_as_svg_and_as_png() -> None:
    endings = {
        name: {n.rsplit(".")[1] for n in FILES if n.startswith(f"{name}.")}
        for name in (n[:-4] for n in FILES)
    }
    assert all(found == {"svg", "png"} for found in endings.values())
    assert set(endings) == {
        "explained_variance", "scores_1_2", "scores_3_4", "correlation_circle", "biplot", "loadings", "association",
        "outliers", "gaps", "distributions",
    }  # fmt: skip


def test_vector_files_are_legal_and_hold_no_date_and_no_script() -> None:
    markup = tuple(f"<script>alert({j})</script>--&" for j in range(80))
    for name, data in files(features=markup, name="a--b<c>").items():
        if name.endswith(".svg"):
            root = etree.fromstring(data)
            assert not root.findall(".//{*}date")
            assert not root.findall(".//{*}script")


def test_pixel_files_have_print_resolution() -> None:
    image = Image.open(io.BytesIO(FILES["scores_1_2.png"]))
    assert image.info["dpi"] == pytest.approx((300.0, 300.0), abs=0.1)
    assert image.size[0] == 1050
    assert np.asarray(image.convert("L")).std() > 5.0


def test_captions_say_what_may_not_be_concluded() -> None:
    drawings = draw_look(look_at_block(planted(odd=3), seed=1))
    warning = {"explained_variance": "not for that reason biology", "scores_1_2": "no reason to leave one out",
               "correlation_circle": "not thereby", "biplot": "not to be compared", "loadings": "convention",
               "association": "cannot tell which", "outliers": "not left out for that", "gaps": "point to",
               "distributions": "do not show"}  # fmt: skip
    captions = {drawing.name: drawing.caption for drawing in drawings}
    for name, words in warning.items():
        assert words in captions[name]
    text = caption_text(drawings)
    assert all(f"{name}\n{caption}\n" in text for name, caption in captions.items())


def test_captions_are_in_the_files() -> None:
    caption = draw_look(look_at_block(planted(n=24, p=80), seed=1))[0].caption
    assert Image.open(io.BytesIO(FILES["explained_variance.png"])).text["Description"] == caption
    assert caption.encode() in FILES["explained_variance.svg"]


def test_agreement_is_drawn_for_two_blocks_and_not_for_one() -> None:
    views = [planted(), dataclasses.replace(planted(seed=2), name="lipids")]
    assert draw_between(look_between(views[:1], seed=1)) == ()
    one, other = (
        dict(figure_files(draw_between(look_between(views, seed=1, permutations=49)))) for _ in range(2)
    )
    assert set(one) == {"agreement.svg", "agreement.png"}
    assert one == other
