"""Lines and polygons of a scenario: inline coordinates or GeoJSON, checked with shapely."""

import json
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Literal

import numpy as np
import shapely

from .intake import Intake
from .messages import Problem, meant
from .schema import FileLine
from .yaml_tree import Path_

_LONLAT = {"OGC:CRS84", "EPSG:4326", "EPSG:4979", "EPSG:4258", "EPSG:4269"}
_SAME_PLACE = 1e-3  # m; vertices nearer than this are one


@dataclass(frozen=True)
class LineIn:
    """A line as read: x, y (n,) in m; a ring runs counter-clockwise and does not repeat its last vertex."""

    x: np.ndarray
    y: np.ndarray
    closed: bool


def read_line(
    line: FileLine | list[tuple[float, float]] | str,
    intake: Intake,
    path: Path_,
    name: str,
    shape: Literal["line", "ring", "either"],
    *,
    open: bool = False,
) -> LineIn | None:
    """A line of the scenario; None (and a problem) where it cannot stand.

    shape: what is wanted; "either" takes listed points as a ring unless ``open``, and a line of a file as it is.
    """
    if isinstance(line, list):
        xy = np.array(line, dtype=float).reshape(-1, 2)
        closed = shape == "ring" or (shape == "either" and not open)
    else:
        request = FileLine(file=line) if isinstance(line, str) else line
        found = _from_file(request, intake, (*path, "file") if isinstance(line, FileLine) else path, path)
        if found is None:
            return None
        xy, polygon = found
        ends_meet = len(xy) > 3 and bool(np.all(xy[0] == xy[-1]))
        closed = polygon or (shape != "line" and not open and ends_meet)
        if polygon and (shape == "line" or open):
            intake.error("form", f"{name}: a line is wanted, {request.file!r} holds a polygon", path)
            return None
        if shape == "ring" and not closed:
            intake.error("form", f"{name}: a polygon is wanted, {request.file!r} holds a line", path)
            return None
    xy = _without_repeats(xy, closed, intake, name)
    least = 3 if closed else 2
    if len(xy) < least:
        intake.error("form", f"{name}: needs at least {least} different vertices; received {len(xy)}", path)
        return None
    crossing = _crossing(xy, closed)
    if crossing is not None:
        what = "the polygon" if closed else "the line"
        there = f"x {crossing[0] / intake.bare.length:.10g}, y {crossing[1] / intake.bare.length:.10g}"
        intake.error("self-crossing", f"{name}: {what} crosses or touches itself at {there}", path,
                     "put the vertices in the order in which one walks along it")  # fmt: skip
        return None
    if closed and _area(xy) < 0:
        xy = xy[::-1]
    return LineIn(xy[:, 0].copy(), xy[:, 1].copy(), closed)


def _without_repeats(xy: np.ndarray, closed: bool, intake: Intake, name: str) -> np.ndarray:
    if closed and len(xy) > 1 and np.hypot(*(xy[0] - xy[-1])) < _SAME_PLACE:
        xy = xy[:-1]  # the customary repeated last vertex of a ring
    keep = np.ones(len(xy), dtype=bool)
    keep[1:] = np.hypot(*np.diff(xy, axis=0).T) >= _SAME_PLACE
    if not keep.all():
        intake.note(f"{name}: {int((~keep).sum())} repeated vertices dropped")
    return xy[keep]


def _area(xy: np.ndarray) -> float:
    d = xy - xy[0]
    return float(0.5 * np.sum(d[:, 0] * np.roll(d[:, 1], -1) - d[:, 1] * np.roll(d[:, 0], -1)))


def _crossing(xy: np.ndarray, closed: bool) -> np.ndarray | None:
    """A place where a line or ring meets itself, None if it does not."""
    ends = np.vstack([xy, xy[:1]]) if closed else xy
    if shapely.is_simple(shapely.LineString(ends)) and (not closed or shapely.is_valid(shapely.Polygon(ends))):
        return None
    segments = shapely.linestrings(np.stack([ends[:-1], ends[1:]], axis=1))
    first, second = shapely.STRtree(segments).query(segments, predicate="intersects")
    n = len(segments)
    for i, j in sorted(zip(first.tolist(), second.tolist(), strict=True)):
        if j <= i:
            continue
        met = shapely.intersection(segments[i], segments[j])
        neighbours = j == i + 1 or (closed and i == 0 and j == n - 1)
        if not neighbours or met.length > 0:  # neighbours share a vertex, but must not run back over each other
            return np.asarray(shapely.get_coordinates(met)[-1])
    return np.asarray(xy[0])


