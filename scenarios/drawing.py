"""A map as files, drawn here or by a process of its own (``desk``): see ``main``."""

import gc
import io
import os
import pickle
import sys
from pathlib import Path

import matplotlib as mpl
import numpy as np

from .map_content import MapContent
from .maps import STYLE, draw_map

DPI = 160
AT_ONCE = 2  # files


def draw(content: MapContent, kind: str) -> bytes:
    """The map as a file, "png" or "svg"; the same bytes for the same content."""
    figure = draw_map(content)
    file = io.BytesIO()
    if kind == "svg":
        with mpl.rc_context({**STYLE, "svg.hashsalt": f"{content.title} {content.case}"}):
            figure.savefig(file, format="svg", metadata={"Date": None, "Title": content.title})
    else:
        figure.savefig(file, format="png", dpi=DPI, metadata={"Software": None}, pil_kwargs={"compress_level": 4})
    return file.getvalue()


def main() -> None:
    """Draw the maps that come pickled by the standard input, each with the paths of its files, until it ends.

    Where processes can fork, each file is drawn by a child, so that the library is loaded once and two cores draw.
    """
    gc.disable()  # figures are garbage that refers to itself, but there are few
    empty = np.zeros(0)
    # loads the fonts
    draw(MapContent("", "", (0.0, 1.0, 0.0, 1.0), "", "", ("",), empty, empty, np.zeros((0, 0)), 1.0), "png")
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


def _save(content: MapContent, file: Path) -> None:
    part = file.with_suffix(f"{file.suffix}.part")
    part.write_bytes(draw(content, file.suffix[1:]))
    part.rename(file)  # whole or not at all
