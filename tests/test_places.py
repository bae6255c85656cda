"""The invented places: what lies beside each scenario is what its script makes, read with the stated errors."""

import csv
import importlib.util
import json

import fem_places
import numpy as np
import pytest


@pytest.mark.parametrize("name", ["brindle_mere", "sallow_heath"])
def test_the_levels_and_the_gauging_are_readings_of_the_truth(name, source_root, tmp_path):
    folder = source_root / "scenarios" / "examples" / name
    spec = importlib.util.spec_from_file_location(f"make_{name}", folder / "make_truth.py")
    script = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(script)
    truth = script.main(tmp_path)
    scenario, _ = fem_places.stated(folder)

    kept = json.loads((folder / "truth.json").read_text())
    for feature, flow in kept["flows_m3_d"].items():
        assert truth.flows[feature] == pytest.approx(flow, rel=1e-3)

    levels = list(csv.DictReader((folder / "levels.csv").open()))
    x, y, head = (np.array([float(row[key]) for row in levels]) for key in ("x", "y", "head"))
    sd = np.array([scenario["levels"]["error"][row["quality"]] for row in levels])
    off = (head - truth.head(x, y)) / sd
    assert np.all(np.isfinite(off))
    assert np.abs(off).max() < 3.5
    assert 0.6 < np.sqrt(np.mean(off**2)) < 1.4

    (gauging,) = scenario["gaugings"].values()
    flow = float(gauging["flow"].removesuffix(" L/s")) * 86.4
    assert flow == pytest.approx(truth.gain(gauging["stream"], gauging["at"]), rel=3 * 0.06)
