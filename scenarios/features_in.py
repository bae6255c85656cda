"""Wells, streams, lakes, recharge, the outline and gaugings: from checked blocks to the frozen data of a scenario."""

import re
from typing import Any

import numpy as np

from .intake import Intake
from .lines_in import read_line
from .quantities import Stated
from .scenario import (
    GaugingInput,
    LakeInput,
    OutlineInput,
    RechargeInput,
    StreamInput,
    Value,
    WellInput,
)
from .schema import GaugingBlock, LakeBlock, OutlineBlock, RechargeBlock, StreamBlock, WellBlock, WellsBlock
from .tables_in import Table, missing_column, read_table
from .units import UnitError, quantity
from .yaml_tree import Path_

RADIUS = 0.15  # m, where a well's radius is not stated
_WELL_ROLES = {"name": "text", "x": "length", "y": "length", "pumps": "rate", "injects": "rate", "radius": "length"}


def read_well(name: str, block: WellBlock, intake: Intake, path: Path_) -> WellInput:
    """A well from its block."""
    verb, sign = ("pumps", 1.0) if block.pumps is not None else ("injects", -1.0)
    stated: Stated = getattr(block, verb)
    radius = _radius(block.radius, name, intake)
    return WellInput(name, *block.at, stated.at(f"wells.{name}.{verb}", sign), radius)


def _radius(stated: float | None, name: str, intake: Intake) -> float:
    if stated is None:
        intake.note(f"well {name}: no radius stated, {RADIUS} m taken")
        return RADIUS
    return stated


def read_wells(block: WellsBlock, intake: Intake) -> list[WellInput]:
    """Wells stated one by one and those of a table."""
    wells = [read_well(n, b, intake, ("wells", n)) for n, b in (block.model_extra or {}).items()]
    if block.from_ is not None:
        table = read_table(block.from_, intake, ("wells", "from"), _WELL_ROLES)
        if table is not None:
            wells += _wells_of(table, {w.name for w in wells})
    return wells


def _wells_of(table: Table, names: set[str]) -> list[WellInput]:
    lacking = [w for w in ("name", "x", "y") if w not in table.header]
    if not {"pumps", "injects"} & set(table.header):
        lacking.append("pumps")
    for what in lacking:
        missing_column(table, what, ("wells", "from"))
    if lacking:
        return []
    wells = []
    for row in table.rows:
        before = len(table.intake.problems)
        name = row.cells["name"].strip()
        x, y, pumps, injects, radius = (
            table.number(row, w, _WELL_ROLES[w]) for w in ("x", "y", "pumps", "injects", "radius")
        )
        if len(table.intake.problems) > before:
            continue
        if not name or name in names:
            text = f"two wells are named {name!r}" if name else "the well has no name"
            table.problem("name", text, row, "name")
        elif x is None or y is None:
            table.problem("place", f"well {name} has no place", row, "x" if x is None else "y")
        elif (pumps is None) == (injects is None):
            what = "pumps" if "pumps" in row.cells else "injects"
            table.problem("rate", f"well {name} needs one rate, of 'pumps' or 'injects'", row, what)
        elif min(pumps or 0.0, injects or 0.0) < 0:
            what = "pumps" if pumps is not None else "injects"
            table.problem("range", f"well {name}: a rate must be at least 0; the sign lives in the verb", row, what,
                          "name the column as 'pumps' or as 'injects'")  # fmt: skip
        elif radius is not None and radius <= 0:
            table.problem("range", f"well {name}: the radius must be above 0", row, "radius")
        else:
            verb, rate = ("pumps", pumps) if pumps is not None else ("injects", -(injects or 0.0))
            value = Value(f"wells.{name}.{verb}", float(rate or 0.0), "m3/d")
            wells.append(WellInput(name, x, y, value, _radius(radius, name, table.intake)))
            names.add(name)
    return wells


def read_stream(name: str, block: StreamBlock, intake: Intake, path: Path_) -> StreamInput | None:
    """A stream from its block; the stage is made linear along every edge."""
    line = read_line(block.line, intake, (*path, "line"), f"stream {name}", "line")
    bottom, good = _bottom(block, intake, path)
    if block.bed is not None and block.width is None:
        intake.error("missing-key", f"stream {name} has a bed but no width", path, "add 'width: ...'", key=True)
        good = False
    if line is None:
        return None
    run = _stages(name, line.x, line.y, block.stage, intake, (*path, "stage"))
    if run is None or not good:
        return None
    at = f"streams.{name}"
    return StreamInput(
        name,
        *run,
        shift=None if block.shift is None else block.shift.at(f"{at}.shift"),
        width=1.0 if block.width is None else block.width,
        resistance=None if block.bed is None else block.bed.resistance.at(f"{at}.bed.resistance"),
        bottom=bottom,
        starts_with=None if block.starts_with is None else block.starts_with.at(f"{at}.starts_with"),
        into=block.into,
    )


