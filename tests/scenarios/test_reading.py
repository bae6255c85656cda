"""What a scenario file becomes: values in metres and days, lines, levels, cases, notes."""

import json
from itertools import pairwise

import numpy as np
import pytest
from small import LEVELS, SCENARIO, changed, put
from wellshed.scenarios.messages import InputError
from wellshed.scenarios.reading import load
from wellshed.scenarios.scenario import WellInput


def read(tmp_path, text=SCENARIO, levels=LEVELS):
    return load(put(tmp_path, text, levels))


def rules(tmp_path, text=SCENARIO, levels=LEVELS):
    with pytest.raises(InputError) as caught:
        read(tmp_path, text, levels)
    return [p.rule for p in caught.value.problems]


def test_values_carry_path_unit_and_spread(tmp_path):
    s = read(tmp_path, changed("factor: 1.4}", "factor: 1.4, source: lysimeter}"))
    k, rate = s.aquifer.conductivity, s.recharge[0].rate
    assert (k.path, k.value, k.unit, k.kind, k.factor, k.sd) == (
        "aquifer.conductivity",
        15.0,
        "m/d",
        "estimate",
        2.0,
        None,
    )
    assert rate.path == "recharge.fields.rate"
    assert rate.value == pytest.approx(0.210 / 365.25)
    assert rate.source == "lysimeter"
    assert s.aquifer.base.kind == "known"
    assert s.wells[0].rate.value == 450.0
    assert s.file == (tmp_path / "scenario.yaml").resolve()
    assert len(s.sha256) == 64


def test_injection_is_a_negative_rate(tmp_path):
    s = read(tmp_path, changed("pumps: 450", "injects: 450").replace("wells.Mill 1.pumps", "wells.Mill 1.injects")
             .replace("  - capture_zone: {wells: [Mill 1], times: [50 d, 2 yr], cases: [more]}\n", ""))  # fmt: skip
    assert (s.wells[0].rate.path, s.wells[0].rate.value) == ("wells.Mill 1.injects", -450.0)


def test_feet_and_metres_give_one_scenario(tmp_path):
    """Every bare length of a site in feet is a length; what carries a unit stays."""
    (tmp_path / "m").mkdir()
    (tmp_path / "ft").mkdir()
    metres = read(tmp_path / "m")
    text = changed("length: m\n", "length: ft\n")

    def feet(numbers):
        return json.dumps((np.array(numbers) / 0.3048).tolist())

    for old in ([0, 1000], [0, 800], [510, 310], [[900, 700], [850, 400], [920, 100]],
                [[100, 500], [250, 480], [300, 640], [120, 660]]):  # fmt: skip
        text = changed(json.dumps(old), feet(old), text)
    for old, new in [("base: 40", f"base: {40 / 0.3048}"), ("stage: 62.6", f"stage: {62.6 / 0.3048}"),
                     ("[[0, 61.5], [1, 59.4]]", f"[[0, {61.5 / 0.3048}], [1, {59.4 / 0.3048}]]"),
                     ("error: 0.05", f"error: {0.05 / 0.3048}"),
                     ("radius: 0.3", f"radius: {0.3 / 0.3048}")]:  # fmt: skip
        text = changed(old, new, text)
    rows = [line.split(",") for line in LEVELS.splitlines()[1:]]
    table = "name,x,y,head\n" + "".join(f"{n},{','.join(repr(float(v) / 0.3048) for v in rest)}\n" for n, *rest in rows)
    other = read(tmp_path / "ft", text, table)
    assert other.aquifer.base.value == pytest.approx(40)
    assert other.wells[0].radius == pytest.approx(0.3)
    assert [v.head for v in other.levels] == pytest.approx([v.head for v in metres.levels])
    assert [v.sd for v in other.levels] == pytest.approx([0.05] * 4)
    assert other.lakes[0].x == pytest.approx(metres.lakes[0].x)
    assert other.streams[0].stage == pytest.approx(metres.streams[0].stage)
    assert other.site.x1 == pytest.approx(1000)
    assert other.tolerance == metres.tolerance == 0.001


