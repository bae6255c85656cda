"""Capture zones and time zones of a case, in the words of answers.json."""

from dataclasses import replace
from typing import Any

import numpy as np
import shapely

from ..tracing.endings import Ending
from ..tracing.obstacles import Obstacles
from ..tracing.pathlines import series_of, trace
from ..tracing.stagnation import StagnationPoint, stagnation_points
from ..tracing.zones import MOST_PATHS, CaptureZone, TimeZone, capture_zone
from .cases import CaseAnswer
from .context import BASE, Check, Context, Result, Row, drawn_area, obstacles_of
from .map_content import MapContent, ZoneMark
from .names import safe_file_name

BUDGET = 0.01  # share of the rate that may stay without a source
ASIDE = 0.5  # m: how far from a saddle its downstream pathlines start


def zones_of(case: CaseAnswer, context: Context, options: Any) -> list[Result]:
    """One result for every asked well that pumps in this case."""
    wells = [w for w in case.scenario.wells if (w.name in options.wells or not options.wells) and w.rate.value > 0.0]
    if not wells:
        return []
    obstacles = obstacles_of(case)
    saddles = [p for p in stagnation_points(case.solution.flow, obstacles_of(case, 0.25)) if p.kind == "saddle"]
    reached = _reached(case, saddles, obstacles)
    tree = series_of(case.solution.flow, obstacles)
    taken: set[str] = set()
    out = []
    for well in wells:
        context.progress(f"delineating {well.name} in {case.name}")
        index = [w.name for w in case.model.places.wells].index(well.name)
        lows, highs = _porosity_times(case, options.times)
        times = sorted({*options.times, *lows, *highs})
        zone = capture_zone(case.solution.flow, index, obstacles, times, drawn_area(case.scenario), tree)
        mine = [s for s, names in zip(saddles, reached, strict=True) if index in names]
        stem = safe_file_name(f"{case.name}_{well.name}", taken)
        taken.add(stem)
        out.append(_result(case, well.name, float(well.rate.value), zone, mine, stem, options.times, lows, highs))
    return out


def _porosity_times(case: CaseAnswer, times: list[float]) -> tuple[list[float], list[float]]:
    """Times whose zones, at the stated porosity, are those of the asked times at porosity plus and minus its sd."""
    porosity = case.scenario.aquifer.porosity
    if porosity.kind == "known":
        return [], []
    n = porosity.value
    low, high = (
        (n / porosity.factor, n * porosity.factor)
        if porosity.factor
        else (n - (porosity.sd or 0), n + (porosity.sd or 0))
    )
    low = max(low, 0.1 * n)
    return [t * n / high for t in times], [t * n / low for t in times]


def _reached(case: CaseAnswer, saddles: list[StagnationPoint], obstacles: Obstacles) -> list[set[int]]:
    """Wells (by number) that the water leaving each saddle reaches, one way or the other."""
    if not saddles:
        return []
    x = np.array([s.x + sign * ASIDE * s.downstream[0] for s in saddles for sign in (1, -1)])
    y = np.array([s.y + sign * ASIDE * s.downstream[1] for s in saddles for sign in (1, -1)])
    paths = trace(case.solution.flow, x, y, lines=obstacles)
    ends = [int(n) if e == Ending.WELL else -1 for e, n in zip(paths.endings, paths.named, strict=True)]
    return [{ends[2 * k], ends[2 * k + 1]} - {-1} for k in range(len(saddles))]


def _result(
    case: CaseAnswer,
    well: str,
    rate: float,
    zone: CaptureZone,
    saddles: list[StagnationPoint],
    stem: str,
    times: list[float],
    lows: list[float],
    highs: list[float],
) -> Result:
    by_days = {t.days: t for t in zone.times}
    columns = {"well": well, "case": case.name, "rate_m3_d": rate}
    whole = Row(zone.polygon, {**columns, "area_m2": zone.area, "open": zone.open, "what": "some water at some depth"})
    files = {f"zones/{stem}.geojson": whole}
    entries, time_rows, table = [], [], []
    for k, days in enumerate(times):
        part = by_days[days]
        name = f"zones/{stem}_{days:g}_d.geojson"
        ranged = (by_days[lows[k]], by_days[highs[k]]) if lows else (part, part)
        files[name] = _time_row(columns, part, days, ranged)
        time_rows.append(files[name])
        entries.append(
            {"days": days, "area": part.area, "polygon": name, "area_high_porosity": ranged[0].area,
             "area_low_porosity": ranged[1].area}
        )  # fmt: skip
        table.append({**files[name].columns})
    unknown = zone.supply.get("not traced to its source", 0.0)
    entry: dict[str, Any] = {
        "question": "capture_zone",
        "case": case.name,
        "well": well,
        "rate": rate,
        "area": zone.area,
        "open": zone.open,
        "polygon": f"zones/{stem}.geojson",
        "stagnation_points": [{"x": s.x, "y": s.y} for s in saddles],
        "supply": zone.supply,
        "times": entries,
        "pathlines": zone.endings,
    }
    layers = {
        "capture_zones": [whole],
        "time_zones": time_rows,
        "stagnation_points": [Row(shapely.Point(s.x, s.y), {"well": well, "case": case.name}) for s in saddles],
    }

    def on_map(content: MapContent) -> MapContent:
        marks = [ZoneMark(well, None, _rings(zone.polygon), zone.open)]
        marks += [ZoneMark(well, days, _rings(by_days[days].polygon)) for days in times]
        points = (*content.stagnation, *((s.x, s.y) for s in saddles))
        return replace(content, zones=(*content.zones, *marks), stagnation=points)

    sources = ", ".join(
        f"{100 * s:.0f}% {name}" for name, s in sorted(zone.supply.items(), key=lambda p: -p[1]) if s > 0.005
    )
    extent = "leaves the drawn area; within it" if zone.open else "covers"
    where = "" if case.name == BASE else f", case {case.name}"
    words = f"{well} at {rate:.4g} m3/d{where}: capture zone {extent} {zone.area / 1e6:.3f} km2; supplied by {sources}."
    checks = (
        Check(f"water of {well} traced to its sources in {case.name}", unknown <= BUDGET, unknown, BUDGET),
        Check(f"border of {well} settled in {case.name} (pathlines)", zone.settled, len(zone.paths.points), MOST_PATHS),
    )
    return Result("capture_zone", case.name, entry, words, layers, {"time_zones": table}, files, checks, on_map)


def _time_row(columns: dict[str, Any], part: TimeZone, days: float, ranged: tuple[TimeZone, TimeZone]) -> Row:
    return Row(
        part.polygon,
        {**columns, "travel_time_d": days, "area_m2": part.area, "area_high_porosity_m2": ranged[0].area,
         "area_low_porosity_m2": ranged[1].area},
    )  # fmt: skip


def _rings(shape: shapely.Geometry) -> tuple[np.ndarray, ...]:
    """Exteriors and holes of every polygon in a geometry."""
    out = []
    for part in shapely.get_parts(shape):
        if isinstance(part, shapely.Polygon) and not part.is_empty:
            out += [shapely.get_coordinates(r) for r in (part.exterior, *part.interiors)]
    return tuple(out)
