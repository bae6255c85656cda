"""GeoJSON layers by the structure of RFC 7946, and CSV tables that a spreadsheet reads as they are."""

import csv
import io
import json

import numpy as np
import shapely
from wellshed.scenarios.context import Row
from wellshed.scenarios.layers import layer_text
from wellshed.scenarios.tables import table_text

HOLE = shapely.Polygon([(0, 0), (0, 10), (10, 10), (10, 0)], [[(2, 2), (4, 2), (4, 4), (2, 4)]])  # clockwise


def signed_area(ring):
    x, y = np.array(ring)[:, 0], np.array(ring)[:, 1]
    return 0.5 * float(np.sum(x[:-1] * y[1:] - x[1:] * y[:-1]))


def test_rings_close_and_turn_the_right_way():
    # RFC 7946, 3.1.6: exteriors counter-clockwise, holes clockwise, first position repeated
    layer = json.loads(layer_text("zones", [Row(HOLE, {"area_m2": 96.0})], "EPSG:32633"))
    assert layer["type"] == "FeatureCollection"
    geometry = layer["features"][0]["geometry"]
    assert geometry["type"] == "Polygon"
    outer, inner = geometry["coordinates"]
    assert outer[0] == outer[-1]
    assert signed_area(outer) == 100.0
    assert signed_area(inner) == -4.0
    assert layer["crs"]["properties"]["name"].endswith("EPSG::32633")


def test_a_layer_gives_back_its_geometries_to_a_millimetre_and_the_same_bytes():
    shapes = [
        shapely.Point(512300.12345, 5401200.98765),
        shapely.LineString([(0.1, 0.2), (3.3, 4.4)]),
        shapely.MultiPolygon([shapely.box(0, 0, 1, 1), shapely.box(3, 3, 5, 5)]),
    ]
    rows = [Row(s, {"name": f"n{i}", "head_m": 1.5}) for i, s in enumerate(shapes)]
    text = layer_text("x", rows, "local")
    assert text == layer_text("x", rows, "local")
    read = json.loads(text)
    assert "crs" not in read
    for feature, shape in zip(read["features"], shapes, strict=True):
        assert shapely.geometry.shape(feature["geometry"]).hausdorff_distance(shape) < 1e-3


def test_numbers_that_are_none_become_null_and_no_geometry_is_allowed():
    columns = {"a": np.float64("nan"), "b": np.int64(3), "c": None, "d": np.bool_(True), "e": "Grün"}
    (feature,) = json.loads(layer_text("run_info", [Row(None, columns)], "local"))["features"]
    assert feature["geometry"] is None
    assert feature["properties"] == {"a": None, "b": 3, "c": None, "d": True, "e": "Grün"}


def test_tables_have_all_columns_and_ten_digits():
    text = table_text([{"a": 1 / 3, "b": "x"}, {"b": "y, z", "c": True}, {"a": None, "c": False}])
    rows = list(csv.reader(io.StringIO(text)))
    assert rows == [["a", "b", "c"], ["0.3333333333", "x", ""], ["", "y, z", "yes"], ["", "", "no"]]


def test_no_text_becomes_a_formula():
    rows = list(csv.reader(io.StringIO(table_text([{"name": "=SUM(A1)", "head": -2.5}, {"name": "@x", "head": 1}]))))
    assert rows[1:] == [["'=SUM(A1)", "-2.5"], ["'@x", "1"]]
