"""Bad input through the command line: one clear message with its place, exit 2, earlier answers untouched."""

import json
import re
import zipfile

import pytest
from small import LEVELS, SCENARIO, changed, put
from wellshed.scenarios.cli import main


@pytest.fixture
def run(tmp_path, capsys):
    """Run a scenario that must be refused; gives back what is printed and checks what holds for every refusal."""

    def refused(scenario=SCENARIO, levels=LEVELS, command=("run",)):
        answers = tmp_path / "answers"
        answers.mkdir(exist_ok=True)
        (answers / "answers.json").write_text("the last good answers")
        file = put(tmp_path, scenario, levels)
        with pytest.raises(SystemExit) as caught:
            main([*command, str(file)])
        said = capsys.readouterr()
        assert caught.value.code == 2, said
        assert "Traceback" not in said.err
        assert said.out == ""
        assert (answers / "answers.json").read_text() == "the last good answers"
        assert [p.name for p in answers.iterdir()] == ["answers.json"]
        assert not [p for p in tmp_path.iterdir() if "answers." in p.name or ".wellshed" in p.name]
        return said.err

    return refused


def only(text, rule, place, *words):
    """Exactly one error of a rule at a place, with words in it; its caret is on the line shown."""
    assert text.count("error[") == 1, text
    assert f"error[{rule}]" in text, text
    assert place in text, text
    for word in words:
        assert word in text, text
    assert text.rstrip().endswith("1 error; nothing was computed")
    if re.search(r":\d+:\d+\n", text) and rule != "empty":  # an empty file has no line to show
        assert "^" in text, text


def under_caret(text):
    """What the caret of the first error underlines."""
    lines = text.splitlines()
    k = next(i for i, line in enumerate(lines) if "^" in line)
    first = lines[k].index("^")
    return lines[k - 1][first : lines[k].rindex("^") + 1]


