"""Checks of a scenario's parts against each other: what cannot be meant is an error, what is unusual a note."""

from collections import Counter

import numpy as np
import shapely

from .intake import Intake
from .levels_in import LevelRow, Levels, used
from .messages import meant
from .scenario import RechargeInput, Scenario, Value
from .units import FOOT

_FAR = 20.0  # m outside all stages that no water table near these waters reaches
_MOST = 0.8  # share of the levels that must show a mistake before it is taken for one
_OVERLAP = 1.0  # m2 that areas may share by rounding


def check(scenario: Scenario, levels: Levels, intake: Intake) -> None:
    """Keep every problem and note on how the parts of a scenario go together."""
    _names(scenario, intake)
    _references(scenario, intake)
    _far_field(scenario, intake)
    _recharge_areas(scenario, intake)
    base, top = scenario.aquifer.base, scenario.aquifer.top
    if top is not None and not top.value > base.value:
        intake.error(
            "thickness",
            f"the aquifer's top ({top.value:g} m) is not above its base ({base.value:g} m): negative thickness",
            ("aquifer", "top"),
        )
    else:
        _heads(scenario, levels, intake)
    _swapped(scenario, levels, intake)
    _counts(scenario, levels, intake)
    _outside(scenario, intake)


def _names(scenario: Scenario, intake: Intake) -> None:
    """Every feature has a name of its own: balances and cases tell features by it."""
    kinds = {k: [m.name for m in getattr(scenario, k)] for k in ("wells", "streams", "lakes", "recharge")}
    seen: dict[str, str] = {"outline": "the outline", "beyond the map": "what comes from beyond the map"}
    for kind, names in kinds.items():
        for name in names:
            if name in seen:
                intake.error(
                    "name",
                    f"{kind}.{name}: the name is taken by {seen[name]}",
                    (kind, name),
                    "give every feature a name of its own",
                    key=True,
                )
            seen.setdefault(name, f"{kind}.{name}")


def _references(scenario: Scenario, intake: Intake) -> None:
    streams = [s.name for s in scenario.streams]
    # a stream that was refused is not among them; its own problem is enough
    asked = intake.tree.data.get("streams") or {}
    for g in scenario.gaugings:
        if g.stream not in streams and g.stream not in asked:
            intake.error(
                "unknown-name",
                f"gauging {g.name}: there is no stream {g.stream!r}",
                ("gaugings", g.name, "stream"),
                meant(g.stream, streams, "streams"),
            )
    for s in scenario.streams:
        if s.into is None:
            continue
        if s.into == s.name or (s.into not in streams and s.into not in asked):
            intake.error(
                "unknown-name",
                f"stream {s.name} cannot flow into {s.into!r}",
                ("streams", s.name, "into"),
                meant(s.into, [n for n in streams if n != s.name], "streams"),
            )
        elif _runs_round(scenario, s.name):
            intake.error(
                "stream-circle",
                f"stream {s.name} flows back into itself: {s.into} leads to it",
                ("streams", s.name, "into"),
            )


def _runs_round(scenario: Scenario, name: str) -> bool:
    """Whether the streams that a stream flows into lead back to it."""
    into = {s.name: s.into for s in scenario.streams}
    below, seen = into[name], set()
    while below in into and below not in seen:
        if below == name:
            return True
        seen.add(below)
        below = into[below]
    return False


def _far_field(scenario: Scenario, intake: Intake) -> None:
    """With no reference something must hold the heads, in the base and in every case."""
    if scenario.beyond.reference_head is not None:
        return
    held = {f"{kind}.{m.name}" for kind in ("streams", "lakes") for m in getattr(scenario, kind)}
    asked = intake.tree.data
    if not held and not asked.get("streams") and not asked.get("lakes"):
        intake.error(
            "far-field",
            "nothing fixes the far field: with 'balance: none' a lake or a stream must hold the heads",
            ("beyond", "balance"),
            "add a lake or a stream, or write 'reference: {at: [x, y], head: ...}'",
        )
        return
    for case in scenario.cases:
        left = set(held)
        for change in case.changes:
            left |= {change.path} if change.verb == "add" and change.path.startswith(("streams.", "lakes.")) else set()
            left -= {change.path} if change.verb == "remove" else set()
        if held and not left:
            intake.error(
                "far-field",
                f"case {case.name} removes the last lake and stream: nothing fixes the far field",
                ("cases", case.name),
                key=True,
            )


