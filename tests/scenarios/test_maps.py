"""The page that people look at: nothing overlaps, nothing is cut, the same bytes each time."""

import sys
import xml.etree.ElementTree as ElementTree
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from matplotlib.image import imread
from matplotlib.text import Annotation
from small import changed, put
from wellshed.scenarios import answering, desk
from wellshed.scenarios.answering import answer
from wellshed.scenarios.drawing import draw
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
        "base": plain.maps["base"],
        "more": plain.maps["more"],
        "bare": answer(load(put(folder / "bare", bare))).maps["base"],
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


def at_a_desk(contents):
    with desk.DrawingDesk() as drawing:
        for case in ("base", "more"):
            drawing.take(case, contents[case])
        return drawing.drawings()


def test_files_are_whole_and_the_same_wherever_they_are_drawn(contents, tmp_path):
    here = {case: {kind: draw(contents[case], kind) for kind in desk.KINDS} for case in ("base", "more")}
    assert at_a_desk(contents) == here
    (tmp_path / "base.png").write_bytes(here["base"]["png"])
    image = imread(tmp_path / "base.png")
    assert image.shape[0] > 600
    assert np.std(image[..., :3]) > 0.05
    words = "".join(ElementTree.fromstring(here["more"]["svg"]).itertext())
    assert "Case: more" in words  # text stays text
    assert "Steady, one layer, no vertical resistance" in words


def test_maps_are_drawn_here_when_the_other_process_cannot(contents, monkeypatch):
    monkeypatch.setattr(desk, "COMMAND", [sys.executable, "-c", "raise SystemExit(1)"])
    found = at_a_desk(contents)
    assert found["more"]["svg"] == draw(contents["more"], "svg")
    assert set(found) == {"base", "more"}


def test_an_error_in_drawing_is_raised_as_usual(contents):
    with desk.DrawingDesk() as drawing, pytest.raises(TypeError):
        drawing.take("base", replace(contents["base"], footer=None))
        drawing.drawings()


def test_nothing_is_left_of_a_desk(contents):
    with desk.DrawingDesk() as drawing:
        drawing.take("base", contents["base"])
        folder, process = Path(drawing._folder.name), drawing._process
    assert not folder.exists()
    assert process.poll() is not None


def test_the_map_says_when_a_check_failed(contents):
    failed = replace(contents["base"], incomplete=("balance",))
    words = [t.get_text() for t in draw_map(failed).axes[0].texts]
    assert "INCOMPLETE" in words
    assert "INCOMPLETE" not in [t.get_text() for t in draw_map(contents["base"]).axes[0].texts]


@pytest.mark.parametrize(("failing", "marked"), [("base", {"base", "more"}), ("more", {"more"})])
def test_a_map_is_marked_when_what_it_rests_on_failed(tmp_path, monkeypatch, failing, marked):
    """A case starts from the fitted field, so that a failed check of the base is its failure too."""
    checks = answering._field_checks

    def some_fail(case):
        return [replace(c, passed=c.passed and case.name != failing) for c in checks(case)]

    monkeypatch.setattr(answering, "_field_checks", some_fail)
    maps = answer(load(put(tmp_path))).maps
    assert {name for name, content in maps.items() if content.incomplete} == marked


def test_states_of_reaches_differ_without_colour(contents):
    styles = {
        (line.get_linestyle(), round(line.get_linewidth(), 1)) for line in draw_map(contents["base"]).axes[0].lines
    }
    assert len(styles) >= 3