def test_stage_is_linear_along_every_edge(tmp_path):
    s = read(tmp_path, changed("[[0, 61.5], [1, 59.4]]", "[[0, 61.5], [0.25, 60.0], [1, 59.4]]")).streams[0]
    share = np.concatenate([[0], np.cumsum(np.hypot(np.diff(s.x), np.diff(s.y)))])
    share /= share[-1]
    assert s.x.size == 4
    assert np.min(abs(share - 0.25)) < 1e-12
    assert s.stage == pytest.approx(np.interp(share, [0, 0.25, 1], [61.5, 60.0, 59.4]))
    line = np.array([[900, 700], [850, 400], [920, 100]])
    for x, y in zip(s.x, s.y, strict=True):  # the added vertex lies on the line
        assert min(_gap((x, y), a, b) for a, b in pairwise(line)) < 1e-9


def _gap(p, a, b):
    t = np.clip(np.dot(p - a, b - a) / np.dot(b - a, b - a), 0, 1)
    return np.hypot(*(a + t * (b - a) - p))


@pytest.mark.parametrize(
    ("stage", "levels"), [("60", [60, 60, 60]), ("[61, 60, 58]", [61, 60, 58]), ("200 ft", [60.96] * 3)]
)
def test_other_ways_to_give_a_stage(tmp_path, stage, levels):
    assert read(tmp_path, changed("[[0, 61.5], [1, 59.4]]", stage)).streams[0].stage == pytest.approx(levels)


@pytest.mark.parametrize("stage", ["[61, 60]", "[[0, 61], [0.5, 60]]", "[[0, 61]]", "[[0, 61], [0, 60], [1, 59]]"])
def test_stages_that_do_not_fit_the_line(tmp_path, stage):
    assert rules(tmp_path, changed("[[0, 61.5], [1, 59.4]]", stage)) == ["stage"]
    assert rules(tmp_path, changed("[[0, 61.5], [1, 59.4]]", "[]")) == ["form"]


def test_bed(tmp_path):
    bed = "stage: [[0, 61.5], [1, 59.4]]\n    width: 4\n    bed: {resistance: {estimate: 3 d, factor: 5},"
    bed += " bottom: 0.8 below stage}"
    s = read(tmp_path, changed("stage: [[0, 61.5], [1, 59.4]]", bed)).streams[0]
    assert (s.width, s.bottom, s.resistance.value, s.resistance.unit) == (4.0, 0.8, 3.0, "d")
    assert s.resistance.path == "streams.Elm Brook.bed.resistance"
    assert rules(tmp_path, changed("stage: [[0, 61.5], [1, 59.4]]", bed.replace("    width: 4\n", ""))) == [
        "missing-key"
    ]
    assert rules(tmp_path, changed("stage: [[0, 61.5], [1, 59.4]]", bed.replace("0.8 below stage", "58.2"))) == ["form"]


def test_rings_run_counter_clockwise_and_end_once(tmp_path):
    ring = "[[100, 500], [120, 660], [300, 640], [250, 480], [100, 500]]"
    lake = read(tmp_path, changed("[[100, 500], [250, 480], [300, 640], [120, 660]]", ring)).lakes[0]
    assert lake.x.size == 4
    assert lake.closed
    area = 0.5 * np.sum(lake.x * np.roll(lake.y, -1) - lake.y * np.roll(lake.x, -1))
    assert area > 0


def test_open_shore_and_island(tmp_path):
    edge = "edge: [[100, 500], [250, 480], [300, 640], [120, 660]]"
    assert not read(tmp_path, changed(edge, edge + ", open: true")).lakes[0].closed
    assert read(tmp_path, changed(edge, edge + ", land: inside")).lakes[0].land_inside
    assert rules(tmp_path, changed(edge, edge + ", land: inside, open: true")) == ["form"]


def geojson(tmp_path, *features, **members):
    rows = [{"type": "Feature", "properties": p, "geometry": {"type": t, "coordinates": c}} for p, t, c in features]
    (tmp_path / "w.geojson").write_text(json.dumps({"type": "FeatureCollection", "features": rows, **members}))


LINE = "line: [[900, 700], [850, 400], [920, 100]]"