def _recharge_areas(scenario: Scenario, intake: Intake) -> None:
    """Areas with a ``rate`` must not overlap: what comes on top is said by ``adds``."""
    rated = [r for r in scenario.recharge if not r.adds]
    for i, r in enumerate(rated):
        for other in rated[:i]:
            if _overlap(r, other):
                intake.error(
                    "overlap",
                    f"recharge {r.name} and {other.name} cover the same ground",
                    ("recharge", r.name),
                    "write 'adds' in place of 'rate' for the patch that comes on top",
                    key=True,
                )


def _overlap(a: RechargeInput, b: RechargeInput) -> bool:
    if a.x is None or b.x is None or a.y is None or b.y is None:
        return True
    rings = [shapely.Polygon(np.stack([r.x, r.y], axis=1)) for r in (a, b)]  # type: ignore[list-item]
    return bool(shapely.intersection(*rings).area > _OVERLAP)


def _lowest_base(base: Value) -> float | None:
    """The lowest elevation (m) that the base may have by what is said of it; None where nothing limits it."""
    if base.kind == "known":
        return base.value
    if base.sd is not None:
        return base.value - 3.0 * base.sd
    if base.factor is not None:
        return min(base.value * base.factor**3, base.value / base.factor**3)
    return None


def _stages(scenario: Scenario) -> np.ndarray:
    """Every elevation (m) at which the scenario holds water."""
    heads = [s.stage for s in scenario.streams] + [np.array([k.stage.value]) for k in scenario.lakes]
    reference = scenario.beyond.reference_head
    return np.concatenate([*heads, np.array([] if reference is None else [reference.value])])


def _heads(scenario: Scenario, levels: Levels, intake: Intake) -> None:
    """Depths given as heads, feet in a metre site, heads below the base."""
    rows, table = used(levels.rows), levels.table
    if not rows or table is None:
        return
    heads = np.array([r.level.head for r in rows])
    stages, low = _stages(scenario), _lowest_base(scenario.aquifer.base)
    what = "head" if "head" in rows[0].row.cells else "depth"
    wrong_unit = _unit_mistake(heads, stages)
    below = [r for r in rows if low is not None and r.level.head < low]
    if wrong_unit is not None:
        table.problem(
            "feet",
            f"{wrong_unit}: the levels ({_span(heads)}) do not fit the stages ({_span(stages)})",
            rows[0].row,
            what,
            "say the unit of the column, such as 'levels.units: {head: ft}', or set site.length",
        )
    elif (len(below) >= _MOST * len(rows) and len(rows) > 2) or _depth_like(heads, stages):
        against = (
            f"the base of the aquifer ({scenario.aquifer.base.value:g} m)" if below else f"the stages ({_span(stages)})"
        )
        count = len(below) if below else len(rows)
        table.problem(
            "depth-as-head",
            f"{count} of {len(rows)} levels ({_span(heads)}) lie below {against}: depth to water given as head?",
            rows[0].row,
            what,
            "for depths write 'columns: {measuring_point: ..., depth: ...}'",
        )
    else:
        for r in below:
            base = scenario.aquifer.base.value
            text = f"level {r.level.name} ({r.level.head:g} m) lies below the base of the aquifer ({base:g} m)"
            table.problem("below-base", text, r.row, what, "mend it, or name it in 'levels.leave_out' with the reason")


def _depth_like(heads: np.ndarray, stages: np.ndarray) -> bool:
    """Levels that are all far below every stage and small numbers beside it."""
    if stages.size == 0 or heads.size < 3:
        return False
    lowest = float(stages.min())
    return bool(np.all(heads >= 0) and np.all(heads < lowest - _FAR) and np.all(heads < 0.2 * lowest))


def _unit_mistake(heads: np.ndarray, stages: np.ndarray) -> str | None:
    """Levels that fit the stages only after a change between feet and metres."""
    if stages.size == 0 or heads.size < 3:
        return None

    def fits(h: np.ndarray) -> float:
        return float(np.mean((h > stages.min() - _FAR) & (h < stages.max() + _FAR)))

    if fits(heads) > 1.0 - _MOST:
        return None
    if fits(heads * FOOT) >= _MOST:
        return "feet given where metres belong"
    return "metres given where feet belong" if fits(heads / FOOT) >= _MOST else None


def _span(values: np.ndarray) -> str:
    return f"{values.min():.1f} to {values.max():.1f} m"


