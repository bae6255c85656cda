"""What a checked scenario holds: plain frozen data in metres, days and one coordinate frame.

``reading.load`` makes it from a file; ``building`` turns it into elements. Nothing here reads or computes.
Angles stay as people give them: degrees clockwise from grid north, the direction the water flows towards.
"""

from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, Literal

import numpy as np


@dataclass(frozen=True)
class Value:
    """One number of the scenario, with what is known about it.

    ``kind`` is "known" (exact), "estimate" (fitted with a prior) or "free" (fitted without one). ``factor``: two
    chances in three between value/factor and value*factor (log-normal). ``sd``: normal, in the unit of value.
    """

    path: str  # where it stands in the scenario, "wells.Mill 1.pumps"
    value: float
    unit: str  # model unit: m, m/d, m3/d, m2/d, d, deg, 1
    kind: Literal["known", "estimate", "free"] = "known"
    factor: float | None = None
    sd: float | None = None
    source: str | None = None


@dataclass(frozen=True)
class Site:
    """The frame: the drawn box in metres, names of the coordinate system and of the datum."""

    crs: str
    heights: str
    period: str | None
    x0: float
    x1: float
    y0: float
    y1: float


@dataclass(frozen=True)
class UnevenGround:
    """Standard deviation of ln K (-) and patch length (m): the error of any smooth model."""

    spread: Value
    patch: Value


@dataclass(frozen=True)
class AquiferInput:
    """The aquifer as stated; ``top`` None means a water table throughout, ``uneven`` None an ideal sand."""

    base: Value
    top: Value | None
    conductivity: Value
    porosity: Value
    storage: Value | None
    uneven: UnevenGround | None


@dataclass(frozen=True)
class UniformFlow:
    """Regional flow: a gradient (-) or a discharge (m2/d), its azimuth (deg), and where it is meant (m)."""

    gradient: Value | None
    discharge: Value | None
    towards: Value
    x: float
    y: float


@dataclass(frozen=True)
class Beyond:
    """The far field: no net exchange (``reference`` None) or a head (m) at a place x, y (m)."""

    reference_x: float | None
    reference_y: float | None
    reference_head: Value | None
    flow: UniformFlow | None


@dataclass(frozen=True)
class OutlineInput:
    """Impermeable side of the site, closed ring or open line; ``inflow`` (m2/d) enters along it."""

    x: np.ndarray
    y: np.ndarray
    closed: bool
    inflow: Value


@dataclass(frozen=True)
class WellInput:
    """A well; ``rate`` > 0 pumps and < 0 injects (its path ends in the verb that was written)."""

    name: str
    x: float
    y: float
    rate: Value
    radius: float


@dataclass(frozen=True)
class StreamInput:
    """A stream from source to mouth: vertices and stages (n,) in m; resistance None = full contact."""

    name: str
    x: np.ndarray
    y: np.ndarray
    stage: np.ndarray
    shift: Value | None
    width: float
    resistance: Value | None
    bottom: float | None  # underside of the clogged layer, m below stage
    starts_with: Value | None  # m3/d
    into: str | None
    line_width: float | None = None  # m: the width that stood for the bed in the fit, kept in every case


@dataclass(frozen=True)
class LakeInput:
    """A lake: closed ring (water inside, or land inside) or an open line of shore, one stage."""

    name: str
    x: np.ndarray
    y: np.ndarray
    stage: Value
    closed: bool
    land_inside: bool


@dataclass(frozen=True)
class RechargeInput:
    """Recharge in m/d on a ring; x and y None mean everywhere; ``adds`` marks a patch on top of it."""

    name: str
    x: np.ndarray | None
    y: np.ndarray | None
    rate: Value
    adds: bool


@dataclass(frozen=True)
class LevelInput:
    """A water level in m with its reading error (sd, m); ``left_out`` is the stated reason, None = used."""

    name: str
    x: float
    y: float
    head: float
    sd: float
    datum: str | None  # levels of one group share an error of their datum
    left_out: str | None = None


@dataclass(frozen=True)
class GaugingInput:
    """A stream flow (m3/d) and its sd at a share of the stream's length (0 source, 1 mouth)."""

    name: str
    stream: str
    at: float
    flow: float
    sd: float


@dataclass(frozen=True)
class Change:
    """One step of a case: change a value (``to`` or ``by`` x factor / + amount), add or remove a feature.

    ``to`` and ``add`` are in model units; ``factor`` and ``amount`` are exclusive; ``feature`` is what is added.
    """

    verb: Literal["change", "add", "remove"]
    path: str
    to: float | None = None
    factor: float | None = None
    amount: float | None = None
    feature: Any = None


@dataclass(frozen=True)
class Case:
    """A named set of changes to the fitted field."""

    name: str
    changes: tuple[Change, ...]


@dataclass(frozen=True)
class Question:
    """A question and its checked options (a frozen options object of the question's own module)."""

    kind: str
    options: Any


@dataclass(frozen=True)
class Scenario:
    """A whole checked scenario."""

    file: Path
    sha256: str
    title: str
    site: Site
    aquifer: AquiferInput
    beyond: Beyond
    outline: OutlineInput | None
    wells: tuple[WellInput, ...]
    streams: tuple[StreamInput, ...]
    lakes: tuple[LakeInput, ...]
    recharge: tuple[RechargeInput, ...]
    levels: tuple[LevelInput, ...]
    datum_sd: dict[str, float]  # sd (m) of each shared datum error
    gaugings: tuple[GaugingInput, ...]
    cases: tuple[Case, ...]
    tolerance: float  # m of head on every boundary
    seed: int
    questions: tuple[Question, ...]
    notes: tuple[str, ...] = field(default=())  # what was done to the inputs, and warnings, in words