def _from_file(request: FileLine, intake: Intake, path: Path_, at: Path_) -> tuple[np.ndarray, bool] | None:
    """Coordinates (n, 2) in m of the wanted feature of a GeoJSON file, and whether it is a polygon."""
    file = intake.file(request.file, path)
    data = None if file is None else _read_json(file, intake, path)
    if file is None or data is None:
        return None
    features = _features(data)
    if features is None:
        intake.error(
            "geojson", f"{request.file!r} is no GeoJSON: no FeatureCollection, Feature or geometry in it", path
        )
        return None
    chosen = _chosen(features, request, intake, at)
    if chosen is None:
        return None
    try:
        shapes = [shapely.geometry.shape(f["geometry"]) for f in chosen]
        shape = _joined(shapes)
    except Exception:  # the library raises what it likes on coordinates that are none
        intake.error("geojson", f"{request.file!r}: a geometry is not readable", path)
        return None
    polygon = isinstance(shape, shapely.Polygon)
    if not isinstance(shape, shapely.LineString | shapely.Polygon) or shape.is_empty:
        kinds = ", ".join(sorted({s.geom_type for s in shapes}))
        intake.error("geojson", f"{request.file!r}: one line or polygon is wanted; found {len(shapes)} of {kinds} that "
                     "do not join end to end", at, "choose one with 'where: {name: ...}'")  # fmt: skip
        return None
    if polygon and shape.interiors:
        intake.error("geojson", f"{request.file!r}: the polygon has a hole", at,
                     "give the outer ring here; an island is a lake of its own with 'land: inside'")  # fmt: skip
        return None
    xy = shapely.get_coordinates(shape.exterior if polygon else shape)
    if not np.all(np.isfinite(xy)):
        intake.error("geojson", f"{request.file!r}: a coordinate is not a number", path)
        return None
    if not _crs_fits(data, request, xy, intake, path):
        return None
    xy = xy * intake.bare.length
    return (_thinned(xy, request, intake), polygon)


def _thinned(xy: np.ndarray, request: FileLine, intake: Intake) -> np.ndarray:
    if request.thin is None:
        return xy
    line = shapely.simplify(shapely.LineString(xy), request.thin, preserve_topology=True)
    intake.note(f"{request.file} {request.where or ''}: thinned by {request.thin:g} m, {len(xy)} to "
                f"{len(line.coords)} vertices")  # fmt: skip
    return np.array(line.coords)


def _joined(shapes: list[Any]) -> Any:
    parts = [p for s in shapes for p in shapely.get_parts(s)]
    if len(parts) == 1:
        return shapely.force_2d(parts[0])
    if all(isinstance(p, shapely.LineString) for p in parts):
        return shapely.line_merge(shapely.force_2d(shapely.MultiLineString(parts)), directed=True)
    return shapely.GeometryCollection(parts)


def _read_json(file: Path, intake: Intake, path: Path_) -> Any:
    try:
        return json.loads(file.read_bytes().decode("utf-8-sig"))
    except json.JSONDecodeError as error:
        intake.problems.append(
            Problem("geojson", f"not readable as JSON: {error.msg}", file, error.lineno, error.colno)
        )
    except UnicodeDecodeError as error:
        intake.problems.append(
            Problem("encoding", f"not UTF-8 at byte {error.start}", file, None, None, "save it as UTF-8")
        )
    except (OSError, RecursionError) as error:
        intake.error("file", f"cannot read {file.name}: {error}", path)
    return None


def _features(data: Any) -> list[dict[str, Any]] | None:
    if not isinstance(data, dict):
        return None
    if data.get("type") == "FeatureCollection":
        found = data.get("features")
        good = isinstance(found, list) and all(
            isinstance(f, dict) and isinstance(f.get("geometry"), dict) for f in found
        )
        return found if good else None
    if data.get("type") == "Feature":
        return [data] if isinstance(data.get("geometry"), dict) else None
    return [{"properties": {}, "geometry": data}] if "coordinates" in data else None


def _chosen(
    features: list[dict[str, Any]], request: FileLine, intake: Intake, at: Path_
) -> list[dict[str, Any]] | None:
    """The features that have the wanted properties."""
    found = features
    for key, wanted in request.where.items():
        names = sorted({k for f in features for k in (f.get("properties") or {})})
        if key not in names:
            intake.error("where", f"no feature of {request.file!r} has the property {key!r}", (*at, "where", key),
                         meant(key, names, "properties"), key=True)  # fmt: skip
            return None
        values = sorted({str((f.get("properties") or {}).get(key)) for f in found})
        found = [f for f in found if str((f.get("properties") or {}).get(key)) == wanted]
        if not found:
            intake.error("where", f"no feature of {request.file!r} has {key}: {wanted}", (*at, "where", key),
                         meant(wanted, values[:20], f"{key} in the file"))  # fmt: skip
            return None
    if not found:
        intake.error("geojson", f"{request.file!r} holds no feature", at)
        return None
    return found


def _crs_fits(data: Any, request: FileLine, xy: np.ndarray, intake: Intake, path: Path_) -> bool:
    """Whether the file's coordinates are in the site's system; this version does not convert them."""
    member = data.get("crs") if isinstance(data, dict) else None
    said = request.crs or _crs_name(member)
    help = f"this version needs coordinates in the site's system ({intake.crs}): convert the file and put its crs in it"
    degrees = bool(np.all(np.abs(xy[:, 0]) <= 180) and np.all(np.abs(xy[:, 1]) <= 90))
    if said in _LONLAT or (said is None and intake.crs != "local" and degrees):
        intake.error("crs", f"{request.file!r} holds longitudes and latitudes, the site is in {intake.crs}", path, help)
        return False
    if said is not None and said != intake.crs:
        intake.error("crs", f"{request.file!r} is in {said}, the site is in {intake.crs}", path, help)
        return False
    if said is None and intake.crs != "local":
        intake.note(f"{request.file} does not say its coordinate system: taken as {intake.crs}")
    return True


def _crs_name(member: Any) -> str | None:
    """EPSG:n or OGC:CRS84 out of a GeoJSON 2008 crs member such as urn:ogc:def:crs:EPSG::25832."""
    name = (member.get("properties") or {}).get("name") if isinstance(member, dict) else None
    if not isinstance(name, str):
        return None
    parts = [p for p in name.removeprefix("urn:ogc:def:crs:").split(":") if p]
    return f"{parts[0]}:{parts[-1]}" if len(parts) > 1 else name
