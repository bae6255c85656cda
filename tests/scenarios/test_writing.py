"""Answers appear whole or not at all."""

import json
import os
import subprocess
import sys
import tempfile
import time

import pytest
from small import changed, put
from wellshed.scenarios import answering, writing
from wellshed.scenarios.answering import answer
from wellshed.scenarios.cli import main
from wellshed.scenarios.reading import load
from wellshed.scenarios.swap import WritingError, write_folder
from wellshed.scenarios.writing import write


def contents(folder):
    return {p.relative_to(folder).as_posix(): p.read_bytes() for p in sorted(folder.rglob("*")) if p.is_file()}


@pytest.fixture(scope="module")
def answers(tmp_path_factory):
    return answer(load(put(tmp_path_factory.mktemp("small"))))


def test_all_files_are_there_and_agree_with_each_other(answers, tmp_path):
    write(answers, tmp_path / "answers")
    found = contents(tmp_path / "answers")
    expected = {"answers.json", "map.png", "map.svg", "map_more.png", "map_more.svg", "parameters.csv", "residuals.csv",
                "balance.csv", "checks.csv", "drawdown.csv", "time_zones.csv", "wells.geojson", "levels.geojson",
                "waters.geojson", "run_info.geojson", "head_contours.geojson", "water_paths.geojson",
                "exchange.geojson",
                "capture_zones.geojson", "time_zones.geojson"}  # fmt: skip
    assert expected <= set(found)
    content = json.loads(found["answers.json"])
    for entry in content["answers"]:
        files = [entry["polygon"], *(t["polygon"] for t in entry["times"])] if "polygon" in entry else []
        assert all(name in found for name in files)
    assert [p.name for p in tmp_path.iterdir()] == ["answers"]  # nothing temporary is left


def test_the_same_answers_give_the_same_bytes(answers, tmp_path):
    write(answers, tmp_path / "a")
    write(answers, tmp_path / "b")
    assert contents(tmp_path / "a") == contents(tmp_path / "b")


@pytest.mark.parametrize("step", range(6))
def test_a_failure_at_any_file_leaves_the_old_answers_whole(answers, tmp_path, monkeypatch, step):
    write(answers, tmp_path / "answers")
    before = contents(tmp_path / "answers")
    count = iter(range(100))
    text = writing._text

    def failing(path, content):
        if next(count) == 4 * step:
            raise OSError(28, "No space left on device")
        text(path, content)

    monkeypatch.setattr(writing, "_text", failing)
    if step == 5:
        monkeypatch.setattr(writing, "_text", text)
        monkeypatch.setattr(writing, "_drawn", lambda _: (_ for _ in ()).throw(OSError(28, "No space left")))
    with pytest.raises(WritingError, match="No space left"):
        write(answers, tmp_path / "answers")
    assert contents(tmp_path / "answers") == before
    assert [p.name for p in tmp_path.iterdir()] == ["answers"]


def test_a_folder_with_other_things_is_not_touched(answers, tmp_path):
    (tmp_path / "mine").mkdir()
    (tmp_path / "mine" / "thesis.txt").write_text("years of work")
    with pytest.raises(WritingError, match="other things than answers"):
        write(answers, tmp_path / "mine")
    assert contents(tmp_path / "mine") == {"thesis.txt": b"years of work"}
    (tmp_path / "file").write_text("x")
    with pytest.raises(WritingError, match="is a file"):
        write(answers, tmp_path / "file")


def test_old_answers_go_only_when_the_new_ones_stand(tmp_path):
    def one(folder):
        (folder / "answers.json").write_text("{}")
        (folder / "old.csv").write_text("1")

    def two(folder):
        assert (tmp_path / "answers" / "old.csv").exists()
        (folder / "answers.json").write_text("{}")

    write_folder(tmp_path / "answers", one)
    write_folder(tmp_path / "answers", two)
    assert set(contents(tmp_path / "answers")) == {"answers.json"}


def test_names_become_file_names(tmp_path):
    text = changed("  Mill 1: {at", "  '../Mühle / 1': {at").replace("wells.Mill 1.", "wells.../Mühle / 1.")
    text = text.replace("wells: [Mill 1]", "wells: ['../Mühle / 1']")
    done = answer(load(put(tmp_path, text)))
    write(done, tmp_path / "answers")
    outside = {p.name for p in tmp_path.iterdir()}
    assert outside == {"answers", "scenario.yaml", "levels.csv"}
    zones = [p.name for p in (tmp_path / "answers" / "zones").iterdir()]
    assert zones
    assert all("/" not in n and ".." not in n for n in zones)
    wells = json.loads((tmp_path / "answers" / "wells.geojson").read_text(encoding="utf-8"))
    assert wells["features"][0]["properties"]["name"] == "../Mühle / 1"  # in the files the name is as written


@pytest.mark.skipif(os.name != "posix", reason="kills a process by signal")
def test_a_killed_run_leaves_the_last_good_answers(tmp_path):
    file = put(tmp_path)
    command = [sys.executable, "-c", "from wellshed.scenarios.cli import main; main()", "run", str(file)]
    subprocess.run(command, check=True, capture_output=True)
    before = contents(tmp_path / "answers")
    assert "answers.json" in before
    started = time.perf_counter()
    subprocess.run(command, check=True, capture_output=True)
    whole = time.perf_counter() - started
    for share in (0.5, 0.92):
        run = subprocess.Popen(command, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
        time.sleep(share * whole)
        run.kill()
        run.wait()
        assert contents(tmp_path / "answers") == before


def command(arguments, capsys):
    with pytest.raises(SystemExit) as ended:
        main(arguments)
    return ended.value.code, capsys.readouterr().err


def test_a_read_only_folder_is_said_before_anything_is_computed(answers, tmp_path, monkeypatch, capsys):
    file = put(tmp_path)
    write(answers, tmp_path / "answers")
    before = contents(tmp_path / "answers")

    def refused(*_, **__):
        raise OSError(30, "Read-only file system")

    monkeypatch.setattr(tempfile, "TemporaryDirectory", refused)
    monkeypatch.setattr(answering, "answer", lambda *_, **__: pytest.fail("computed, although nothing can be written"))
    code, said = command(["run", str(file)], capsys)
    assert code == 2
    assert "answers-folder" in said
    assert "Read-only file system" in said
    assert "--out" in said
    assert "Traceback" not in said
    assert contents(tmp_path / "answers") == before


@pytest.mark.skipif(os.name != "posix" or os.geteuid() == 0, reason="needs a user whom permissions bind")
def test_a_folder_without_permission_is_said(tmp_path, capsys):
    file = put(tmp_path)
    tmp_path.chmod(0o555)
    try:
        code, said = command(["run", str(file)], capsys)
    finally:
        tmp_path.chmod(0o755)
    assert code == 2
    assert "Permission denied" in said


def test_a_disk_that_fills_up_is_said_in_one_message(answers, tmp_path, monkeypatch, capsys):
    file = put(tmp_path)
    write(answers, tmp_path / "answers")
    before = contents(tmp_path / "answers")
    monkeypatch.setattr(answering, "answer", lambda *_, **__: answers)

    def full(*_):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(writing, "_text", full)
    code, said = command(["run", str(file)], capsys)
    assert code == 2
    assert said.count("No space left on device") == 1
    assert "Traceback" not in said
    assert contents(tmp_path / "answers") == before