# --- the scenario file -------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("old", "new", "rule", "place", "caret", "words"),
    [
        ("  base: 40", "  base: 40\n  colour: red", "unknown-key", "yaml:10:3", "colour", ["aquifer.colour"]),
        ("porosity: 0.22", "porosity: 0.22\n  storge: 0.1", "unknown-key", "yaml:12:3", "storge", ["mean 'storage'"]),
        ("  porosity:", "  prosity:", "unknown-key", "yaml:11:3", "prosity", ["mean 'porosity'"]),
        ("pumps: 450", "pmups: 450", "unknown-key", "yaml:15:28", "pmups", ["mean 'pumps'"]),
        ("estimate: 15 m/d", "estimat: 15 m/d", "unknown-key", "yaml:10:18", "estimat", ["mean 'estimate'"]),
        ("interval: auto", "intervall: auto", "unknown-key", "yaml:30:19", "intervall", ["mean 'interval'"]),
        ("- water_table", "- water_tabel", "unknown-key", "yaml:30:5", "water_tabel", ["mean 'water_table'"]),
        ("title: A small place", "title: A small place\ntitle: b", "duplicate-key", "yaml:3:1", "title", ["line 2"]),
        ("450 m3/d", "450", "unit", "yaml:15:35", "450", ["write '450 m3/d'", "L/s"]),
        ("450 m3/d", "450 m3/day", "unit", "yaml:15:35", "450 m3/day", ["did you mean 'm3/d'"]),
        ("450 m3/d", "450 m/d", "unit", "yaml:15:35", "450 m/d", ["length per time", "m3/d"]),
        ("450 m3/d", "-450 m3/d", "range", "yaml:15:35", "-450 m3/d", ["at least 0 m3/d"]),
        ("estimate: 15 m/d", "estimate: 15", "unit", "yaml:10:28", "15", ["'15 m/d'"]),
        ("base: 40", "base: yes", "truth-value", "yaml:9:9", "yes", ["'yes' stands where a number"]),
        ("base: 40", "base: true", "truth-value", "yaml:9:9", "true", ["a number"]),
        ("15 m/d", "1e-5", "unit", "yaml:10:28", "1e-5", ["needs a unit", "m/s"]),
        ("base: 40", "base: 12:30", "number", "yaml:9:9", "12:30", ["not a number"]),
        ("base: 40", "base: 2,5", "decimal-comma", "yaml:9:9", "2,5", ["decimal comma", "'2.5'"]),
        ("base: 40", "base: .nan", "number", "yaml:9:9", ".nan", ["is not a number"]),
        ("porosity: 0.22", "porosity: 22", "range", "yaml:11:13", "22", ["above 0 and below 1", "0.22"]),
        ("base: 40", "base: 40\n  top: 35", "thickness", "yaml:10:8", "35", ["negative thickness"]),
        ("{estimate: 15 m/d, factor: 2}", "{estimate: 15 m/d}", "spread", "yaml:10:17", "{", ["'factor' and 'sd'"]),
        ("factor: 2}", "factor: 0.5}", "range", "yaml:10:44", "0.5", ["above 1"]),
        ("pumps: 450 m3/d, ", "pumps: 450 m3/d, injects: 3 m3/d, ", "exactly-one", "yaml:15:3", "Mill 1",
         ["pumps and injects"]),
        ("crs: local", "crs: UTM 33", "crs", "yaml:4:8", "UTM 33", ["EPSG:n"]),
        ("crs: local", "crs: EPSG:4326", "crs", "yaml:4:8", "EPSG:4326", ["longitude"]),
        ("length: m\n", "length: feet\n", "form", "yaml:5:11", "feet", ["'ft'"]),
        ("x: [0, 1000]", "x: [1000, 0]", "range", "yaml:7:13", "[", ["below the second"]),
        ("stage: 62.6", "stage:", "number", "yaml:21:", None, ["received nothing"]),
        ("water_table: {interval: auto}", "water_table: {cases: [dry]}", "question", "yaml:30:27", "dry",
         ["cases: more"]),
        ("stage: 62.6", "stage: 62,6", "unknown-key", "yaml:21:76", "6", ["decimal comma"]),
        ("estimate: 15 m/d", "estimate: 15,5 m/d", "unknown-key", "yaml:10:31", "5 m/d", ["decimal comma"]),
        ("{wells: [Mill 1]", "{wells: [Mill 2]", "question", "yaml:31:28", "Mill 2", ["mean 'Mill 1'"]),
        ("times: [50 d", "times: [50", "unit", "yaml:31:45", "50", ["'50 d'"]),
        ("change: wells.Mill 1.pumps", "change: wells.Mill.pumps", "unknown-path", "yaml:28:19", "wells.Mill.pumps",
         ["mean 'wells.Mill 1.pumps'"]),
        ("to: 700 m3/d", "to: 700", "unit", "yaml:28:43", "700", ["m3/d"]),
        ("to: 700 m3/d", "by: 0.6", "unit", "yaml:28:43", "0.6", ["x0.6"]),
        ("to: 700 m3/d", "by: -500 m3/d", "range", "yaml:28:43", "-500 m3/d", ["the sign lives in the verb"]),
        ("  Tarn: {", "  Mill 1: {", "name", "yaml:21:3", "Mill 1", ["wells.Mill 1"]),
    ],
)  # fmt: skip
def test_faults_of_the_scenario(run, old, new, rule, place, caret, words):
    text = run(changed(old, new))
    only(text, rule, place, *words)
    if caret is not None:
        assert under_caret(text) == caret


def test_self_crossing_polygon_says_where(run):
    bow = "[[100, 500], [300, 640], [300, 500], [100, 640]]"
    text = run(changed("[[100, 500], [250, 480], [300, 640], [120, 660]]", bow))
    only(text, "self-crossing", "scenario.yaml:21:16", "lake Tarn", "x 200, y 570")


def test_what_is_refused_is_not_missed_again_by_the_cases(run):
    bow = "[[100, 500], [300, 640], [300, 500], [100, 640]]"
    text = changed("[[100, 500], [250, 480], [300, 640], [120, 660]]", bow)
    text = changed("cases:\n", "cases:\n  low: [{change: lakes.Tarn.stage, by: -1}, {remove: lakes.Tarn}]\n", text)
    only(run(text), "self-crossing", "scenario.yaml:21:16")


def test_pair_with_one_entry(run):
    only(run(changed("at: [510, 310]", "at: [510]")), "form", "scenario.yaml:15:16", "wells.Mill 1.at", "two entries")
    only(run(changed("at: [510, 310]", "at: [510, 310, 4]")), "form", "scenario.yaml:15:16", "at most 2 entries")


def test_stream_digitised_from_mouth_to_source(run):
    text = run(changed("[[0, 61.5], [1, 59.4]]", "[[0, 59.4], [1, 61.5]]"))
    only(text, "uphill", "scenario.yaml:19:12", "Elm Brook", "2.1 m", "reverse the line")


