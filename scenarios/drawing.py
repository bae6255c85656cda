"""A map as files, drawn here or by a process of its own (``desk``): see ``main``."""

import gc
import io
import os
import pickle
import sys
from pathlib import Path

import matplotlib as mpl
import numpy as np

from .desk import KINDS
from .map_content import LevelMark, MapContent, Reach, WellMark, ZoneMark
from .maps import STYLE, draw_map

AT_ONCE = 2  # files


def draw(content: MapContent, kind: str) -> bytes:
    """The map as a file, "png" or "svg"; the same bytes for the same content."""
    figure = draw_map(content)
    file = io.BytesIO()
    if kind == "svg":
        with mpl.rc_context({**STYLE, "svg.hashsalt": f"{content.title} {content.case}"}):
            figure.savefig(file, format="svg", metadata={"Date": None, "Title": content.title})
    else:
        figure.savefig(file, format="png", metadata={"Software": None}, pil_kwargs={"compress_level": 3})
    return file.getvalue()


def main() -> None:
    """Draw the maps that come pickled by the standard input, each with the paths of its files, until it ends.

    Where processes can fork, each file is drawn by a child, so that the library is loaded once and two cores draw.
    """
    gc.disable()  # figures are garbage that refers to itself, but there are few
    rehearsal = _rehearsal()
    for kind in KINDS:
        draw(rehearsal, kind)
    children = 0
    while True:
        try:
            files, content = pickle.load(sys.stdin.buffer)
        except EOFError:
            break
        for file in files:
            if not hasattr(os, "fork"):
                _save(content, file)
                continue
            if children == AT_ONCE:
                os.wait()
                children -= 1
            if os.fork() == 0:
                try:
                    _save(content, file)
                finally:
                    os._exit(0)
            children += 1
    for _ in range(children):
        os.wait()


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


def _save(content: MapContent, file: Path) -> None:
    part = file.with_suffix(f"{file.suffix}.part")
    part.write_bytes(draw(content, file.suffix[1:]))
    part.rename(file)  # whole or not at all