def test_reaches_of_a_stream_join(tmp_path):
    lower, upper = (
        ({"n": "a"}, "LineString", [[850, 400], [920, 100]]),
        ({"n": "a"}, "LineString", [[900, 700], [850, 400]]),
    )
    geojson(tmp_path, lower, upper, ({"n": 7}, "LineString", [[0, 0], [1, 1]]))  # fmt: skip
    s = read(tmp_path, changed(LINE, "line: {file: w.geojson, where: {n: a}}")).streams[0]
    assert s.x.tolist() == [900, 850, 920]
    assert read(tmp_path, changed(LINE, "line: {file: w.geojson, where: {n: 7}}")).streams[0].x.tolist() == [0, 1]
    assert rules(tmp_path, changed(LINE, "line: w.geojson")) == ["geojson"]


def test_thinned_line_is_noted(tmp_path):
    many = [[900 - 50 * t, 700 - 300 * t + 0.5 * (k % 2)] for k, t in enumerate(np.linspace(0, 1, 41))]
    geojson(tmp_path, ({}, "LineString", many))
    s = read(tmp_path, changed(LINE, "line: {file: w.geojson, thin: 3}"))
    assert s.streams[0].x.size == 2
    assert any("41 to 2 vertices" in n for n in s.notes)


def test_file_in_the_system_of_the_site(tmp_path):
    epsg = {"type": "name", "properties": {"name": "urn:ogc:def:crs:EPSG::32633"}}
    geojson(tmp_path, ({}, "LineString", [[900, 700], [920, 100]]), crs=epsg)
    text = changed("crs: local", "crs: EPSG:32633", changed(LINE, "line: w.geojson"))
    assert not any("coordinate system" in n for n in read(tmp_path, text).notes)
    geojson(tmp_path, ({}, "LineString", [[900, 700], [920, 100]]))
    assert any("taken as EPSG:32633" in n for n in read(tmp_path, text).notes)


@pytest.mark.parametrize(("shape", "rule"), [("Polygon", "form"), ("Point", "geojson"), ("Nonsense", "geojson")])
def test_wrong_shapes_of_a_file(tmp_path, shape, rule):
    ring = [[[0, 0], [9, 0], [9, 9], [0, 0]]]
    geojson(tmp_path, ({}, shape, ring if shape != "Point" else [0, 0]))
    assert rules(tmp_path, changed(LINE, "line: w.geojson")) == [rule]


def test_polygon_with_a_hole_is_refused(tmp_path):
    rings = [[[0, 0], [90, 0], [90, 90], [0, 0]], [[50, 20], [60, 20], [60, 30], [50, 20]]]
    geojson(tmp_path, ({}, "Polygon", rings))
    assert rules(tmp_path, changed("[[100, 500], [250, 480], [300, 640], [120, 660]]", "w.geojson")) == ["geojson"]


def test_line_that_crosses_itself(tmp_path):
    assert rules(tmp_path, changed(LINE, "line: [[0, 0], [100, 100], [100, 0], [0, 100]]")) == ["self-crossing"]
    assert rules(tmp_path, changed(LINE, "line: [[0, 0], [100, 0], [50, 0], [60, 80]]")) == ["self-crossing"]


# --- levels ------------------------------------------------------------------------------------------------------


def test_depths_below_a_measuring_point(tmp_path):
    table = "WELL,E,N,MP,DTW\nP1,100,150,65.0,2.9\nP2,400,300,64,2.6\n"
    text = changed(
        "  error: 0.05", "  error: 0.05\n  columns: {name: WELL, x: E, y: N, measuring_point: MP, depth: DTW}"
    )
    assert [v.head for v in read(tmp_path, text, table).levels] == pytest.approx([62.1, 61.4])


def test_errors_by_quality_and_shared_datum(tmp_path):
    table = "name,x,y,head,quality,datum\nP1,100,150,62.1,gps,\nP2,400,300,61.4,map,old\nP3,500,300,61.2,map,old\n"
    text = changed("error: 0.05", "error: {gps: 0.5, map: 2}\n  datum_error: {old: 0.2, unused: 1}")
    s = read(tmp_path, text, table)
    assert [(v.sd, v.datum) for v in s.levels] == [(0.5, None), (2.0, "old"), (2.0, "old")]
    assert s.datum_sd == {"old": 0.2}
    assert rules(tmp_path, text, table.replace("gps", "gsp")) == ["quality"]
    assert rules(tmp_path, text, table.replace(",old", ",odl", 1)) == ["datum"]
    assert rules(tmp_path, text, table.replace("quality", "q")) == ["column"]