def test_nothing_fixes_the_far_field(run):
    waters = SCENARIO[SCENARIO.index("streams:") : SCENARIO.index("recharge:")]
    text = run(changed(waters, ""))
    only(text, "far-field", "scenario.yaml:13:12", "nothing fixes the far field", "reference")
    text = run(changed("beyond:\n  balance: none\n", ""))
    only(text, "missing-key", "scenario.yaml:1:1", "'beyond'", "nothing fixes the far field")
    text = run(changed("  balance: none\n", "  flow: {gradient: 0.001, towards: 90 deg, at: [0, 0]}\n"))
    only(text, "exactly-one", "scenario.yaml:12:1", "balance and reference")


def test_case_that_removes_the_last_water(run):
    text = run(changed("cases:\n", "cases:\n  bare: [{remove: streams.Elm Brook}, {remove: lakes.Tarn}]\n"))
    only(text, "far-field", "scenario.yaml:28:3", "bare")


def test_more_free_values_than_data(run):
    free = changed("{estimate: 15 m/d, factor: 2}", "{free: 15 m/d}")
    free = changed("pumps: 450 m3/d", "pumps: {free: 450 m3/d}", free)
    free = changed("rate: {estimate: 210 mm/yr, factor: 1.4}", "rate: {free: 210 mm/yr}", free)
    free = changed("stage: 62.6", "stage: {free: 62.6}", free)
    free = changed("base: 40", "base: {free: 40}", free)
    text = run(free)
    only(text, "too-many-free", "scenario.yaml:9:9", "5 values are free", "4 readings", "more estimates than data")


def test_exploding_anchors(run):
    bomb = "".join(f"a{n}: &a{n} [{', '.join([f'*a{n - 1}' if n else 'x'] * 12)}]\n" for n in range(8))
    only(run(bomb + SCENARIO), "anchors", "scenario.yaml:", "expand")


def test_all_faults_of_a_file_at_once(run):
    text = changed("porosity: 0.22", "porosity: 22")
    text = changed("pumps: 450 m3/d", "pumps: 450", text)
    text = changed("base: 40", "base: 4,0", text)
    said = run(changed("interval: auto", "intervall: auto", text))
    assert re.findall(r"error\[(.*?)\]", said) == ["decimal-comma", "range", "unit", "unknown-key"]
    assert [int(n) for n in re.findall(r"scenario.yaml:(\d+):", said)] == [9, 11, 15, 30]
    assert "4 errors; nothing was computed" in said


def test_faults_of_different_parts_at_once(run):
    text = changed("[[0, 61.5], [1, 59.4]]", "[[0, 59.4], [1, 61.5]]")
    text = changed("to: 700 m3/d", "to: 700", text)
    said = run(text, LEVELS.replace("62.1", "dry"))
    assert re.findall(r"error\[(.*?)\]", said) == ["uphill", "unit", "number"]


def test_no_yaml_at_all(run):
    only(run("wellshed: 1\n  title: [a\n"), "yaml", "scenario.yaml:2:")
    only(run(""), "empty", "scenario.yaml:1:1", "wellshed start")
    assert "error[form]" in run("- a\n- b\n")


def test_json_format(tmp_path, capsys):
    file = put(tmp_path, changed("porosity: 0.22", "porosity: 22"))
    with pytest.raises(SystemExit) as caught:
        main(["check", "--format", "json", str(file)])
    (error,) = json.loads(capsys.readouterr().out)["errors"]
    assert caught.value.code == 2
    assert (error["rule"], error["line"], error["column"], error["file"]) == ("range", 11, 13, str(file))


# --- files beside it ---------------------------------------------------------------------------------------------


def test_missing_file_and_its_nearest_name(run, tmp_path):
    (tmp_path / "level.csv").write_text(LEVELS)
    only(run(levels=None), "file", "scenario.yaml:25:9", "no file 'levels.csv'", "mean 'level.csv'")


