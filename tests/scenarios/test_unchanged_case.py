"""A case that changes nothing is the fitted field itself, whatever was estimated; a known shift of a stage counts."""

from dataclasses import replace

import numpy as np
import pytest
from small import SCENARIO, changed, put
from wellshed.scenarios.building import build
from wellshed.scenarios.cases import solve_case
from wellshed.scenarios.fitting import fit_scenario
from wellshed.scenarios.reading import load
from wellshed.scenarios.scenario import Case, Change

BED = """  Elm Brook:
    shift: {estimate: 0.1, sd: 0.2}
    bed: {resistance: {estimate: 5 d, factor: 2}}
    width: 12
"""
FLOW = """beyond:
  reference: {at: [60, 60], head: {estimate: 62.4, sd: 0.3}}
  flow: {gradient: {estimate: 0.002, factor: 1.5}, towards: {estimate: 95 deg, sd: 15 deg}, at: [500, 400]}
"""


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ("  Elm Brook:\n", BED),
        ("stage: 62.6}", "stage: {estimate: 62.6, sd: 0.2}}"),
        ("beyond:\n  balance: none\n", FLOW),
        ("pumps: 450 m3/d,", "pumps: {estimate: 450 m3/d, factor: 1.3},"),
    ],
)
def test_a_case_without_changes_is_the_base(tmp_path, old, new):
    scenario = load(put(tmp_path, changed(old, new)))
    model = build(scenario)
    fitted = fit_scenario(scenario, model)
    assert fitted.result is not None
    case = solve_case(scenario, model, fitted, Case("same", ()))
    assert max(map(abs, case.drawdown.values())) < 1e-6
    assert max(map(abs, case.exchange_change.values())) < 1e-4  # m3/d


def test_a_case_on_the_base_mesh_equals_one_solved_afresh(tmp_path):
    scenario = load(put(tmp_path))
    model = build(scenario)
    fitted = fit_scenario(scenario, model)
    change = Change("change", "wells.Mill 1.pumps", to=700.0)
    case = solve_case(scenario, model, fitted, Case("more", (change,)))
    well = replace(scenario.wells[0], x=scenario.wells[0].x + 1e-6)  # another geometry for the solver
    other = solve_case(replace(scenario, wells=(well,)), model, fitted, Case("more", (change,)))
    x, y = np.array([300.0, 600.0, 820.0]), np.array([200.0, 500.0, 150.0])
    assert case.solution.flow.head(x, y) == pytest.approx(other.solution.flow.head(x, y), abs=2 * scenario.tolerance)


def test_a_known_shift_of_a_stage_moves_the_water_table(tmp_path):
    # every water is 0.4 m higher and nothing else fixes the heads: thick confined ground follows exactly
    text = changed("  base: 40\n", "  base: 10\n  top: 20\n").replace(LEVELS_BLOCK, "")
    higher = text.replace("  Elm Brook:\n", "  Elm Brook:\n    shift: 0.4 m\n").replace("stage: 62.6}", "stage: 63.0}")
    heads = []
    for k, content in enumerate((text, higher)):
        (tmp_path / str(k)).mkdir()
        scenario = load(put(tmp_path / str(k), content))
        model = build(scenario)
        heads.append(float(fit_scenario(scenario, model).solution.flow.head(400.0, 200.0)))
    assert heads[1] - heads[0] == pytest.approx(0.4, abs=2e-3)


LEVELS_BLOCK = "levels:\n  file: levels.csv\n  error: 0.05\n"
assert LEVELS_BLOCK in SCENARIO
