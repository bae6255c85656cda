"""GIS layers as GeoJSON (RFC 7946 structure), coordinates in the site's system.

RFC 7946 knows longitude and latitude only. Ground water is worked on in projected metres, so the layers keep the
site's system and name it in the ``crs`` member of the GeoJSON of 2008, which GIS programs honour. A local system
has no name; then the member is left out.
"""

import json
import re
from collections.abc import Sequence
from typing import Any

import numpy as np
import shapely

from .context import Row

DECIMALS = 3  # mm


def layer_text(name: str, rows: Sequence[Row], crs: str) -> str:
    """A FeatureCollection with a name, the site's system and a feature for every row; the same bytes each time."""
    features = [_feature(row) for row in rows]
    out: dict[str, Any] = {"type": "FeatureCollection", "name": name}
    code = re.fullmatch(r"EPSG:(\d+)", crs)
    if code:
        out["crs"] = {"type": "name", "properties": {"name": f"urn:ogc:def:crs:EPSG::{code.group(1)}"}}
    out["features"] = features
    return json.dumps(out, allow_nan=False, ensure_ascii=False, indent=1) + "\n"


def _feature(row: Row) -> dict[str, Any]:
    shape = row.geometry
    geometry = None
    if shape is not None and not shape.is_empty:
        if isinstance(shape, shapely.Polygon | shapely.MultiPolygon):
            shape = shapely.set_precision(shape, 10.0**-DECIMALS)  # rounding alone can make a ring cross itself
        shape = _oriented(shape)
        geometry = _rounded(shapely.geometry.mapping(shape))
    return {"type": "Feature", "properties": {k: plain(v) for k, v in row.columns.items()}, "geometry": geometry}


def _oriented(shape: shapely.Geometry) -> shapely.Geometry:
    """Exterior rings counter-clockwise, holes clockwise (RFC 7946, 3.1.6); slivers without area dropped."""
    if isinstance(shape, shapely.Polygon):
        return shapely.geometry.polygon.orient(shape, 1.0)
    if isinstance(shape, shapely.MultiPolygon | shapely.GeometryCollection):
        parts = [p for p in shapely.get_parts(shape) if isinstance(p, shapely.Polygon) and p.area > 1e-2]
        if parts:
            oriented = [shapely.geometry.polygon.orient(p, 1.0) for p in parts]
            return oriented[0] if len(oriented) == 1 else shapely.MultiPolygon(oriented)
    return shape


def _rounded(geometry: Any) -> dict[str, Any]:
    def at(value: Any) -> Any:
        return [at(v) for v in value] if isinstance(value, tuple | list) else round(float(value), DECIMALS) + 0.0

    return {"type": geometry["type"], "coordinates": at(geometry["coordinates"])}


def plain(value: Any) -> Any:
    """A column's value as JSON can hold it: numpy numbers as Python's, what is not finite as null."""
    if isinstance(value, np.generic):
        value = value.item()
    if isinstance(value, float) and not np.isfinite(value):
        return None
    return value
