"""Invent the levels of an example place: read what its scenario states, change it to a truth, solve, read wells.

A development tool of the example scripts; it knows only the words of the scenario that the examples use.
"""

import csv
import json
from pathlib import Path

import fem
import numpy as np
import shapely
import yaml

SD = {"surveyed": 0.03, "gps": 0.3}  # m
YEAR = 365.25  # d


def stated(folder):
    """The scenario as YAML reads it, and its waters: name -> points (n, 2)."""
    scenario = yaml.safe_load((Path(folder) / "scenario.yaml").read_text())
    waters = {}
    for feature in json.loads((Path(folder) / "waters.geojson").read_text())["features"]:
        shape = feature["geometry"]
        ring = shape["type"] == "Polygon"
        points = np.array(shape["coordinates"][0][:-1] if ring else shape["coordinates"], dtype=float)
        waters[feature["properties"]["name"]] = points
    return scenario, waters


def site_of(scenario, waters, true, *, hidden=(), size=30.0):
    """The finite-element site: stated geometry; true ground, recharge and shifts; hidden wells."""
    outer = np.array(scenario["outline"]["line"], dtype=float)
    (x0, y0), (x1, y1) = outer.min(axis=0), outer.max(axis=0)
    ground = fem.simulated_ground(
        (x0, x1, y0, y1), true["conductivity"], true["spread"], true["patch"], true["ground_seed"]
    )
    streams = []
    for name, stream in scenario["streams"].items():
        points, shift = waters[name], true["shifts"].get(name, 0.0)
        shares, stages = np.array(stream["stage"], dtype=float).T
        points, share = _with_shares(points, shares)
        streams.append(fem.Stream(name, points, np.interp(share, shares, stages) + shift))
    lakes = [fem.Lake(name, waters[name], true["stages"][name]) for name in scenario.get("lakes", {})]
    wells = [
        fem.Well(name, *well["at"], float(well["pumps"].split()[0]), 3.0)
        for name, well in scenario.get("wells", {}).items()
    ]
    return fem.Site(
        outer,
        float(scenario["aquifer"]["base"]),
        ground,
        size,
        recharge=true["recharge_mm_yr"] / 1000 / YEAR,
        streams=tuple(streams),
        lakes=tuple(lakes),
        wells=(*wells, *hidden),
        tip=1.0,
    )


def write_levels(folder, truth, count, seed, surveyed=0.6):
    """Write levels.csv: ``count`` irregular places on land, read with the error of their quality."""
    site, random = truth.site, np.random.default_rng(seed)
    waters = [shapely.LineString(s.points) for s in site.streams] + [shapely.Polygon(lake.ring) for lake in site.lakes]
    waters += [shapely.Point(w.x, w.y) for w in site.wells]
    land = shapely.Polygon(site.outer).buffer(-40).difference(shapely.union_all(waters).buffer(45))
    low, high = site.outer.min(axis=0), site.outer.max(axis=0)
    places = []
    while len(places) < count:
        at = random.uniform(low, high)
        if land.contains(shapely.Point(at)) and all(np.hypot(*(at - other)) > 170 for other in places):
            places.append(np.round(at))
    places = np.array(places)
    heads = truth.head(places[:, 0], places[:, 1])
    quality = np.where(random.random(count) < surveyed, "surveyed", "gps")
    read = heads + random.standard_normal(count) * np.array([SD[q] for q in quality])
    with (Path(folder) / "levels.csv").open("w", newline="") as file:
        rows = csv.writer(file, lineterminator="\n")
        rows.writerow(["name", "x", "y", "head", "quality"])
        for i, (at, head, how) in enumerate(zip(places, read, quality)):
            rows.writerow([f"P{i + 1}", f"{at[0]:.0f}", f"{at[1]:.0f}", f"{head:.2f}", how])
    return places, heads


def write_truth(folder, true, truth):
    """Write truth.json: the true values and the true flows (m3/d into the aquifer)."""
    flows = {name: round(flow, 2) for name, flow in truth.flows.items()}
    text = json.dumps({"note": "true values of an invented place", **true, "flows_m3_d": flows}, indent=2)
    (Path(folder) / "truth.json").write_text(text + "\n")


def _with_shares(points, shares):
    """The points with vertices inserted at the shares of the length, and the share of every vertex."""
    along = np.concatenate([[0.0], np.cumsum(np.hypot(*np.diff(points, axis=0).T))])
    along /= along[-1]
    share = np.unique(np.concatenate([along, shares]))
    share = share[np.concatenate([[True], np.diff(share) > 1e-9])]
    return np.column_stack([np.interp(share, along, points[:, 0]), np.interp(share, along, points[:, 1])]), share