def test_repeats(tmp_path):
    table = "name,x,y,head,date\nP1,100,150,62.0,2024-05-01\nP1,100,150,62.4,2024-06-01\nP2,400,300,61.4,2024-05-01\n"
    mean = read(tmp_path, changed("error: 0.05", "error: 0.05\n  repeats: mean"), table)
    assert [v.head for v in mean.levels] == pytest.approx([62.2, 61.4])
    assert mean.levels[0].sd == pytest.approx(0.05 / np.sqrt(2))
    assert any("P1" in n and "mean" in n for n in mean.notes)
    latest = read(tmp_path, changed("error: 0.05", "error: 0.05\n  repeats: latest"), table)
    assert [v.head for v in latest.levels] == [62.4, 61.4]
    assert rules(tmp_path, changed("error: 0.05", "error: 0.05\n  repeats: latest"), LEVELS) == ["column"]
    assert rules(
        tmp_path, changed("error: 0.05", "error: 0.05\n  repeats: latest"), table.replace("2024-06-01", "1.6.24")
    ) == ["date"]


def test_left_out_levels_stay_with_their_reason(tmp_path):
    s = read(tmp_path, changed("error: 0.05", "error: 0.05\n  leave_out: {P3: perched}"))
    assert {v.name: v.left_out for v in s.levels} == {"P1": None, "P2": None, "P3": "perched", "P4": None}
    assert any("P3" in n and "perched" in n for n in s.notes)
    assert rules(tmp_path, changed("error: 0.05", "error: 0.05\n  leave_out: {P33: perched}")) == ["leave-out"]


def test_empty_cell_is_not_zero(tmp_path):
    s = read(tmp_path, levels=LEVELS.replace("61.4", ""))
    assert [v.name for v in s.levels] == ["P1", "P3", "P4"]
    assert any("P2" in n and "no reading" in n for n in s.notes)


def test_quoted_names_with_commas_and_umlauts(tmp_path):
    s = read(tmp_path, levels=LEVELS.replace("P2", '"Mühle, ""Süd"" ../1"'))
    assert s.levels[1].name == 'Mühle, "Süd" ../1'


def test_no_levels_is_a_valid_scenario(tmp_path):
    text = changed("levels:\n  file: levels.csv\n  error: 0.05\n", "")
    assert read(tmp_path, text, None).levels == ()


# --- wells from a table, gaugings, the rest ----------------------------------------------------------------------


def test_wells_from_a_table(tmp_path):
    (tmp_path / "wells.csv").write_text("ID,E,N,AVG\nA,10,20,300\nB,1e4,20,0\n")
    table = "wells:\n  from: {file: wells.csv, columns: {name: ID, x: E, y: N, pumps: AVG}, units: {pumps: m3/yr}}"
    s = read(tmp_path, changed("\nwells:", "\n" + table))
    assert [(w.name, w.rate.path) for w in s.wells] == [
        ("Mill 1", "wells.Mill 1.pumps"), ("A", "wells.A.pumps"), ("B", "wells.B.pumps")]  # fmt: skip
    assert s.wells[1].rate.value == pytest.approx(300 / 365.25)
    assert s.wells[1].radius == 0.15
    assert any("well A: no radius" in n for n in s.notes)
    assert any("well B lies beyond the drawn area" in n for n in s.notes)
    assert rules(tmp_path, changed("\nwells:", "\n" + table.replace(", units: {pumps: m3/yr}", ""))) == ["unit", "unit"]
    (tmp_path / "wells.csv").write_text("ID,E,N,AVG\nA,10,20,-300\nA,1,2,3\n,1,2,3\nMill 1,1,2,3\nC,1,,3\n")
    assert rules(tmp_path, changed("\nwells:", "\n" + table)) == ["range", "name", "name", "place"]


def test_gaugings(tmp_path):
    text = changed("\ncases:", "\ngaugings: {Elm upper: {stream: Elm Brook, at: 30%, flow: 41 L/s, error: 6%}}\ncases:")
    g = read(tmp_path, text).gaugings[0]
    assert (g.at, g.flow, g.sd) == (0.3, pytest.approx(3542.4), pytest.approx(0.06 * 3542.4))
    assert read(tmp_path, text.replace("error: 6%", "error: 2 L/s")).gaugings[0].sd == pytest.approx(172.8)
    assert rules(tmp_path, text.replace("error: 6%", "error: 6")) == ["unit"]
    assert rules(tmp_path, text.replace("stream: Elm Brook", "stream: Elm")) == ["unknown-name"]


