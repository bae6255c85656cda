"""Water levels out of a table: heads or depths, errors by quality, repeats, levels left out."""

import math
import re
from collections.abc import Iterable
from dataclasses import dataclass, replace

from .intake import Intake
from .messages import meant
from .scenario import LevelInput
from .schema import LevelsBlock
from .tables_in import Row, Table, missing_column, read_table

ROLES = {
    "name": "text", "x": "length", "y": "length", "head": "length", "measuring_point": "length", "depth": "length",
    "date": "text", "quality": "text", "datum": "text",
}  # fmt: skip
_PATH = ("levels",)
_DATE = re.compile(r"\d{4}-\d{2}(-\d{2}([T ]\d{2}:\d{2}(:\d{2})?)?)?$")
_SAME_PLACE = 1e-3  # m


@dataclass(frozen=True)
class LevelRow:
    """A level with the row it was read from, for the checks against the rest of the scenario."""

    level: LevelInput
    row: Row
    date: str


@dataclass(frozen=True)
class Levels:
    """All levels, the table they come from, and the sd (m) of each datum."""

    rows: tuple[LevelRow, ...]
    table: Table | None
    datum_sd: dict[str, float]


NO_LEVELS = Levels((), None, {})


def read_levels(block: LevelsBlock | None, intake: Intake) -> Levels:
    """Levels of a scenario; problems are kept at the intake."""
    if block is None:
        return NO_LEVELS
    table = read_table(block, intake, _PATH, ROLES)
    if table is None or not _columns_are_enough(table, block, intake):
        return NO_LEVELS
    rows = [found for row in table.rows if (found := _level(table, row, block)) is not None]
    rows = _left_out(rows, table, block, intake)
    rows = _repeats(rows, table, block, intake)
    used = {r.level.datum for r in rows if r.level.datum is not None}
    return Levels(tuple(rows), table, {d: sd for d, sd in block.datum_error.items() if d in used})


def _columns_are_enough(table: Table, block: LevelsBlock, intake: Intake) -> bool:
    have, good = set(table.header), True
    for what in ("name", "x", "y"):
        if what not in have:
            missing_column(table, what, _PATH)
            good = False
    if "head" not in have and not {"measuring_point", "depth"} <= have:
        lacking = "head" if not {"measuring_point", "depth"} & have else ({"measuring_point", "depth"} - have).pop()
        missing_column(table, lacking, _PATH, "name the column of 'head', or those of 'measuring_point' and 'depth'")
        good = False
    if isinstance(block.error, dict) and "quality" not in have:
        missing_column(
            table, "quality", _PATH, "an error by quality needs that column; or write one value, 'error: 0.03'"
        )
        good = False
    if block.datum_error and "datum" not in have:
        missing_column(table, "datum", _PATH, "'datum_error' needs a column that says which levels share a datum")
        good = False
    if block.repeats == "latest" and "date" not in have:
        missing_column(table, "date", _PATH, "'repeats: latest' needs the dates of the readings")
        good = False
    return good


def _level(table: Table, row: Row, block: LevelsBlock) -> LevelRow | None:
    """The level of a row; None where something is missing (noted) or wrong (kept as a problem)."""
    before = len(table.intake.problems)
    name = row.cells["name"].strip()
    if not name:
        table.problem("name", "the level has no name", row, "name")
    x, y = table.number(row, "x", "length"), table.number(row, "y", "length")
    head = table.number(row, "head", "length") if "head" in table.header else None
    if head is None and {"measuring_point", "depth"} <= set(table.header):
        point, depth = table.number(row, "measuring_point", "length"), table.number(row, "depth", "length")
        head = None if point is None or depth is None else point - depth
    sd, datum = _error_of(table, row, block), _datum_of(table, row, block)
    date = row.cells.get("date", "").strip()
    if date and not _DATE.match(date):
        table.problem("date", f"date {date!r} of {name} is not understood", row, "date", "write it as 2024-05-31")
    if len(table.intake.problems) > before:
        return None
    if x is None or y is None:
        table.problem(
            "place", f"level {name} has no place", row, "x" if x is None else "y", "delete the row, or give x and y"
        )
        return None
    if head is None:
        table.intake.note(f"level {name} (line {row.line} of {table.block.file}) has no reading: not used")
        return None
    assert sd is not None
    return LevelRow(LevelInput(name, x, y, head, sd, datum), row, date)


