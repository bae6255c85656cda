"""A first scenario out of a folder: what a table of levels tells, and guesses for the rest, each marked GUESSED."""

import csv
import io
import json
import math
import re
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from .messages import InputError, Problem, one

_NAMES = {
    "name": ("name", "well", "id", "station", "site", "bore", "borehole", "label", "no"),
    "x": ("x", "e", "east", "easting", "rechtswert", "xcoord", "x_m"),
    "y": ("y", "n", "north", "northing", "hochwert", "ycoord", "y_m"),
    "head": ("head", "h", "level", "waterlevel", "gwl", "wl", "head_m", "stage", "elevation"),
    "measuring_point": ("measuring_point", "mp", "measuringpoint", "toc", "topofcasing"),
    "depth": ("depth", "dtw", "depthtowater", "depth_to_water"),
}


@dataclass(frozen=True)
class _Table:
    """Levels found in a table (m): columns by what they hold, places and heads, delimiter and decimal sign."""

    file: str
    columns: dict[str, str]
    xyh: np.ndarray
    delimiter: str
    decimal: str


def start_scenario(folder: str | Path) -> Path:
    """Write scenario.yaml into a folder and return its path.

    Raises InputError where there is no such folder, a scenario already, or a table without levels.
    """
    folder = Path(folder)
    target = folder / "scenario.yaml"
    if not folder.is_dir():
        raise one("file", f"there is no folder {folder}", help="make it first, and put a CSV of levels into it")
    if target.exists():
        raise one(
            "exists", f"{target} is there already; nothing is overwritten", help="move it, or choose another folder"
        )
    tables = sorted(p for p in folder.iterdir() if p.is_file() and p.suffix.lower() == ".csv")
    named = [p for p in tables if p.name.lower() == "levels.csv"]
    if len(tables) > 1 and not named:
        raise one("file", f"{folder} holds {len(tables)} CSV files", help="name that of the levels levels.csv")
    table = _read(named[0] if named else tables[0]) if tables else None
    text = _scenario(folder.resolve().name, table)
    try:
        with target.open("x", encoding="utf-8") as out:
            out.write(text)
    except OSError as error:
        raise one("file", f"cannot write {target}: {error.strerror or error}") from None
    return target


def _read(file: Path) -> _Table:
    try:
        text = file.read_bytes().decode("utf-8-sig")
    except (OSError, UnicodeDecodeError) as error:
        raise one(
            "encoding", f"cannot read {file.name} as UTF-8: {error}", file, help="save it as CSV (UTF-8)"
        ) from None
    lines = text.splitlines()
    first = lines[0] if lines else ""
    delimiter = max((",", ";", "\t"), key=first.count)
    rows = [[c.strip() for c in row] for row in csv.reader(io.StringIO(text), delimiter=delimiter) if any(row)]
    header = rows[0] if rows else []
    columns = _guessed_columns(header)
    decimal = "," if delimiter != "," and any(re.fullmatch(r"-?\d+,\d+", c) for r in rows[1:] for c in r) else "."
    lacking = {"name", "x", "y"} - set(columns)
    if lacking or not ({"head"} & set(columns) or {"measuring_point", "depth"} <= set(columns)):
        raise InputError(
            [Problem("header", f"cannot guess which columns of {file.name} hold name, x, y and head", file, 1, 1,
                     "name the columns name, x, y, head (or measuring_point and depth)")]
        )  # fmt: skip
    if "head" in columns:
        columns = {k: v for k, v in columns.items() if k not in ("measuring_point", "depth")}
    found = []
    for row in rows[1:]:
        cells = dict(zip(header, row, strict=False))
        x, y, *rest = (_number(cells.get(columns[k], ""), decimal) for k in columns if k != "name")
        keys = [k for k in columns if k not in ("name", "x", "y")]
        held = dict(zip(keys, rest, strict=True))
        head = held["head"] if "head" in held else held["measuring_point"] - held["depth"]
        if math.isfinite(x + y + head):
            found.append((x, y, head))
    if not found:
        raise one("empty", f"{file.name} holds no level", file, 1, "it needs rows with numbers under x, y and head")
    return _Table(file.name, columns, np.array(found), delimiter, decimal)


def _guessed_columns(header: list[str]) -> dict[str, str]:
    """Which column holds what: by an equal name, else by one that begins with it."""
    plain = {h: re.sub(r"[\s\[\]()]+", "", h).lower() for h in header}
    found: dict[str, str] = {}
    for what, names in _NAMES.items():
        equal = [h for n in names for h in header if plain[h] == n]
        begins = [h for n in names if len(n) > 2 for h in header if plain[h].startswith(n)]
        free = [h for h in equal + begins if h not in found.values()]
        if free:
            found[what] = free[0]
    return found


def _number(text: str, decimal: str) -> float:
    try:
        return float(text.replace(",", ".") if decimal == "," else text)
    except ValueError:
        return math.nan


