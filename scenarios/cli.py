"""The command line: run, check, start, schema. Heavy packages are imported inside the commands."""

import gc
import os
import sys
from enum import StrEnum
from pathlib import Path
from typing import Annotated, Any

import typer

# A site's matrices are small: the threads of the linear algebra would spend more time waiting than working. Must be set
# before numpy is loaded; what the user has set stays.
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")

ANSWERED, FAILED_CHECK, WRONG_INPUT, OUR_FAULT, STOPPED = 0, 1, 2, 3, 130
# errors of other rooms by name, since their modules are heavy to import; with the rule that is printed
_KNOWN = {"GeometryError": "geometry", "NotSolvedError": "not-solved", "WritingError": "answers-folder"}

RARELY = (100_000, 20, 20)  # a short program makes little garbage; looking for it took a tenth of the time

app = typer.Typer(
    add_completion=False, no_args_is_help=True, pretty_exceptions_enable=False, rich_markup_mode=None,
    help="Water-table maps and capture zones from water levels, by analytic elements.",
)  # fmt: skip


class Format(StrEnum):
    """How errors are printed."""

    text = "text"
    json = "json"


_SCENARIO = Annotated[Path, typer.Argument(metavar="SCENARIO", help="Scenario file (YAML).")]
_FORMAT = Annotated[Format, typer.Option("--format", help="How errors are printed.")]
_OUTSIDE = Annotated[bool, typer.Option("--allow-outside", help="Also read data files outside the scenario's folder.")]


def _version(wanted: bool) -> None:
    if wanted:
        from .. import __version__

        typer.echo(f"wellshed {__version__}")
        raise typer.Exit


@app.callback()
def _options(
    debug: Annotated[bool, typer.Option("--debug", help="Show where in the program an error arose.")] = False,
    version: Annotated[
        bool, typer.Option("--version", callback=_version, is_eager=True, help="Print the version.")
    ] = False,
) -> None:
    """Options of every command; both are served elsewhere."""


@app.command()
def run(
    scenario: _SCENARIO,
    out: Annotated[Path | None, typer.Option("--out", metavar="FOLDER", help="Where the answers go.")] = None,
    allow_outside: _OUTSIDE = False,
    format: _FORMAT = Format.text,
) -> None:
    """Answer a scenario: fit, solve, trace, draw. The answers go to the folder `answers` beside it."""
    from .messages import InputError
    from .reading import load

    read = load(scenario, allow_outside=allow_outside)
    folder = (out or read.file.parent / "answers").absolute()
    problem = _no_room(folder)
    if problem is not None:
        raise InputError([problem])
    from .desk import DrawingDesk

    with DrawingDesk() as desk, _Progress() as progress:
        from ..tracing.rehearsal import compile_beside

        compile_beside()
        from .answering import answer, report_lines
        from .writing import write

        answers = answer(read, progress=progress, map_done=desk.take)
        progress("drawing and writing")
        write(answers, folder, desk)
    for line in report_lines(answers):
        typer.echo(line)
    typer.echo(f"answers in {folder}")
    if any(not check.passed for check in answers.checks):
        raise typer.Exit(FAILED_CHECK)


@app.command()
def check(scenario: _SCENARIO, allow_outside: _OUTSIDE = False, format: _FORMAT = Format.text) -> None:
    """Check a scenario and its data files without computing anything."""
    from .reading import load

    read = load(scenario, allow_outside=allow_outside)
    if format is Format.json:
        import json

        typer.echo(json.dumps({"errors": [], "notes": read.notes}, indent=2, ensure_ascii=False))
        return
    counts = {
        "level": len(read.levels), "well": len(read.wells), "stream": len(read.streams), "lake": len(read.lakes),
        "recharge area": len(read.recharge), "case": len(read.cases), "question": len(read.questions),
    }  # fmt: skip
    said = ", ".join(f"{n} {what}{'' if n == 1 else 's'}" for what, n in counts.items() if n)
    typer.echo(f"{scenario}: no errors ({said})")
    for note in read.notes:
        typer.echo(f"note: {note}")