def _swapped(scenario: Scenario, levels: Levels, intake: Intake) -> None:
    """Levels that lie far from everything else, but among it once x and y are swapped."""
    rows, table = used(levels.rows), levels.table
    places = [(w.x, w.y) for w in scenario.wells]
    for line in (*scenario.streams, *scenario.lakes, *((scenario.outline,) if scenario.outline else ())):
        places += list(zip(line.x.tolist(), line.y.tolist(), strict=True))
    drawn = (intake.tree.data.get("site") or {}).get("draw")
    if isinstance(drawn, dict) and "x" in drawn:
        places += [(scenario.site.x0, scenario.site.y0), (scenario.site.x1, scenario.site.y1)]
    if len(places) < 2 or not rows or table is None:
        return
    low, high = np.min(places, axis=0), np.max(places, axis=0)
    margin = max(float((high - low).max()), 1000.0)
    xy = np.array([[r.level.x, r.level.y] for r in rows])

    def near(p: np.ndarray) -> float:
        return float(np.mean(np.all((p > low - margin) & (p < high + margin), axis=1)))

    if near(xy) < 1.0 - _MOST and near(xy[:, ::-1]) >= _MOST:
        r: LevelRow = rows[0]
        table.problem(
            "swapped",
            f"the levels lie {_distance(xy, low, high) / 1000:.0f} km from everything else, but among it "
            "with x and y swapped",
            r.row,
            "x",
            "swap the columns: 'columns: {x: ..., y: ...}' (x is east)",
        )


def _distance(xy: np.ndarray, low: np.ndarray, high: np.ndarray) -> float:
    gap = np.maximum(np.maximum(low - xy, xy - high), 0.0)
    return float(np.median(np.hypot(*gap.T)))


def _values(scenario: Scenario) -> list[Value]:
    """Every value that a fit may move."""
    a, beyond = scenario.aquifer, scenario.beyond
    found: list[Value | None] = [a.base, a.top, a.conductivity, beyond.reference_head]
    found += [w.rate for w in scenario.wells] + [k.stage for k in scenario.lakes] + [r.rate for r in scenario.recharge]
    for s in scenario.streams:
        found += [s.shift, s.resistance, s.starts_with]
    if beyond.flow is not None:
        found += [beyond.flow.gradient, beyond.flow.discharge, beyond.flow.towards]
    if scenario.outline is not None:
        found.append(scenario.outline.inflow)
    return [v for v in found if v is not None]


def _counts(scenario: Scenario, levels: Levels, intake: Intake) -> None:
    """More numbers than readings: only priors make that a question with an answer."""
    kinds = Counter(v.kind for v in _values(scenario))
    readings = len(used(levels.rows)) + len(scenario.gaugings)
    asked = intake.tree.data
    unread = (asked.get("levels") and levels.table is None) or len(asked.get("gaugings") or {}) > len(scenario.gaugings)
    if kinds["free"] > readings and not unread:
        first = next(v for v in _values(scenario) if v.kind == "free")
        path = _path_of(first.path, intake)
        intake.error(
            "too-many-free",
            f"{kinds['free']} values are free, but there are only {readings} readings: more estimates than data",
            path,
            "give them priors: {estimate: ..., factor: ...} or {estimate: ..., sd: ...}",
        )
    elif readings and kinds["free"] + kinds["estimate"] > readings:
        total = kinds["free"] + kinds["estimate"]
        intake.note(
            f"{total} values are fitted to {readings} readings: their estimates decide where the readings cannot"
        )


def _path_of(dotted: str, intake: Intake) -> tuple[str | int, ...]:
    """The path in the tree of a dotted one; names may hold dots themselves."""
    for path in intake.tree.values:
        if ".".join(str(p) for p in path) == dotted:
            return path
    return ()


def _outside(scenario: Scenario, intake: Intake) -> None:
    """Features beyond the drawn area act all the same."""
    s = scenario.site
    for w in scenario.wells:
        if not (s.x0 <= w.x <= s.x1 and s.y0 <= w.y <= s.y1):
            intake.note(f"well {w.name} lies beyond the drawn area: it acts, but is not drawn")
    beyond = [v.name for v in scenario.levels if not (s.x0 <= v.x <= s.x1 and s.y0 <= v.y <= s.y1)]
    if beyond:
        intake.note(f"levels beyond the drawn area are fitted, but not drawn: {', '.join(beyond)}")