def _error_of(table: Table, row: Row, block: LevelsBlock) -> float | None:
    if not isinstance(block.error, dict):
        return block.error
    quality = row.cells["quality"].strip()
    if quality not in block.error:
        text = (
            f"quality {quality!r} of {row.cells['name'].strip()} has no error" if quality else "the quality is missing"
        )
        table.problem("quality", text, row, "quality", meant(quality, block.error, "levels.error has"))
        return None
    return block.error[quality]


def _datum_of(table: Table, row: Row, block: LevelsBlock) -> str | None:
    datum = row.cells.get("datum", "").strip() if block.datum_error else ""
    if datum and datum not in block.datum_error:
        table.problem("datum", f"datum {datum!r} has no entry in levels.datum_error", row, "datum",
                      meant(datum, block.datum_error, "levels.datum_error has"))  # fmt: skip
    return datum or None


def _left_out(rows: list[LevelRow], table: Table, block: LevelsBlock, intake: Intake) -> list[LevelRow]:
    names = {row.cells["name"].strip() for row in table.rows}
    for name in block.leave_out:
        if name not in names:
            intake.error("leave-out", f"level {name!r} is not in {block.file!r}", (*_PATH, "leave_out", name),
                         meant(name, sorted(names)[:30], "levels"), key=True)  # fmt: skip
    out = []
    for r in rows:
        reason = block.leave_out.get(r.level.name)
        if reason is not None:
            intake.note(f"level {r.level.name} is left out of the fit: {reason}")
        out.append(replace(r, level=replace(r.level, left_out=reason)))
    return out


def _repeats(rows: list[LevelRow], table: Table, block: LevelsBlock, intake: Intake) -> list[LevelRow]:
    """One level for each place; levels left out stay as they are."""
    groups: list[list[LevelRow]] = []
    by_name: dict[str, list[LevelRow]] = {}
    by_place: dict[tuple[int, int], list[LevelRow]] = {}
    for r in rows:
        if r.level.left_out is not None:
            continue
        place = (round(r.level.x / _SAME_PLACE), round(r.level.y / _SAME_PLACE))
        namesake = by_name.get(r.level.name)
        if namesake is not None and by_place.get(place) is not namesake:
            first = namesake[0]
            gap = math.hypot(first.level.x - r.level.x, first.level.y - r.level.y)
            table.problem("name", f"two levels are named {r.level.name!r}, {gap:.1f} m apart; the first is in line "
                          f"{first.row.line}", r.row, "name", "give each place its own name")  # fmt: skip
            continue
        group = by_place.get(place)
        if group is None:
            group = by_place[place] = []
            groups.append(group)
        group.append(r)
        by_name[r.level.name] = group
    merged = []
    for group in groups:
        if len(group) > 1 and block.repeats in (None, "refuse"):
            names = ", ".join(dict.fromkeys(r.level.name for r in group))
            lines = ", ".join(str(r.row.line) for r in group)
            help = "say what they become: 'repeats: mean' or 'repeats: latest'; nested screens go to 'leave_out'"
            table.problem(
                "repeats", f"{len(group)} levels at one place ({names}; lines {lines})", group[1].row, "name", help
            )
        merged.append(_merged(group, block, intake) if len(group) > 1 else group[0])
    return merged + [r for r in rows if r.level.left_out is not None]


def _merged(group: list[LevelRow], block: LevelsBlock, intake: Intake) -> LevelRow:
    names = ", ".join(dict.fromkeys(r.level.name for r in group))
    if block.repeats == "latest":
        undated = [r for r in group if not r.date]
        if undated:
            intake.error(
                "date",
                f"a reading of {undated[0].level.name} (line {undated[0].row.line}) has no date",
                (*_PATH, "repeats"),
            )
        last = max(group, key=lambda r: (r.date, r.row.line))
        intake.note(f"{len(group)} levels at one place ({names}): the latest, {last.date}, is used")
        return last
    mean = sum(r.level.head for r in group) / len(group)
    # the readings' own errors are independent, so that of their mean is smaller
    sd = math.sqrt(sum(r.level.sd**2 for r in group)) / len(group)
    data = {r.level.datum for r in group}
    if len(data) > 1:
        intake.error("datum", f"the levels at one place ({names}) have different datums", (*_PATH, "repeats"))
    intake.note(f"{len(group)} levels at one place ({names}): their mean is used")
    return replace(group[0], level=replace(group[0].level, head=mean, sd=sd))


def used(levels: Iterable[LevelRow]) -> list[LevelRow]:
    """The levels that take part in the fit."""
    return [r for r in levels if r.level.left_out is None]