def test_overlapping_recharge_asks_for_adds(tmp_path):
    pond = "recharge:\n  pond: {area: [[0, 0], [9, 0], [9, 9]], rate: 0.9 m/yr}"
    assert rules(tmp_path, changed("recharge:", pond)) == ["overlap"]
    s = read(tmp_path, changed("recharge:", pond.replace("rate", "adds")))
    assert [(r.name, r.adds, r.x is None) for r in s.recharge] == [("pond", True, False), ("fields", False, True)]
    assert s.recharge[0].rate.path == "recharge.pond.adds"


def test_outline_and_beyond(tmp_path):
    text = changed("\nwells:", "\noutline: {line: [[-9, -9], [2000, -9], [2000, 2000]], inflow: 0.2 m2/d}\nwells:")
    flow = "reference: {at: [1, 2], head: {estimate: 60, sd: 1}}\n"
    flow += "  flow: {discharge: 0.3 m2/d, towards: 115 deg, at: [0, 0]}"
    s = read(tmp_path, changed("balance: none", flow, text))
    assert (s.outline.closed, s.outline.inflow.value, s.outline.inflow.path) == (True, 0.2, "outline.inflow")
    b = s.beyond
    assert (b.reference_x, b.reference_y, b.reference_head.path) == (1.0, 2.0, "beyond.reference.head")
    assert (b.flow.gradient, b.flow.discharge.value, b.flow.towards.value) == (None, 0.3, 115.0)


def test_uneven_ground_is_assumed_unless_said(tmp_path):
    s = read(tmp_path)
    assert (s.aquifer.uneven.spread.value, s.aquifer.uneven.patch.value) == (0.5, 300.0)
    assert any("uneven ground" in n for n in s.notes)
    assert read(tmp_path, changed("porosity: 0.22", "porosity: 0.22\n  uneven: none")).aquifer.uneven is None
    said = read(tmp_path, changed("porosity: 0.22", "porosity: 0.22\n  uneven: {spread: 0.2}"))
    assert said.aquifer.uneven.spread.value == 0.2
    assert not any("uneven" in n for n in said.notes)


@pytest.mark.parametrize(
    ("draw", "box"),
    [
        ("draw: {around: levels, by: 50}", (50, 870, 100, 570)),
        ("draw: {around: everything, by: 50}", (50, 970, 50, 750)),
        ("draw: {}", (18, 1002, 18, 782)),
    ],
)
def test_drawn_box(tmp_path, draw, box):
    site = read(tmp_path, changed("draw: {x: [0, 1000], y: [0, 800]}", draw)).site
    assert (site.x0, site.x1, site.y0, site.y1) == pytest.approx(box)


# --- cases and questions -----------------------------------------------------------------------------------------


def test_steps_of_cases(tmp_path):
    steps = "  dry: [{change: recharge.fields.rate, by: x0.6}, {change: lakes.Tarn.stage, by: -0.5},"
    steps += " {change: streams.Elm Brook.stage, by: 10 cm}]\n"
    steps += "  new: [{add: wells.Croft, as: {at: [90, 60], pumps: 300 m3/d}}, {change: wells.Croft.pumps, to: 10 L/s},"
    steps += " {remove: wells.Mill 1}]\n"
    dry, new, _ = read(tmp_path, changed("cases:\n", "cases:\n" + steps)).cases
    assert [(c.path, c.to, c.factor, c.amount) for c in dry.changes] == [
        ("recharge.fields.rate", None, 0.6, None), ("lakes.Tarn.stage", None, None, -0.5),
        ("streams.Elm Brook.stage", None, None, pytest.approx(0.1))]  # fmt: skip
    assert [c.verb for c in new.changes] == ["add", "change", "remove"]
    assert isinstance(new.changes[0].feature, WellInput)
    assert new.changes[0].feature.rate.value == 300.0
    assert new.changes[1].to == pytest.approx(864.0)


def test_more_injection_is_a_lower_rate(tmp_path):
    text = changed("pumps: 450", "injects: 450").replace("wells.Mill 1.pumps, to: 700", "wells.Mill 1.injects, by: 50")
    text = text.replace("  - capture_zone: {wells: [Mill 1], times: [50 d, 2 yr], cases: [more]}\n", "")
    assert read(tmp_path, text).cases[0].changes[0].amount == -50.0


