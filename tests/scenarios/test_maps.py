"""The page that people look at: nothing overlaps, nothing is cut, the same bytes each time."""

import xml.etree.ElementTree as ElementTree
from dataclasses import replace

import numpy as np
import pytest
from matplotlib.image import imread
from matplotlib.text import Annotation
from small import changed, put
from wellshed.scenarios.answering import answer
from wellshed.scenarios.drawing import CaseMap, map_of, save_maps
from wellshed.scenarios.maps import draw_map
from wellshed.scenarios.reading import load

LONG = "A title that goes on and on and on, as titles of reports of water utilities in small towns are wont to do"


@pytest.fixture(scope="module")
def contents(tmp_path_factory):
    """Content of maps of several sites: small, with a case, without levels, a tenth and a hundred times as wide."""
    folder = tmp_path_factory.mktemp("maps")
    plain = answer(load(put(folder)))
    bare = changed("levels:\n  file: levels.csv\n  error: 0.05\n", "", changed("A small place", LONG))
    (folder / "bare").mkdir()
    return {
        "base": map_of(plain, "base").content,
        "more": map_of(plain, "more").content,
        "bare": map_of(answer(load(put(folder / "bare", bare))), "base").content,
    }


def boxes(figure):
    """Pixel boxes of every text inside the axes, and of all text and the legend outside."""
    renderer = figure.canvas.get_renderer()
    (axes,) = figure.axes
    inside = [t for t in axes.texts if t.get_text() and not (isinstance(t, Annotation) and t.arrow_patch)]
    outside = [t for t in figure.texts if t.get_text()]
    return (
        [t.get_window_extent(renderer) for t in inside],
        [t.get_window_extent(renderer) for t in outside],
        figure.legends[0].get_window_extent(renderer),
        axes.get_window_extent(renderer),
    )


@pytest.mark.parametrize("name", ["base", "more", "bare"])
def test_no_text_overlaps_and_nothing_leaves_the_page(contents, name):
    figure = draw_map(contents[name])
    figure.canvas.draw()
    inside, outside, legend, frame = boxes(figure)
    assert len(inside) >= 5
    for i, a in enumerate(inside):
        for b in inside[:i]:
            # turned labels are compared by their upright boxes, which is on the safe side
            assert not a.overlaps(b)
        assert frame.x0 <= a.x0 and a.x1 <= frame.x1 and frame.y0 <= a.y0 and a.y1 <= frame.y1  # noqa: PT018
    page = figure.bbox
    for box in (*outside, legend, frame):
        assert page.x0 <= box.x0 and box.x1 <= page.x1 and page.y0 <= box.y0 and box.y1 <= page.y1  # noqa: PT018
    assert legend.y1 < frame.y0
    for i, a in enumerate(outside):
        assert not a.overlaps(legend)
        assert not any(a.overlaps(b) for b in outside[:i])


def test_scales_are_equal_and_true(contents):
    figure = draw_map(contents["base"])
    (axes,) = figure.axes
    (x0, y0), (x1, y1) = axes.transData.transform([(0, 0), (100, 100)])
    assert x1 - x0 == pytest.approx(y1 - y0, rel=1e-9)


def test_files_are_whole_and_the_same_each_time(contents, tmp_path):
    for stem in ("a", "b"):
        save_maps([(CaseMap(contents[k]), tmp_path / f"{stem}_{k}") for k in ("base", "more")], stem == "b")
    for kind in ("base.png", "more.png"):
        assert (tmp_path / f"a_{kind}").read_bytes() == (tmp_path / f"b_{kind}").read_bytes()
    image = imread(tmp_path / "a_base.png")
    assert image.shape[0] > 600
    assert np.std(image[..., :3]) > 0.05
    root = ElementTree.parse(tmp_path / "a_more.svg").getroot()
    words = "".join(root.itertext())
    assert "Case: more" in words  # text stays text
    assert "Steady, one layer, no vertical resistance" in words


def test_the_map_says_when_a_check_failed(contents):
    failed = replace(contents["base"], incomplete=("balance",))
    words = [t.get_text() for t in draw_map(failed).axes[0].texts]
    assert "INCOMPLETE" in words
    assert "INCOMPLETE" not in [t.get_text() for t in draw_map(contents["base"]).axes[0].texts]


def test_states_of_reaches_differ_without_colour(contents):
    styles = {
        (line.get_linestyle(), round(line.get_linewidth(), 1)) for line in draw_map(contents["base"]).axes[0].lines
    }
    assert len(styles) >= 3
