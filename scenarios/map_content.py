"""What a map shows: plain data in map coordinates (m), ready to be drawn; no knowledge of how it was computed."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Rings = tuple[Floats, ...]  # exteriors and holes, (n, 2) each


@dataclass(frozen=True)
class WellMark:
    """A well: place, rate (m3/d, > 0 pumps)."""

    name: str
    x: float
    y: float
    rate: float


@dataclass(frozen=True)
class LevelMark:
    """A level: observed head (m) and residual (observed - computed, m); left out of the fit or not."""

    name: str
    x: float
    y: float
    head: float
    residual: float
    left_out: bool


@dataclass(frozen=True)
class Reach:
    """A stretch of a stream or shore and what it does there: "gains", "loses" or "still"."""

    line: Floats
    state: str


@dataclass(frozen=True)
class ZoneMark:
    """A capture zone (days None) or a time zone of a well."""

    well: str
    days: float | None
    rings: Rings
    open: bool = False


@dataclass(frozen=True)
class MapContent:
    """Everything on one map."""

    title: str
    case: str
    box: tuple[float, float, float, float]  # x0, x1, y0, y1
    crs: str
    heights: str
    footer: tuple[str, ...]
    x: Floats  # (nx,) grid of heads
    y: Floats  # (ny,)
    head: Floats  # (ny, nx), NaN where nothing is drawn
    interval: float
    lakes: tuple[tuple[str, float, Floats], ...] = ()  # name, stage, ring
    streams: tuple[tuple[str, Floats], ...] = ()  # name, course
    outline: Floats | None = None
    reaches: tuple[Reach, ...] = ()
    wells: tuple[WellMark, ...] = ()
    levels: tuple[LevelMark, ...] = ()
    arrows: tuple[Floats, ...] = ()  # pathlines; an arrow head at the end of each
    summits: tuple[tuple[float, float, float], ...] = ()  # x, y, head
    basins: tuple[tuple[float, float, float], ...] = ()
    zones: tuple[ZoneMark, ...] = ()
    stagnation: tuple[tuple[float, float], ...] = ()
    incomplete: tuple[str, ...] = ()  # failed checks
