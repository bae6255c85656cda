"""A map as files, drawn here or by a process of its own (``desk``): see ``main``."""

import gc
import io
import os
import pickle
import sys
from collections.abc import Callable
from functools import partial
from pathlib import Path

import matplotlib as mpl
import numpy as np
from matplotlib.figure import Figure

from .map_content import LevelMark, MapContent, Reach, WellMark, ZoneMark
from .maps import STYLE, draw_map

AT_ONCE = 2  # maps


def draw(content: MapContent, kind: str) -> bytes:
    """The map as a file, "png" or "svg"; the same bytes for the same content."""
    return _file(draw_map(content), content, kind)


def _file(figure: Figure, content: MapContent, kind: str) -> bytes:
    file = io.BytesIO()
    if kind == "svg":
        with mpl.rc_context({**STYLE, "svg.hashsalt": f"{content.title} {content.case}"}):
            figure.savefig(file, format="svg", metadata={"Date": None, "Title": content.title})
    else:
        figure.savefig(file, format="png", metadata={"Software": None}, pil_kwargs={"compress_level": 3})
    return file.getvalue()


def main() -> None:
    """Draw the maps that come pickled by the standard input, each with the paths of its files, until it ends.

    Where processes can fork, each map is drawn by a child, so that the library is loaded once and two cores draw.
    """
    gc.disable()  # figures are garbage that refers to itself, but there are few
    draw(_rehearsal(), "png")
    children = 0
    while True:
        try:
            files, content = pickle.load(sys.stdin.buffer)
        except EOFError:
            break
        if children == AT_ONCE:
            os.wait()
            children -= 1
        children += _beside(partial(_save_all, content, files))
    for _ in range(children):
        os.wait()


def _beside(work: Callable[[], None]) -> int:
    """Have work done by a forked child, or here where processes cannot fork; the number of children to wait for."""
    if not hasattr(os, "fork"):
        work()
        return 0
    if os.fork() == 0:
        try:
            work()
        finally:
            os._exit(0)
    return 1


def _save_all(content: MapContent, files: list[Path]) -> None:
    """Lay the map out once, then save its files side by side."""
    figure = draw_map(content)
    children = [_beside(partial(_save, figure, content, file)) for file in files[1:]]
    _save(figure, content, files[0])
    for _ in range(sum(children)):
        os.wait()


def _save(figure: Figure, content: MapContent, file: Path) -> None:
    part = file.with_suffix(f"{file.suffix}.part")
    part.write_bytes(_file(figure, content, file.suffix[1:]))
    part.rename(file)  # whole or not at all


def _rehearsal() -> MapContent:
    """A map with something of every kind: drawn once, the library has loaded what it needs, fonts above all."""
    ring = np.array([[0.2, 0.2], [0.4, 0.2], [0.3, 0.4]])
    line = np.array([[0.0, 0.9], [0.5, 0.8], [1.0, 0.9]])
    x = np.linspace(0.0, 1.0, 5)
    reaches = tuple(Reach(line - 0.1 * k, state) for k, state in enumerate(("gains", "loses", "still")))
    levels = tuple(LevelMark("L", 0.1 * k, 0.6, 0.1 * k, 0.1 * k - 0.3, k == 2) for k in range(8))
    zones = (ZoneMark("W", None, (ring + 0.3,)), ZoneMark("W", 50.0, (ring + 0.3,)))
    return MapContent(
        "Rehearsal", "Case: none", (0.0, 1.0, 0.0, 1.0), "local", "m", ("0123456789 abcdefghijklmnopqrstuvwxyz",), x, x,
        x[:, None] + x[None, :] ** 2, 0.2, (("lake", 1.0, ring),), (("stream", line),), line - 0.5, reaches,
        (WellMark("well", 0.7, 0.3, 1.0), WellMark("well", 0.9, 0.1, -1.0)), levels, (line + 0.05,),
        ((0.5, 0.5, 1.0),), ((0.6, 0.2, 0.0),), zones, ((0.8, 0.8),),
    )  # fmt: skip
