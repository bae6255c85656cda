"""The first scenario that is written into a folder: it can be read at once, and says what is guessed."""

import numpy as np
import pytest
from wellshed.scenarios.messages import InputError
from wellshed.scenarios.reading import load
from wellshed.scenarios.start import start_scenario

RNG = np.random.default_rng(4)
X, Y = RNG.uniform(0, 3000, 12), RNG.uniform(0, 2000, 12)
HEAD = 80 - 0.002 * X - 0.001 * Y  # falls towards the east-north-east


def table(header, rows, delimiter=",", decimal="."):
    lines = [
        header,
        *(
            delimiter.join(f"{v:.3f}".replace(".", decimal) if not isinstance(v, str) else v for v in row)
            for row in rows
        ),
    ]
    return "\n".join(lines) + "\n"


def levels(*columns):
    return [(f"P{k}", *values) for k, values in enumerate(zip(*columns, strict=True))]


def test_levels_become_a_scenario(tmp_path):
    (tmp_path / "readings.csv").write_text(table("Well ID,Easting,Northing,Water level [m]", levels(X, Y, HEAD)))
    file = start_scenario(tmp_path)
    s = load(file)
    assert [v.head for v in s.levels] == pytest.approx(HEAD, abs=1e-3)
    assert [v.x for v in s.levels] == pytest.approx(X, abs=1e-3)
    flow = s.beyond.flow
    assert flow.gradient.value == pytest.approx(np.hypot(0.002, 0.001), rel=0.01)
    assert flow.towards.value == pytest.approx(np.degrees(np.arctan2(0.002, 0.001)), abs=1)
    assert s.beyond.reference_head.value == pytest.approx(HEAD.mean(), abs=0.01)
    assert s.aquifer.base.value < HEAD.min() - 20
    assert s.aquifer.conductivity.factor >= 5
    assert file.read_text().count("GUESSED") >= 8
    assert [q.kind for q in s.questions] == ["water_table"]


def test_depths_semicolons_and_decimal_commas(tmp_path):
    rows = levels(X, Y, HEAD + 3.0, np.full(12, 3.0))
    (tmp_path / "levels.csv").write_text(table("Name;E;N;MP;DTW", rows, ";", ","), encoding="utf-8-sig")
    (tmp_path / "other.csv").write_text("a,b\n")
    assert [v.head for v in load(start_scenario(tmp_path)).levels] == pytest.approx(HEAD, abs=1e-3)


def test_no_levels_is_a_scenario_too(tmp_path):
    s = load(start_scenario(tmp_path))
    assert s.levels == ()
    assert s.site.x1 > s.site.x0


@pytest.mark.parametrize("count", [1, 2])
def test_few_levels(tmp_path, count):
    (tmp_path / "levels.csv").write_text(table("name,x,y,head", levels(X[:count], Y[:count], HEAD[:count])))
    assert len(load(start_scenario(tmp_path)).levels) == count


@pytest.mark.parametrize(
    ("files", "words"),
    [
        ({"a.csv": "x,y\n1,2\n"}, "cannot guess which columns"),
        ({"a.csv": ""}, "cannot guess which columns"),
        ({"a.csv": "name,x,y,head\nP1,a,b,c\n"}, "holds no level"),
        ({"a.csv": "x\n", "b.csv": "x\n"}, "holds 2 CSV files"),
        ({"a.csv": "Mühle"}, "as UTF-8"),
    ],
)
def test_what_it_cannot_guess_it_says(tmp_path, files, words):
    for name, text in files.items():
        (tmp_path / name).write_text(text, encoding="latin-1")
    with pytest.raises(InputError, match=words):
        start_scenario(tmp_path)
    assert not (tmp_path / "scenario.yaml").exists()


def test_no_folder(tmp_path):
    with pytest.raises(InputError, match="no folder"):
        start_scenario(tmp_path / "none")
