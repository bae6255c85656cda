"""Streams that flow into each other: what a gauging below a confluence measures, and streams that would run dry."""

import numpy as np
import pytest
from small import changed, put
from wellshed.scenarios.answering import answer
from wellshed.scenarios.building import build
from wellshed.scenarios.fitting import fit_scenario
from wellshed.scenarios.messages import InputError
from wellshed.scenarios.reading import load
from wellshed.scenarios.routing import least_flow, reaches_above

BROOKS = """streams:
  Elm Brook:
    line: [[900, 700], [850, 400], [920, 100]]
    stage: [[0, 61.5], [1, 59.4]]
    starts_with: {start}
  Ash Rill:
    line: [[600, 620], [700, 460], [850, 400]]
    stage: [[0, 61.9], [1, 60.45]]
    starts_with: 40 m3/d
    into: Elm Brook
gaugings:
  Bridge: {{stream: Elm Brook, at: 1, flow: 5 L/s, error: 5%}}
"""
OLD = "streams:\n  Elm Brook:\n    line: [[900, 700], [850, 400], [920, 100]]\n    stage: [[0, 61.5], [1, 59.4]]\n"


def scenario(folder, start="100 m3/d"):
    return load(put(folder, changed(OLD, BROOKS.format(start=start))))


def test_a_tributary_counts_below_its_mouth_only(tmp_path):
    streams = {s.name: s for s in scenario(tmp_path).streams}
    assert [n for n, _ in reaches_above(streams, "Elm Brook", 250.0)] == ["Elm Brook"]
    below = reaches_above(streams, "Elm Brook", 310.0)
    assert [n for n, _ in below] == ["Elm Brook", "Ash Rill"]
    assert below[1][1] == pytest.approx(np.hypot(100, 160) + np.hypot(150, 60))


def test_a_gauging_measures_all_that_comes_from_above(tmp_path):
    model = build(found := scenario(tmp_path))
    fitted = fit_scenario(found, model)
    solution = fitted.solution
    assert fitted.result is not None
    computed = fitted.result.computed[-1]
    gains = -solution.feature_flow("Elm Brook") - solution.feature_flow("Ash Rill")
    assert computed == pytest.approx(100.0 + 40.0 + gains, rel=1e-6)


def test_a_stream_that_loses_more_than_it_has_fails_a_check(tmp_path):
    answers = answer(scenario(tmp_path, "0.1 m3/d"))
    checks = {c.name.split(" carries")[0]: c for c in answers.checks if "carries water all along in base" in c.name}
    least, share = least_flow(answers.cases["base"].scenario, answers.cases["base"].solution, "Ash Rill")
    assert checks["Ash Rill"].value == pytest.approx(least)
    assert checks["Ash Rill"].passed == (least >= 0.0)
    assert 0.0 <= share <= 1.0
    # a well that draws a whole brook in
    thirsty = changed("pumps: 450 m3/d", "pumps: 9000 m3/d", changed(OLD, BROOKS.format(start="1 m3/d")))
    (tmp_path / "dry").mkdir()
    failed = [c for c in answer(load(put(tmp_path / "dry", thirsty))).checks if not c.passed]
    assert any("carries water" in c.name and c.value < 0.0 for c in failed)


def test_streams_that_flow_round_are_refused(tmp_path):
    text = changed(OLD, BROOKS.format(start="100 m3/d")).replace("    starts_with: 100 m3/d\n", "    into: Ash Rill\n")
    with pytest.raises(InputError, match="flows back into itself"):
        load(put(tmp_path, text))