@pytest.mark.parametrize(
    ("step", "rule"),
    [
        ("{change: wells.Mill 1.pumps}", "exactly-one"),
        ("{change: wells.Mill 1.pumps, to: 3 m3/d, by: x2}", "exactly-one"),
        ("{change: wells.Mill 1.radius, to: 3}", "unknown-path"),
        ("{change: streams.Elm Brook.stage, to: 60}", "form"),
        ("{remove: wells.Mill}", "unknown-path"),
        ("{remove: wells.Mill 1, to: 3}", "form"),
        ("{add: wells.Croft}", "missing-key"),
        ("{add: wels.Croft, as: {at: [1, 2], pumps: 3 m3/d}}", "unknown-path"),
        ("{add: wells.Tarn, as: {at: [1, 2], pumps: 3 m3/d}}", "name"),
        ("{add: wells.Croft, as: {at: [1, 2], pmups: 3 m3/d}}", "unknown-key"),
        ("{add: wells.Croft, as: {at: [1, 2], pumps: {estimate: 3 m3/d, factor: 2}}}", "form"),
        ("{change: aquifer.conductivity, to: 0 m/d}", "range"),
        ("{change: aquifer.porosity, by: x5}", "range"),
        ("{}", "exactly-one"),
    ],
)
def test_steps_that_cannot_be(tmp_path, step, rule):
    found = rules(tmp_path, changed("cases:\n", f"cases:\n  odd: [{step}]\n"))
    assert rule in found
    assert len(found) <= 2  # an added well that lacks its verb for a misspelt one lacks it as well


def test_every_changeable_value_can_be_changed(tmp_path):
    """What the reader lets a case change, the solver's side changes."""
    from wellshed.scenarios.cases import _apply
    from wellshed.scenarios.changes_in import changeable
    from wellshed.scenarios.scenario import Change

    stage = "stage: [[0, 61.5], [1, 59.4]]"
    text = changed(stage, f"{stage}\n    width: 4\n    shift: 0\n    starts_with: 9 L/s\n    bed: {{resistance: 3 d}}")
    text = changed("porosity: 0.22", "porosity: 0.22\n  top: 80\n  storage: 0.1", text)
    text = changed(
        "\nwells:", "\noutline: {line: [[-9, -9], [2000, -9], [2000, 2000]], inflow: 0.2 m2/d}\nwells:", text
    )
    flow = "reference: {at: [1, 2], head: 60}\n  flow: {gradient: 0.001, towards: 115 deg, at: [0, 0]}"
    s = read(tmp_path, changed("balance: none", flow, text))
    values = changeable(s)
    assert len(values) == 16
    for path, known in values.items():
        after = changeable(_apply(s, Change("change", path, factor=0.5)))
        if known.number is not None:
            assert after[path].number == pytest.approx(0.5 * known.number), path


def test_questions_without_options(tmp_path):
    text = SCENARIO[: SCENARIO.index("questions:")] + "questions:\n  - water_table\n  - capture_zone:\n"
    first, second = read(tmp_path, text).questions
    assert (first.kind, first.options.interval, first.options.cases) == ("water_table", None, [])
    assert (second.kind, second.options.wells) == ("capture_zone", [])


def test_question_about_a_well_that_a_case_adds(tmp_path):
    text = changed("cases:\n", "cases:\n  new: [{add: wells.Croft, as: {at: [90, 60], pumps: 300 m3/d}}]\n")
    asked = "{wells: [Croft], cases: [new]}"
    assert read(tmp_path, changed("{wells: [Mill 1], times: [50 d, 2 yr], cases: [more]}", asked, text)).questions
    asked = "{wells: [Croft], cases: [more]}"
    assert rules(tmp_path, changed("{wells: [Mill 1], times: [50 d, 2 yr], cases: [more]}", asked, text)) == [
        "question"
    ]


def test_odd_names_are_names(tmp_path):
    text = SCENARIO.replace("Mill 1", "../Mühle/1.5")
    s = read(tmp_path, text)
    assert s.wells[0].name == "../Mühle/1.5"
    assert s.cases[0].changes[0].path == "wells.../Mühle/1.5.pumps"