def _plane(xyh: np.ndarray) -> tuple[float, float]:
    """Fall of head per length (-) and azimuth (deg) of a plane through the levels, by least squares."""
    d = xyh - xyh.mean(axis=0)
    if len(xyh) < 3 or np.linalg.matrix_rank(d[:, :2]) < 2:
        return 0.002, 90.0
    (a, b), *_ = np.linalg.lstsq(d[:, :2], d[:, 2], rcond=None)
    return float(max(math.hypot(a, b), 1e-6)), float(math.degrees(math.atan2(-a, -b)) % 360.0)


def _scenario(title: str, table: _Table | None) -> str:
    xyh = np.array([[0.0, 0.0, 100.0]]) if table is None else table.xyh
    x, y, head = (float(v) for v in xyh.mean(axis=0))
    low, high = float(xyh[:, 2].min()), float(xyh[:, 2].max())
    spread = max((high - low) / 2.0, 0.5)
    side = float(np.ptp(xyh[:, :2], axis=0).max()) or 1000.0
    gradient, towards = _plane(xyh)
    # deep enough that the ground stays wet in the drawn corners, where the fitted flow falls beyond the levels
    base = math.floor(low - max(30.0, 2.0 * (high - low)))
    place = f"[{x:.1f}, {y:.1f}]"
    return f"""# A first scenario. What is marked GUESSED is no knowledge: mend it, then delete the word.
# For help while typing, keep the next line and write the file with: wellshed schema > scenario.schema.json
# yaml-language-server: $schema=./scenario.schema.json
wellshed: 1
title: {json.dumps(title, ensure_ascii=False)}
site:
  crs: local                        # GUESSED: or a projected system such as EPSG:32633
  length: m                         # GUESSED: m, ft or ft_us for bare lengths
  heights: unknown                  # the vertical datum of all elevations
  draw: {_draw(table, x, y, side)}
aquifer:
  base: {{estimate: {base}, sd: 10}}      # GUESSED: elevation of the underside
  conductivity: {{estimate: 10 m/d, factor: 5}}      # GUESSED: a sand
  porosity: {{estimate: 0.2, sd: 0.05}}      # GUESSED
beyond:                             # the far field, until lakes and streams are mapped
  reference: {{at: {place}, head: {{estimate: {head:.2f}, sd: {_short(spread)}}}}}      # GUESSED: mean
  flow:                             # GUESSED: {_flow_source(table)}
    gradient: {{estimate: {gradient:.3g}, factor: 3}}
    towards: {{estimate: {towards:.0f} deg, sd: 45 deg}}
    at: {place}
# wells:
#   Mill 1: {{at: {place}, pumps: 450 m3/d, radius: 0.3}}
# streams:
#   Elm Brook: {{line: [[x, y], [x, y]], stage: [[0, 205.1], [1, 201.4]], width: 4}}      # from source to mouth
# lakes:
#   Tarn: {{edge: [[x, y], [x, y], [x, y]], stage: {{estimate: 204.6, sd: 0.3}}}}
# recharge:
#   fields: {{area: everywhere, rate: {{estimate: 210 mm/yr, factor: 1.4}}}}
{_levels(table)}questions:
  - water_table: {{interval: auto}}
# - capture_zone: {{wells: [Mill 1], times: [50 d, 2 yr, 5 yr]}}
"""


def _short(number: float) -> str:
    """Two digits, written out."""
    return f"{float(f'{number:.2g}'):g}"


def _draw(table: _Table | None, x: float, y: float, side: float) -> str:
    if table is not None:
        return f"{{around: levels, by: {float(f'{side / 10:.1g}'):g}}}      # GUESSED"
    return f"{{x: [{x - side:g}, {x + side:g}], y: [{y - side:g}, {y + side:g}]}}      # GUESSED"


def _flow_source(table: _Table | None) -> str:
    return "no levels tell it" if table is None else "a plane through the levels"


def _levels(table: _Table | None) -> str:
    if table is None:
        return "# levels: {file: levels.csv, error: 0.05}      # a table with the columns name, x, y, head\n"
    columns = ", ".join(f"{k}: {json.dumps(v, ensure_ascii=False)}" for k, v in table.columns.items())
    lines = ["levels:", f"  file: {json.dumps(table.file, ensure_ascii=False)}"]
    lines.append(f"  columns: {{{columns}}}      # GUESSED from the names of the columns")
    if table.delimiter != ",":
        lines.append(f'  delimiter: "{"tab" if table.delimiter == chr(9) else table.delimiter}"      # GUESSED')
    if table.decimal != ".":
        lines.append(f'  decimal: "{table.decimal}"      # GUESSED')
    lines.append("  error: 0.1                        # GUESSED: standard deviation of a reading (m)")
    lines.append("  repeats: mean                     # GUESSED: several readings at one place")
    return "\n".join(lines) + "\n"
