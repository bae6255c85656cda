"""Real heads (85 wells in a deep confined aquifer) the whole way to a map; how well the field foretells them.

Source of the data: Harper & Furr 1986, reprinted in Cressie 1993, p. 212. Leave-one-out root mean square errors to
compare with, computed on the same file: least-squares plane 63.8 m, quadratic surface 60.3 m, universal kriging with a
plane drift 53.6 m.
"""

import json
import shutil
from pathlib import Path

import pytest
from wellshed.scenarios.answering import answer
from wellshed.scenarios.reading import load
from wellshed.scenarios.writing import write

DATA = Path(__file__).resolve().parents[3] / "shared" / "data" / "wolfcamp.csv"
pytestmark = pytest.mark.skipif(not DATA.is_file(), reason="the data set is not beside the project")

SCENARIO = """\
wellshed: 1
title: Heads of a deep confined aquifer
site: {{crs: local, length: m, heights: as published, draw: {{around: levels}}}}
aquifer:
  base: -1000
  top: -900
  conductivity: 1 m/d
  porosity: 0.1
  uneven: {uneven}
beyond:
  reference: {{at: [0, 0], head: {{free: 640}}}}
  flow: {{gradient: {{free: 0.002}}, towards: {{free: 60 deg}}, at: [0, 0]}}
levels: {{file: wolfcamp.csv, error: 30}}
questions: [{{water_table: {{}}}}]
"""


def answers(folder, uneven):
    shutil.copy(DATA, folder / "wolfcamp.csv")
    (folder / "scenario.yaml").write_text(SCENARIO.format(uneven=uneven), encoding="utf-8")
    return answer(load(folder / "scenario.yaml"))


def test_the_flow_field_alone_foretells_as_a_plane_does(tmp_path):
    found = answers(tmp_path, "none").to_json()["fit"]["leave_one_out"]
    print(f"flow field alone, ideal ground: {found['field_rmse']:.2f} m (plane 63.8)")
    assert found["field_rmse"] == pytest.approx(63.8, abs=0.1)


@pytest.mark.parametrize(("patch", "about"), [(20, 52.6), (40, 53.9), (80, 55.5)])
def test_the_error_model_foretells_better_than_a_quadratic_surface(tmp_path, patch, about):
    done = answers(tmp_path, f"{{spread: 0.5, patch: {patch} km}}")
    found = done.to_json()["fit"]["leave_one_out"]
    print(f"patch {patch} km: field {found['field_rmse']:.2f} m, with its error model {found['predicted_rmse']:.2f} m; "
          "quadratic surface 60.3, universal kriging 53.6")  # fmt: skip
    assert found["predicted_rmse"] < 60.3
    assert found["predicted_rmse"] == pytest.approx(about, abs=0.2)  # no outside value: guards against drift


def test_real_heads_run_the_whole_way_to_a_map(tmp_path):
    done = answers(tmp_path, "{spread: 0.5, patch: 40 km}")
    assert all(check.passed for check in done.checks)
    write(done, tmp_path / "answers")
    content = json.loads((tmp_path / "answers" / "answers.json").read_text(encoding="utf-8"))
    assert len(content["fit"]["residuals"]) == 85
    assert any("do not explain the residuals" in w for w in content["fit"]["warnings"])
    assert (tmp_path / "answers" / "map.png").stat().st_size > 50_000