def _bottom(block: StreamBlock, intake: Intake, path: Path_) -> tuple[float | None, bool]:
    """Underside of the bed in m below stage, and whether it was understood."""
    if block.bed is None or block.bed.bottom is None:
        return None, True
    found = re.fullmatch(r"\s*(.+?)\s+below\s+stage\s*", block.bed.bottom)
    try:
        depth = quantity(found.group(1), "length", intake.bare) if found else -1.0
    except UnitError as error:
        intake.error(error.rule, f"{error}", (*path, "bed", "bottom"), error.help)
        return None, False
    if depth < 0:
        intake.error("form", "the bottom of a bed is a depth below the stage", (*path, "bed", "bottom"),
                     "write it as '0.8 below stage'")  # fmt: skip
        return None, False
    return depth, True


def _stages(
    name: str, x: np.ndarray, y: np.ndarray, stage: Any, intake: Intake, path: Path_
) -> tuple[np.ndarray, np.ndarray, np.ndarray] | None:
    """Vertices and stages (n,): vertices are added where the stage bends, so that it is linear along every edge."""
    share = np.concatenate([[0.0], np.cumsum(np.hypot(np.diff(x), np.diff(y)))])
    share /= share[-1]
    if isinstance(stage, float):
        return x, y, np.full(x.size, stage)
    if not isinstance(stage[0], tuple):
        if len(stage) != x.size:
            intake.error("stage", f"stream {name} has {x.size} vertices but {len(stage)} elevations", path,
                         "one for each vertex, or [[share of the length, elevation], ...]")  # fmt: skip
            return None
        levels = np.array(stage)
    else:
        at, given = (np.array(column) for column in zip(*stage, strict=True))
        if at[0] != 0.0 or at[-1] != 1.0 or np.any(np.diff(at) <= 0):
            shares = ", ".join(f"{a:g}" for a in at)
            text = f"stream {name}: shares of the length must rise from 0 to 1; received {shares}"
            intake.error("stage", text, path, "the first pair is the source, the last the mouth")
            return None
        new = [a for a in at if np.min(np.abs(share - a)) > 1e-9]
        every = np.sort(np.concatenate([share, new]))
        x, y, levels = np.interp(every, share, x), np.interp(every, share, y), np.interp(every, at, given)
    if levels[-1] > levels[0]:
        rise = levels[-1] - levels[0]
        intake.error("uphill", f"stream {name} runs uphill: its mouth is {rise:.3g} m above its source", path,
                     "digitised from mouth to source? reverse the line, or the stages")  # fmt: skip
        return None
    if np.any(np.diff(levels) > 0):
        intake.note(f"stream {name}: the stage rises by up to {float(np.diff(levels).max()):.3g} m on its way down")
    return x, y, levels


def read_lake(name: str, block: LakeBlock, intake: Intake, path: Path_) -> LakeInput | None:
    """A lake from its block."""
    line = read_line(block.edge, intake, (*path, "edge"), f"lake {name}", "either", open=block.open)
    if line is None:
        return None
    if block.land is not None and not line.closed:
        intake.error("form", f"lake {name}: land lies inside a ring, but the edge is an open line", (*path, "land"))
        return None
    return LakeInput(name, line.x, line.y, block.stage.at(f"lakes.{name}.stage"), line.closed, block.land == "inside")


def read_recharge(name: str, block: RechargeBlock, intake: Intake, path: Path_) -> RechargeInput | None:
    """Recharge from its block."""
    verb = "rate" if block.rate is not None else "adds"
    stated: Stated = getattr(block, verb)
    value = stated.at(f"recharge.{name}.{verb}")
    if block.area == "everywhere":
        if verb == "adds":
            intake.error(
                "form",
                f"recharge {name} adds everywhere: a patch has an area",
                (*path, "area"),
                "write 'rate', or a polygon",
            )
            return None
        return RechargeInput(name, None, None, value, False)
    line = read_line(block.area, intake, (*path, "area"), f"recharge {name}", "ring")
    return None if line is None else RechargeInput(name, line.x, line.y, value, verb == "adds")


def read_outline(block: OutlineBlock | None, intake: Intake) -> OutlineInput | None:
    """The outline from its block."""
    if block is None:
        return None
    line = read_line(block.line, intake, ("outline", "line"), "the outline", "either", open=block.open)
    if line is None:
        return None
    path = "outline.inflow"
    inflow = Value(path, 0.0, "m2/d") if isinstance(block.inflow, str) else block.inflow.at(path)
    return OutlineInput(line.x, line.y, line.closed, inflow)


def read_gauging(name: str, block: GaugingBlock, intake: Intake, path: Path_) -> GaugingInput | None:
    """A gauging from its block; its error is a share of the flow or a rate."""
    try:
        if re.search(r"[a-zA-Z]", block.error):
            sd = quantity(block.error, "rate")
        elif "%" in block.error:
            sd = quantity(block.error, "number") * block.flow
        else:
            raise UnitError("unit", f"{block.error} needs a unit", f"write '{block.error}%' or a rate such as '2 L/s'")
    except UnitError as error:
        intake.error(error.rule, f"gaugings.{name}.error: {error}", (*path, "error"), error.help)
        return None
    if not sd > 0:
        intake.error("range", f"gaugings.{name}.error: must be above 0", (*path, "error"),
                     "a flow of 0 needs an error as a rate, such as '0.5 L/s'")  # fmt: skip
        return None
    return GaugingInput(name, block.stream, block.at, block.flow, sd)