def test_file_outside_the_folder_tree(run, tmp_path, capsys):
    inner = tmp_path / "inner"
    inner.mkdir()
    (tmp_path / "levels.csv").write_text(LEVELS)
    file = put(inner, changed("file: levels.csv", "file: ../levels.csv"), None)
    with pytest.raises(SystemExit) as caught:
        main(["check", str(file)])
    assert caught.value.code == 2
    only(capsys.readouterr().err, "outside-folder", "scenario.yaml:25:9", "--allow-outside")
    with pytest.raises(SystemExit) as caught:
        main(["check", "--allow-outside", str(file)])
    assert caught.value.code == 0
    (inner / "levels.csv").symlink_to(tmp_path / "levels.csv")  # a link does not lead out either
    put(inner, SCENARIO, None)
    with pytest.raises(SystemExit) as caught:
        main(["check", str(file)])
    assert caught.value.code == 2
    assert "outside-folder" in capsys.readouterr().err


@pytest.mark.parametrize(
    ("cell", "words"),
    [("NaN", ["head of P2", "is not a number", "leave the cell empty"]), ("dry", ["'dry'"]), ("<12.3", ["'<12.3'"])],
)
def test_what_is_no_number_in_the_table(run, cell, words):
    text = run(levels=LEVELS.replace("61.4", cell))
    only(text, "number", "levels.csv:3:12", *words)
    assert under_caret(text) == cell


def test_units_row(run):
    text = run(levels=LEVELS.replace("P1,", "-,m,m,m\nP1,"))
    only(text, "units-row", "levels.csv:2:3", "holds units", "delete the line")


def test_byte_order_mark_is_no_fault(tmp_path, capsys):
    file = put(tmp_path, levels=b"\xef\xbb\xbf" + LEVELS.encode())
    with pytest.raises(SystemExit) as caught:
        main(["check", str(file)])
    assert caught.value.code == 0
    assert "4 levels" in capsys.readouterr().out


def test_semicolons(run):
    text = run(levels=LEVELS.replace(",", ";"))
    only(text, "delimiter", "levels.csv:1:5", "';'", "delimiter")
    text = run(
        changed("  error: 0.05", '  error: 0.05\n  delimiter: ";"'), LEVELS.replace(",", ";").replace("61.4", "61,4")
    )
    only(text, "decimal-comma", "levels.csv:3:12", "decimal:")


def test_semicolons_and_decimal_commas_when_said(tmp_path):
    text = changed("  error: 0.05", '  error: 0.05\n  delimiter: ";"\n  decimal: ","')
    file = put(tmp_path, text, LEVELS.replace(",", ";").replace(".", ","))
    from wellshed.scenarios.reading import load

    assert [v.head for v in load(file).levels] == [62.1, 61.4, 60.2, 60.9]


def test_latin_1(run):
    text = run(levels=LEVELS.replace("P2", "Mühle").encode("latin-1"))
    only(text, "encoding", "levels.csv:3:2", "0xfc", "encoding: cp1252")


def test_spreadsheet_renamed(run, tmp_path):
    with zipfile.ZipFile(tmp_path / "levels.csv", "w") as archive:
        archive.writestr("xl/workbook.xml", "<workbook/>")
    only(run(levels=None), "not-csv", "levels.csv:1:1", "spreadsheet (.xlsx)", "save the sheet as CSV")


@pytest.mark.parametrize("raw", ["", "\n\n", "name,x,y,head\n"])
def test_empty_table(run, raw):
    only(run(levels=raw), "empty", "levels.csv:1:1")


def test_table_without_header(run):
    only(run(levels=LEVELS.split("\n", 1)[1]), "header", "levels.csv:1:1", "no header row")


def test_column_that_is_not_there(run):
    text = run(changed("  error: 0.05", "  error: 0.05\n  columns: {head: Head}"))
    only(text, "column", "scenario.yaml:27:19", "mean 'head'")
    only(run(levels=LEVELS.replace("head", "GWL")), "column", "scenario.yaml:25:9", "'head'")


def test_depth_to_water_given_as_head(run):
    shallow = "name,x,y,head\nP1,100,150,3.1\nP2,400,300,4.4\nP3,700,520,2.2\nP4,820,200,1.9\n"
    text = run(levels=shallow)
    only(text, "depth-as-head", "levels.csv:2:12", "4 of 4 levels", "depth to water given as head?", "measuring_point")
    text = run(changed("base: 40", "base: -60"), shallow)  # also where the base lies below zero
    only(text, "depth-as-head", "levels.csv:2:12", "depth to water")


def test_one_level_below_the_base(run):
    text = run(levels=LEVELS.replace("61.4", "31.4"))
    only(text, "below-base", "levels.csv:3:12", "P2", "leave_out")


