"""The command line as its own process: what it imports, how soon it answers, its exit codes."""

import os
import subprocess
import sys
from types import SimpleNamespace

import pytest
from small import put
from wellshed.scenarios import cli
from wellshed.scenarios.messages import InputError
from wellshed.scenarios.start import start_scenario

WATCH = (
    "import sys, atexit; sys.argv[0] = 'wellshed'\n"
    "from wellshed.scenarios.cli import main\n"
    "atexit.register(lambda: print('LOADED', sorted({'numba', 'scipy', 'matplotlib'} & set(sys.modules))))\n"
    "main(sys.argv[1:])\n"
)


def process(*arguments, code=WATCH):
    return subprocess.run([sys.executable, "-c", code, *arguments], capture_output=True, text=True, env={**os.environ})


@pytest.mark.parametrize("arguments", [["--help"], ["check", "SCENARIO"], ["run", "--help"], ["schema"], ["--version"]])
def test_light_commands_import_nothing_heavy(tmp_path, arguments):
    file = put(tmp_path)
    done = process(*[str(file) if a == "SCENARIO" else a for a in arguments])
    assert done.returncode == 0, done.stderr
    assert "LOADED []" in done.stdout


@pytest.mark.parametrize("arguments", [["--help"], ["check", "SCENARIO"]])
def test_light_commands_spend_less_than_a_second(tmp_path, arguments):
    """Processor time of the child, the least of three: the clock on the wall counts the neighbours' work too."""
    file = put(tmp_path)
    asked = [str(file) if a == "SCENARIO" else a for a in arguments]
    code = "import atexit, time; atexit.register(lambda: print('SPENT', time.process_time()))\n" + WATCH
    spent = [float(process(*asked, code=code).stdout.rsplit("SPENT", 1)[1]) for _ in range(3)]
    assert min(spent) < 1.0


@pytest.mark.parametrize(
    "arguments", [[], ["chek"], ["run"], ["run", "x.yaml", "--oops"], ["check", "no.yaml"], ["start", "no"]]
)
def test_wrong_use_exits_with_2_and_no_traceback(arguments):
    done = process(*arguments)
    assert done.returncode == 2
    assert "Traceback" not in done.stderr + done.stdout


def test_check_says_what_it_found(tmp_path, capsys):
    with pytest.raises(SystemExit) as caught:
        cli.main(["check", str(put(tmp_path))])
    said = capsys.readouterr().out
    assert caught.value.code == 0
    assert "4 levels, 1 well, 1 stream, 1 lake, 1 recharge area, 1 case, 2 questions" in said


def stand_in(monkeypatch, answer, write=lambda answers, folder, desk: None):
    """Put answering and writing in the place of the real ones, which are tested elsewhere."""
    answering = SimpleNamespace(answer=answer, report_lines=lambda answers: ["a line of the report"])
    monkeypatch.setitem(sys.modules, "wellshed.scenarios.answering", answering)
    monkeypatch.setitem(sys.modules, "wellshed.scenarios.writing", SimpleNamespace(write=write))


def run(file, *more):
    with pytest.raises(SystemExit) as caught:
        cli.main(["run", str(file), *more])
    return caught.value.code


@pytest.mark.parametrize(("passed", "code"), [([True, True], 0), ([True, False], 1), ([], 0)])
def test_exit_code_tells_whether_the_checks_passed(tmp_path, monkeypatch, capsys, passed, code):
    written = []
    answers = SimpleNamespace(checks=[SimpleNamespace(passed=p) for p in passed])
    stand_in(monkeypatch, lambda scenario, **_: answers, lambda a, folder, desk: written.append((a, folder)))
    assert run(put(tmp_path)) == code
    assert written == [(answers, tmp_path / "answers")]
    assert "a line of the report" in capsys.readouterr().out
    assert run(put(tmp_path), "--out", str(tmp_path / "other")) == code
    assert written[1][1] == tmp_path / "other"


def failing(error):
    def answer(scenario, **_):
        raise error

    return answer


@pytest.mark.parametrize(
    ("name", "code", "words"),
    [
        ("GeometryError", 2, "error[geometry]: two lines"),
        ("WritingError", 2, "error[answers-folder]: two lines"),
        ("NotSolvedError", 1, "error[not-solved]: two lines"),
        ("KeyError", 3, "fault of wellshed"),
    ],
)
def test_errors_of_other_rooms(tmp_path, monkeypatch, capsys, name, code, words):
    error = KeyError if name == "KeyError" else type(name, (ValueError,), {})
    stand_in(monkeypatch, failing(error("two lines")))
    assert run(put(tmp_path)) == code
    said = capsys.readouterr().err
    assert words in said
    assert "Traceback" not in said


@pytest.mark.parametrize("place", [0, 3])
def test_traceback_only_with_debug(tmp_path, monkeypatch, capsys, place):
    stand_in(monkeypatch, failing(RuntimeError("odd")))
    arguments = ["run", str(put(tmp_path))]
    arguments.insert(place, "--debug")
    with pytest.raises(SystemExit) as caught:
        cli.main(arguments)
    assert caught.value.code == 3
    assert "Traceback" in capsys.readouterr().err


def test_names_of_errors_are_those_of_the_rooms():
    """The command line knows them by name only; a renamed class must not become a fault of ours."""
    from wellshed.solver.network import GeometryError
    from wellshed.solver.state import NotSolvedError

    assert {GeometryError.__name__, NotSolvedError.__name__} <= set(cli._KNOWN)


def test_interrupt_is_no_fault(tmp_path, monkeypatch, capsys):
    stand_in(monkeypatch, failing(KeyboardInterrupt()))
    assert run(put(tmp_path)) == 130
    assert "earlier answers are as they were" in capsys.readouterr().err


def test_start_never_overwrites(tmp_path):
    file = put(tmp_path)
    before = file.read_text()
    with pytest.raises(InputError, match="nothing is overwritten"):
        start_scenario(tmp_path)
    assert file.read_text() == before