@app.command()
def start(
    folder: Annotated[Path, typer.Argument(metavar="FOLDER", help="Folder that holds a CSV of levels, or none.")],
) -> None:
    """Write a first scenario.yaml into a folder, with every guess marked GUESSED."""
    from .start import start_scenario

    typer.echo(
        f"wrote {start_scenario(folder)}; mend what is marked GUESSED, then: wellshed run {folder}/scenario.yaml"
    )


@app.command()
def schema() -> None:
    """Print the vocabulary of scenario files as JSON Schema, for editors."""
    from .schema_check import json_schema

    typer.echo(json_schema(), nl=False)


def _no_room(folder: Path) -> Any:
    """The problem with a folder that the answers cannot go to, None if they can; found before anything is computed."""
    import tempfile

    from .messages import Problem

    if folder.exists() and not folder.is_dir():
        return Problem(
            "answers-folder", f"the answers cannot go to {folder}: it is a file", help="choose another: --out"
        )
    try:
        with tempfile.TemporaryDirectory(prefix=".wellshed-", dir=folder.parent) as trial:
            (Path(trial) / "room").write_bytes(b"x")
    except OSError as error:
        why = error.strerror or str(error)
        return Problem(
            "answers-folder", f"the answers cannot go to {folder}: {why}", help="choose another: --out FOLDER"
        )
    return None


class _Progress:
    """Prints what is being done on a terminal; says nothing into a pipe."""

    def __enter__(self) -> "_Progress":
        self.status: Any = None
        if sys.stderr.isatty():
            from rich.console import Console

            self.status = Console(stderr=True).status("reading")
            self.status.start()
        return self

    def __call__(self, text: str) -> None:
        if self.status is not None:
            self.status.update(text)

    def __exit__(self, *_: object) -> None:
        if self.status is not None:
            self.status.stop()


def main(arguments: list[str] | None = None) -> None:
    """Run the command line; ends with exit code 0, 1, 2 or 3 and never with a traceback unless --debug is given."""
    given = sys.argv[1:] if arguments is None else arguments
    asked = [a for a in given if a != "--debug"]  # allowed anywhere, not only before the command
    try:
        code = app(args=asked, prog_name="wellshed", standalone_mode=False)
    except (KeyboardInterrupt, typer.Abort):
        code = STOPPED
    except Exception as error:
        if "--debug" in given:
            import traceback

            traceback.print_exc()
        code = _failed(error, given)
    if code == STOPPED:
        typer.echo("stopped; earlier answers are as they were", err=True)
    sys.exit(code or ANSWERED)


def entry() -> None:
    """The command ``wellshed``. Ends the process at once: tearing down the compiler would take half a second."""
    gc.set_threshold(*RARELY)
    try:
        main()
    except SystemExit as end:
        sys.stdout.flush()
        sys.stderr.flush()
        os._exit(end.code if isinstance(end.code, int) else OUR_FAULT)


def _failed(error: Exception, given: list[str]) -> int:
    """Say what went wrong; the exit code."""
    from .messages import InputError, Problem, as_json, render

    show = getattr(error, "show", None)
    if show is not None:  # a wrong command or option; the command line's own error prints itself
        show()
        return WRONG_INPUT
    as_text = not any(a == "--format=json" or (b, a) == ("--format", "json") for a, b in zip(given[1:], given))
    if isinstance(error, InputError):
        problems = error.problems
    elif type(error).__name__ in _KNOWN:
        problems = (Problem(_KNOWN[type(error).__name__], str(error)),)
    else:
        typer.echo(
            f"fault[{type(error).__name__}]: {error}\nThis is a fault of wellshed, not of your input; earlier answers "
            "are as they were. Run it again with --debug to see where it arose.",
            err=True,
        )
        return OUR_FAULT
    typer.echo(render(problems) if as_text else as_json(problems), err=as_text)
    return FAILED_CHECK if type(error).__name__ == "NotSolvedError" else WRONG_INPUT
