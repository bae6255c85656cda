"""Everything about a site that is a number and no geometry: what the fit may vary and a case may change."""

from collections.abc import Sequence
from dataclasses import dataclass, fields, replace
from typing import Any

import numpy as np

from ..elements.aquifer import Aquifer
from ..elements.field_arrays import Floats
from ..elements.lake import LakeEdge
from ..elements.outline import Outline
from ..elements.recharge import RechargeArea, on_land
from ..elements.regional_flow import RegionalFlow
from ..elements.stream import Stream
from ..elements.well import PumpingWell
from .network import Line

Element = PumpingWell | Stream | LakeEdge | Outline | RechargeArea | RegionalFlow


@dataclass(frozen=True)
class Places:
    """The geometry: elements sorted by kind. Their numbers are only starting values of a ``Setting``."""

    wells: tuple[PumpingWell, ...]
    areas: tuple[RechargeArea, ...]
    lines: tuple[Line, ...]
    flow: RegionalFlow
    reference: tuple[float, float] | None  # m; None: no net exchange with afar
    origin: tuple[float, float]  # m, local zero
    scale: float  # m, length inside the logarithms


@dataclass(frozen=True)
class Setting:
    """The numbers, in the order of ``Places``: m3/d, m/d, m2/d, m, d."""

    aquifer: Aquifer
    well_rates: Floats  # (w,)
    recharge_rates: Floats  # (a,)
    flow: Floats  # (2,) qx, qy
    shifts: Floats  # (l,) added to every stage of a line
    conductances: Floats  # (l,) width / resistance of a stream's bed (m/d); 0 where there is none
    inflows: Floats  # (l,) along outlines
    reference_head: float  # nan without a reference


def sort_elements(
    aquifer: Aquifer, elements: Sequence[Element], reference: tuple[tuple[float, float], float] | None
) -> tuple[Places, Setting]:
    """Split elements into geometry and numbers.

    reference: ((x, y), head) in m, or None for no net exchange. Raises ValueError for repeated names.
    """
    wells = tuple(e for e in elements if isinstance(e, PumpingWell))
    lines = tuple(e for e in elements if isinstance(e, Stream | LakeEdge | Outline))
    areas = _areas_on_land([e for e in elements if isinstance(e, RechargeArea)], lines)
    flows = [e for e in elements if isinstance(e, RegionalFlow)]
    names = [e.name for e in elements if not isinstance(e, RegionalFlow)]
    twice = sorted({n for n in names if names.count(n) > 1})
    if twice:
        raise ValueError(f"element names must be unique; repeated: {', '.join(map(repr, twice))}")
    if len(flows) > 1:
        raise ValueError("one regional flow at most")
    flow = flows[0] if flows else RegionalFlow(0.0, 0.0)
    xs = [np.atleast_1d(e.x) for e in (*wells, *areas, *lines)]
    ys = [np.atleast_1d(e.y) for e in (*wells, *areas, *lines)]
    if reference is not None:
        xs.append(np.array([reference[0][0]]))
        ys.append(np.array([reference[0][1]]))
    if xs:
        x, y = np.concatenate(xs), np.concatenate(ys)
        origin = float(0.5 * (x.min() + x.max())), float(0.5 * (y.min() + y.max()))
        scale = max(float(np.hypot(np.ptp(x), np.ptp(y))), 1.0)
    else:
        origin, scale = (flow.x0, flow.y0), 1.0
    if not flows:
        flow = RegionalFlow(0.0, 0.0, *origin)
    places = Places(wells, areas, lines, flow, None if reference is None else reference[0], origin, scale)
    setting = Setting(
        aquifer,
        np.array([w.rate for w in wells]),
        np.array([a.rate for a in areas]),
        np.array([flow.qx, flow.qy]),
        np.zeros(len(lines)),
        np.array([e.width / e.resistance if isinstance(e, Stream) and e.resistance else 0.0 for e in lines]),
        np.array([e.inflow if isinstance(e, Outline) else 0.0 for e in lines]),
        np.nan if reference is None else float(reference[1]),
    )
    return places, setting


def setting_on(places: Places, other: Places, setting: Setting) -> Setting | None:
    """The setting of another site's numbers on the geometry of ``places``; None where the geometries differ.

    Stages that differ evenly along a line become shifts, so that what was assembled for ``places`` serves again.
    """
    if (places.origin, places.scale, places.reference) != (other.origin, other.scale, other.reference):
        return None
    if (places.flow.x0, places.flow.y0) != (other.flow.x0, other.flow.y0):
        return None
    shifts = setting.shifts.copy()
    for kind in ("wells", "areas", "lines"):
        mine, theirs = getattr(places, kind), getattr(other, kind)
        if len(mine) != len(theirs):
            return None
        for k, (a, b) in enumerate(zip(mine, theirs, strict=True)):
            if not _same_shape(a, b):
                return None
            if isinstance(a, Stream | LakeEdge):
                rise = np.atleast_1d(b.stage - a.stage)
                if np.ptp(rise) > 1e-12 * np.abs(rise).max():
                    return None
                shifts[k] += rise[0]
    return replace(setting, shifts=shifts)


def _same_shape(a: Element, b: Element) -> bool:
    """Whether two elements differ at most in numbers that a setting holds."""
    if type(a) is not type(b):
        return False
    numbers = {"rate", "stage", "inflow", "width", "resistance"}
    for name in (f.name for f in fields(a) if f.name not in numbers):
        if not _equal(getattr(a, name), getattr(b, name)):
            return False
    return not isinstance(a, Stream) or (a.resistance is None) == (b.resistance is None)  # type: ignore[union-attr]


def _equal(a: Any, b: Any) -> bool:
    if isinstance(a, tuple) and isinstance(b, tuple):
        return len(a) == len(b) and all(_equal(p, q) for p, q in zip(a, b, strict=True))
    return bool(np.array_equal(a, b)) if isinstance(a, np.ndarray) else a == b


def _areas_on_land(areas: list[RechargeArea], lines: Sequence[Line]) -> tuple[RechargeArea, ...]:
    """Recharge areas less lakes, inside closed outlines and island shores; those with nothing left fall away."""
    lakes = [e for e in lines if isinstance(e, LakeEdge) and e.closed]
    waters = [(e.x, e.y) for e in lakes if not e.land_inside]
    limits = [(e.x, e.y) for e in lines if isinstance(e, Outline) and e.closed]
    limits += [(e.x, e.y) for e in lakes if e.land_inside]
    kept = [on_land(area, waters, limits) for area in areas]
    return tuple(area for area in kept if area is not None)


def elements_at(places: Places, setting: Setting) -> tuple[RegionalFlow, list[PumpingWell], list[RechargeArea]]:
    """The given elements (all but the lines) with the numbers of a setting."""
    flow = replace(places.flow, qx=float(setting.flow[0]), qy=float(setting.flow[1]))
    wells = [replace(w, rate=float(r)) for w, r in zip(places.wells, setting.well_rates, strict=True)]
    areas = [replace(a, rate=float(r)) for a, r in zip(places.areas, setting.recharge_rates, strict=True)]
    return flow, wells, areas
