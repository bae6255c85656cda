"""Problems with a user's input: what, where, what was expected; all of a file at once, rendered one way everywhere."""

import difflib
import json
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from pathlib import Path


@dataclass(frozen=True)
class Problem:
    """One fault of an input: rule id, text, file, line and column (1-based, None unknown), how to mend it."""

    rule: str
    text: str
    file: Path | None = None
    line: int | None = None
    column: int | None = None
    help: str | None = None
    width: int = 1  # characters to underline


class InputError(ValueError):
    """The input is wrong; carries every problem found."""

    def __init__(self, problems: Sequence[Problem]) -> None:
        super().__init__("; ".join(p.text for p in problems))
        self.problems = tuple(problems)


def one(rule: str, text: str, file: Path | None = None, line: int | None = None, help: str | None = None) -> InputError:
    """An InputError with a single problem."""
    return InputError([Problem(rule, text, file, line, None, help)])


def nearest(word: str, allowed: Iterable[str]) -> str | None:
    """The allowed word most like a misspelt one, None if nothing is near."""
    found = difflib.get_close_matches(word, list(allowed), n=1, cutoff=0.6)
    return found[0] if found else None


def render(problems: Sequence[Problem]) -> str:
    """Problems as text for a terminal: message, place, the line with a caret, help."""
    parts = [_render_one(p) for p in problems]
    count = f"{len(problems)} error{'s' if len(problems) != 1 else ''}; nothing was computed"
    return "\n".join([*parts, count])


def _render_one(problem: Problem) -> str:
    lines = [f"error[{problem.rule}]: {problem.text}"]
    if problem.file is not None:
        place = str(problem.file)
        if problem.line is not None:
            place += f":{problem.line}" + ("" if problem.column is None else f":{problem.column}")
        lines.append(f"  --> {place}")
        excerpt = _excerpt(problem)
        if excerpt is not None:
            margin = " " * len(str(problem.line))
            lines += [f" {margin} |", f" {problem.line} | {excerpt}"]
            if problem.column is not None:
                lines.append(f" {margin} | {' ' * (problem.column - 1)}{'^' * max(1, problem.width)}")
    if problem.help:
        lines.append(f"   = help: {problem.help}")
    return "\n".join(lines)


def _excerpt(problem: Problem) -> str | None:
    if problem.file is None or problem.line is None:
        return None
    try:
        text = problem.file.read_text(encoding="utf-8-sig", errors="replace").splitlines()
    except OSError:
        return None
    if not 1 <= problem.line <= len(text):
        return None
    return text[problem.line - 1][:160].replace("\t", " ")


def as_json(problems: Sequence[Problem]) -> str:
    """The same list for editors and continuous integration."""
    rows = [
        {"rule": p.rule, "text": p.text, "file": None if p.file is None else str(p.file), "line": p.line,
         "column": p.column, "help": p.help}
        for p in problems
    ]  # fmt: skip
    return json.dumps({"errors": rows}, indent=2)
