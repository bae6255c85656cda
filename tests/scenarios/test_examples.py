"""Both examples, the whole way: the truth behind each comes from finite elements (make_truth.py beside it)."""

import itertools
import json
from pathlib import Path

import numpy as np
import pytest
import shapely
from wellshed.scenarios.answering import answer, report_lines
from wellshed.scenarios.reading import load
from wellshed.scenarios.writing import write

EXAMPLES = Path(__file__).resolve().parents[2] / "scenarios" / "examples"


def run(name, folder):
    answers = answer(load(EXAMPLES / name / "scenario.yaml"))
    write(answers, folder / name)
    truth = json.loads((EXAMPLES / name / "truth.json").read_text(encoding="utf-8"))
    content = json.loads((folder / name / "answers.json").read_text(encoding="utf-8"))
    return answers, content, truth, folder / name


@pytest.fixture(scope="module")
def mere(tmp_path_factory):
    return run("brindle_mere", tmp_path_factory.mktemp("mere"))


@pytest.fixture(scope="module")
def heath(tmp_path_factory):
    return run("sallow_heath", tmp_path_factory.mktemp("heath"))


def parameter(content, name):
    return next(p for p in content["fit"]["parameters"] if p["name"] == name)


def test_the_fit_finds_the_truth_of_the_first_example(mere):
    _, content, truth, _ = mere
    expected = {
        "aquifer.conductivity": truth["conductivity"],
        "recharge.meadows.rate": truth["recharge_mm_yr"] / 1000 / 365.25,
        "lakes.Brindle Mere.stage": truth["stages"]["Brindle Mere"],
        "streams.Sallow Beck.shift": truth["shifts"]["Sallow Beck"],
    }
    for name, value in expected.items():
        found = parameter(content, name)
        low, high = found["interval_90"]
        # four intervals at 90%: all four hold the truth in two of three places; half as wide again in nearly all
        middle, half = 0.5 * (low + high), 0.5 * (high - low)
        assert abs(value - middle) < 1.5 * half, name
        assert found["informed"] > 0.9
    assert 0.7 < content["fit"]["scale"] < 1.4
    assert content["fit"]["warnings"] == []


def test_flows_of_the_first_example_are_those_of_the_truth(mere):
    _, content, truth, _ = mere
    flows = {row["feature"]: row["inflow"] - row["outflow"] for row in content["balance"]}
    for name, value in truth["flows_m3_d"].items():
        assert flows[name] == pytest.approx(value, rel=0.1)  # fitted to levels that are centimetres off


def test_all_checks_pass_and_all_keys_are_there(mere):
    _, content, _, folder = mere
    assert all(check["passed"] for check in content["checks"])
    assert content["scenario"].keys() >= {"file", "sha256"}
    assert isinstance(content["seed"], int)
    assert content["boundary"]["met"] is True
    assert content["boundary"]["max_misfit"] <= content["boundary"]["tolerance"]
    assert len(content["boundary"]["at"]) == 2
    assert content["balance_closure"] < 1e-9
    assert {c["name"] for c in content["cases"]} == {"base", "permitted", "dry"}
    for row in content["fit"]["residuals"]:
        assert row.keys() >= {"name", "x", "y", "observed", "computed", "residual", "standardized", "leverage"}
    for p in content["fit"]["parameters"]:
        assert p.keys() >= {"name", "value", "sd", "unit", "prior", "informed"}
    zones = [a for a in content["answers"] if a["question"] == "capture_zone"]
    assert {z["case"] for z in zones} == {"base", "permitted", "dry"}
    for zone in zones:
        keys = {"well", "rate", "area", "polygon", "stagnation_points", "supply", "times"}
        assert zone.keys() >= keys
        assert (folder / zone["polygon"]).is_file()
        assert [t["days"] for t in zone["times"]] == pytest.approx([50, 730.5, 1826.25])
        assert sum(zone["supply"].values()) == pytest.approx(1.0, abs=1e-9)


def test_the_zone_closes_its_water_budget(mere):
    # recharge on the zone's ground + what the waters give = the rate; not exact where others draw from the same ground
    _answers, content, _, folder = mere
    rates = {"base": 1.0, "permitted": 1.0, "dry": 0.6}
    recharge = parameter(content, "recharge.meadows.rate")["value"]
    for zone in (a for a in content["answers"] if a["question"] == "capture_zone"):
        by_recharge = zone["supply"]["recharge"] * zone["rate"]
        full = recharge * rates[zone["case"]] * zone["area"]
        assert by_recharge <= full * 1.005
        assert by_recharge == pytest.approx(full, rel=0.01) or zone["supply"].get("Sallow Beck", 0.0) > 0.0
        layer = json.loads((folder / zone["polygon"]).read_text(encoding="utf-8"))
        shape = shapely.geometry.shape(layer["features"][0]["geometry"])
        assert shape.is_valid
        assert shape.area == pytest.approx(zone["area"], rel=1e-5)


def test_time_zones_grow_and_lie_within_the_whole_zone(mere):
    _, content, _, folder = mere
    for zone in (a for a in content["answers"] if a["question"] == "capture_zone"):
        names = [*(t["polygon"] for t in zone["times"]), zone["polygon"]]
        shapes = [
            shapely.geometry.shape(json.loads((folder / n).read_text(encoding="utf-8"))["features"][0]["geometry"])
            for n in names
        ]
        for inner, outer in itertools.pairwise(shapes):
            assert inner.difference(outer).area < 2e-3 * inner.area
        for t in zone["times"]:
            assert t["area_high_porosity"] < t["area"] < t["area_low_porosity"]


def test_more_pumping_draws_down_and_takes_from_the_waters(mere):
    _, content, _, _ = mere
    permitted = next(c for c in content["cases"] if c["name"] == "permitted")
    assert all(fall > 0.0 for fall in permitted["drawdown"].values())
    assert permitted["drawdown"]["Waterworks"] == max(permitted["drawdown"].values())
    change = permitted["exchange_change"]
    # 380 m3/d more are pumped: the lake and the stream give (or take less by) just as much
    assert change["Waterworks"] == pytest.approx(-380.0)
    assert change["Sallow Beck"] + change["Brindle Mere"] == pytest.approx(380.0, rel=1e-6)


def test_the_second_example_says_that_own_errors_do_not_explain_the_residuals(heath):
    answers, content, truth, _ = heath
    said = [w for w in content["fit"]["warnings"] if "do not explain the residuals" in w]
    assert len(said) == 1
    assert content["fit"]["own_errors"]["probability"] < 1e-6
    assert any("do not explain the residuals" in line for line in report_lines(answers))
    # uneven ground is allowed for: the spreads stay wide enough for the truth behind it
    low, high = parameter(content, "aquifer.conductivity")["interval_90"]
    assert low < truth["conductivity"] < high
    # the hidden well shows: round it the levels are below the computed heads
    well = truth["hidden_well"]["at"]
    rows = [r for r in content["fit"]["residuals"] if r["kind"] == "level"]
    near = [r["residual"] for r in rows if np.hypot(r["x"] - well[0], r["y"] - well[1]) < 600]
    assert len(near) >= 4
    assert np.mean(near) < -0.1  # more than three times the sd of a surveyed level