def test_feet_in_a_metre_site(run):
    feet = "name,x,y,head\nP1,100,150,203.7\nP2,400,300,201.4\nP3,700,520,197.5\nP4,820,200,199.8\n"
    text = run(levels=feet)
    only(text, "feet", "levels.csv:2:12", "feet given where metres belong", "units: {head: ft}")


def test_feet_when_said_are_metres(tmp_path):
    from wellshed.scenarios.reading import load

    feet = "name,x,y,head\nP1,100,150,203.7\nP2,400,300,201.4\nP3,700,520,197.5\nP4,820,200,199.8\n"
    file = put(tmp_path, changed("  error: 0.05", "  error: 0.05\n  units: {head: ft}"), feet)
    assert load(file).levels[0].head == pytest.approx(203.7 * 0.3048)


def test_x_and_y_swapped(run):
    far = SCENARIO
    for old, new in [
        ("x: [0, 1000], y: [0, 800]", "x: [510000, 511000], y: [5400000, 5400800]"),
        ("[510, 310]", "[510510, 5400310]"),
        ("[[900, 700], [850, 400], [920, 100]]", "[[510900, 5400700], [510850, 5400400], [510920, 5400100]]"),
        ("[[100, 500], [250, 480], [300, 640], [120, 660]]",
         "[[510100, 5400500], [510250, 5400480], [510300, 5400640]]"),
    ]:  # fmt: skip
        far = changed(old, new, far)
    rows = [("P1", 510100, 5400150, 62.1), ("P2", 510400, 5400300, 61.4), ("P3", 510700, 5400520, 60.2)]
    text = run(far, "name,x,y,head\n" + "".join(f"{n},{y},{x},{h}\n" for n, x, y, h in rows))
    only(text, "swapped", "levels.csv:2:4", "x and y swapped")


def test_repeats_ask_what_they_become(run):
    text = run(levels=LEVELS + "P1,100,150,62.3\n")
    only(text, "repeats", "levels.csv:6:1", "repeats: mean", "lines 2, 6")
    text = run(levels=LEVELS + "P1,150,150,62.3\n")
    only(text, "name", "levels.csv:6:1", "50.0 m apart")


@pytest.mark.parametrize("line", ["lonlat", "crs"])
def test_geojson_in_another_system(run, tmp_path, line):
    points = [[15.1, 48.2], [15.2, 48.1]] if line == "lonlat" else [[900, 700], [920, 100]]
    shape = {"type": "LineString", "coordinates": points}
    if line == "crs":
        shape["crs"] = {"type": "name", "properties": {"name": "urn:ogc:def:crs:EPSG::25832"}}
    (tmp_path / "w.geojson").write_text(json.dumps(shape))
    text = changed("crs: local", "crs: EPSG:32633")
    text = run(changed("line: [[900, 700], [850, 400], [920, 100]]", "line: w.geojson", text))
    only(text, "crs", "scenario.yaml:18:11", "EPSG:32633")


def test_geojson_where_and_syntax(run, tmp_path):
    line = {"type": "LineString", "coordinates": [[0, 1], [2, 3]]}
    feature = {"type": "Feature", "properties": {"name": "Elm"}, "geometry": line}
    (tmp_path / "w.geojson").write_text(json.dumps({"type": "FeatureCollection", "features": [feature]}))
    asked = "line: {file: w.geojson, where: {name: Elms}}"
    text = run(changed("line: [[900, 700], [850, 400], [920, 100]]", asked))
    only(text, "where", "scenario.yaml:18:43", "mean 'Elm'")
    (tmp_path / "w.geojson").write_text('{"type": "Feature",\n "geometry": }')
    text = run(changed("line: [[900, 700], [850, 400], [920, 100]]", "line: w.geojson"))
    only(text, "geojson", "w.geojson:2:14", "JSON")


def test_no_room_for_the_answers_is_said_before_anything_is_computed(tmp_path, capsys):
    file = put(tmp_path)
    (tmp_path / "a file").write_text("x")
    for out in (tmp_path / "a file", tmp_path / "a file" / "answers", tmp_path / "no" / "folder"):
        with pytest.raises(SystemExit) as caught:
            main(["run", str(file), "--out", str(out)])
        assert caught.value.code == 2
        said = capsys.readouterr().err
        assert "error[answers-folder]" in said
        assert "Traceback" not in said
