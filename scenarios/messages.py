"""Problems with a user's input: what, where, what was expected; all of a file at once, rendered one way everywhere."""

import difflib
import json
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from pathlib import Path

_SHOWN = 110  # characters of a line that an excerpt shows


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
    allowed = list(allowed)
    folded = {a.casefold(): a for a in reversed(allowed)}
    if word.casefold() in folded:
        return folded[word.casefold()]
    found = difflib.get_close_matches(word, allowed, n=1, cutoff=0.6)
    return found[0] if found else None


def meant(word: str, allowed: Iterable[str], what: str = "known") -> str:
    """A help line for a word that is not among the allowed: the likely one, or all of them."""
    allowed = list(allowed)
    near = nearest(word, allowed)
    if near is not None:
        return f"did you mean {near!r}?"
    return f"{what}: {', '.join(allowed)}" if allowed else f"{what}: none"


def comma_help(key: str, value: object) -> str | None:
    """Help for a "key" that is the tail of a decimal comma: ``{stage: 62,6}`` has the keys stage and 6."""
    if value is None and key[:1].isdigit():
        return "is this the end of a number with a decimal comma? write a decimal point"
    return None


def render(problems: Sequence[Problem]) -> str:
    """Problems as text for a terminal: message, place, the line with a caret, help."""
    parts = [_render_one(p) for p in problems]
    count = f"{len(problems)} error{'s' if len(problems) != 1 else ''}; nothing was computed"
    return "\n".join([*parts, count])


def _render_one(problem: Problem) -> str:
    lines = [f"error[{problem.rule}]: {_printable(problem.text)}"]
    if problem.file is not None:
        place = str(problem.file)
        if problem.line is not None:
            place += f":{problem.line}" + ("" if problem.column is None else f":{problem.column}")
        lines.append(f"  --> {place}")
        excerpt = _excerpt(problem)
        if excerpt is not None:
            text, start = excerpt
            margin = " " * len(str(problem.line))
            lines += [f" {margin} |", f" {problem.line} | {text}"]
            if problem.column is not None:
                lines.append(f" {margin} | {' ' * (problem.column - 1 - start)}{'^' * max(1, problem.width)}")
    if problem.help:
        lines.append(f"   = help: {_printable(problem.help)}")
    return "\n".join(lines)


def _excerpt(problem: Problem) -> tuple[str, int] | None:
    """The part of the line round the column, and the number of characters before it."""
    if problem.file is None or problem.line is None:
        return None
    try:
        text = problem.file.read_text(encoding="utf-8-sig", errors="replace").splitlines()
    except OSError:
        return None
    if not 1 <= problem.line <= len(text):
        return None
    column = problem.column or 1
    start = 0 if column + problem.width <= _SHOWN else column - 1 - _SHOWN // 3
    return _printable(text[problem.line - 1])[start : start + _SHOWN], start


def _printable(text: str) -> str:
    """Text without control characters, which a terminal would obey."""
    return "".join(c if c.isprintable() else " " for c in text)


def as_json(problems: Sequence[Problem]) -> str:
    """The same list for editors and continuous integration."""
    rows = [
        {"rule": p.rule, "text": p.text, "file": None if p.file is None else str(p.file), "line": p.line,
         "column": p.column, "help": p.help}
        for p in problems
    ]  # fmt: skip
    return json.dumps({"errors": rows}, indent=2)
