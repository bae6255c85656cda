"""CSV tables of a scenario: header, cells with their places, numbers; nothing is guessed silently."""

import csv
import io
import re
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

from .intake import Intake
from .messages import Problem, meant
from .schema import TableBlock
from .units import UNITS, Bare, UnitError, quantity
from .yaml_tree import Path_

_NOT_CSV = {b"PK\x03\x04": "a spreadsheet (.xlsx)", b"\xd0\xcf\x11\xe0": "a spreadsheet (.xls)", b"%PDF": "a PDF",
            b"\x1f\x8b": "a compressed file"}  # fmt: skip
_WORDS = {u for table in UNITS.values() for u in table} | {"-", "masl", "date", "text"}
_UNIT_WORD = re.compile(
    rf"[\[(]?\s*({'|'.join(re.escape(w) for w in sorted(_WORDS, key=len, reverse=True))})\s*[\])]?", re.I
)


@dataclass(frozen=True)
class Row:
    """A row: its line in the file (1-based) and its cells by what they hold."""

    line: int
    cells: dict[str, str]
    columns: dict[str, int]  # place of each cell in the line (1-based)


@dataclass
class Table:
    """A table as read; ``problem`` keeps a fault at a cell, ``number`` reads one."""

    file: Path
    rows: list[Row]
    header: dict[str, str]  # what -> name of the column
    block: TableBlock
    intake: Intake

    def problem(self, rule: str, text: str, row: Row, what: str | None = None, help: str | None = None) -> None:
        """Keep a fault at a cell, or at a row."""
        column = 1 if what is None else row.columns.get(what, 1)
        width = max(1, len(row.cells.get(what or "", "")))
        self.intake.problems.append(Problem(rule, text, self.file, row.line, column, help, width))

    def number(self, row: Row, what: str, dimension: str) -> float | None:
        """A number in model units; None where the cell is empty or (with a problem kept) no number."""
        text = row.cells.get(what, "").strip()
        if not text:
            return None
        said = f"{self.header.get(what, what)} of {row.cells.get('name', '').strip() or f'line {row.line}'}"
        if self.block.decimal == ",":
            text = text.replace(",", ".", 1)
        unit = self.block.units.get(what)
        if unit is not None and re.fullmatch(r"[-+.\deE]+", text):
            text = f"{text} {unit}"
        try:
            return quantity(text, dimension, self.intake.bare)
        except UnitError as error:
            help, rule = error.help, error.rule
            if re.fullmatch(r"\s*[-+]?\d+,\d+\s*", text):
                help = "set 'decimal: \",\"' for the whole file"
            elif re.fullmatch(r"[-+.\deE]+", text):
                help = f"say the unit of the column: units: {{{what}: ...}}"
            elif dimension == "length" and rule == "number":
                help = "leave the cell empty where nothing was measured; it is then listed as not used"
            self.problem(rule, f"{said}: {error}", row, what, help)
            return None


def read_table(block: TableBlock, intake: Intake, path: Path_, roles: dict[str, str]) -> Table | None:
    """A CSV file; None (and a problem) where it cannot be read.

    roles: what the table may hold and the dimension of it ("text" for words). The header must name every column of
    ``block.columns``; a column with the name of a role needs no entry.
    """
    for key in ("columns", "units"):
        for what in getattr(block, key):
            if what not in roles:
                intake.error("unknown-key", f"{key}: a table like this has no {what!r}", (*path, key, what),
                             meant(what, roles), key=True)  # fmt: skip
                return None
    for what, unit in block.units.items():
        try:
            quantity(f"1 {unit}", roles[what], Bare()) if roles[what] != "text" else None
        except UnitError as error:
            intake.error(error.rule, f"units.{what}: {error}", (*path, "units", what), error.help)
            return None
    file = intake.file(block.file, (*path, "file"))
    text = None if file is None else _text_of(file, block, intake, (*path, "file"))
    if file is None or text is None:
        return None
    lines = [line for line in _lines(text, "\t" if block.delimiter == "tab" else block.delimiter) if any(line[1])]
    if not lines:
        intake.problems.append(
            Problem("empty", f"{block.file!r} is empty", file, 1, 1, "it needs a header row and rows")
        )
        return None
    columns = _columns(lines[0], block, intake, path, file, roles)
    if columns is None:
        return None
    rows = []
    for number, cells, places in lines[1:]:
        if len(cells) > len(lines[0][1]) and any(cells[len(lines[0][1]) :]):
            hint = "a comma inside a number or a name? put it in quotes, or set 'delimiter' and 'decimal'"
            text_ = f"the row has {len(cells)} cells, the header {len(lines[0][1])}"
            intake.problems.append(Problem("row", text_, file, number, places[len(lines[0][1])], hint))
            continue
        held = {what: cells[k] if k < len(cells) else "" for what, k in columns.items()}
        rows.append(Row(number, held, {what: places[min(k, len(places) - 1)] for what, k in columns.items()}))
    table = Table(file, rows, {what: lines[0][1][k] for what, k in columns.items()}, block, intake)
    if not rows:
        intake.problems.append(Problem("empty", f"{block.file!r} has a header but no rows", file, 1, 1))
        return None
    return None if _units_row(table, roles) else table


def _text_of(file: Path, block: TableBlock, intake: Intake, path: Path_) -> str | None:
    try:
        raw = file.read_bytes()
    except OSError as error:
        intake.error("file", f"cannot read {block.file!r}: {error.strerror or error}", path)
        return None
    for start, what in _NOT_CSV.items():
        if raw.startswith(start):
            intake.problems.append(Problem("not-csv", f"{block.file!r} is {what}, not a CSV file", file, 1, 1,
                                           "open it and save the sheet as CSV (UTF-8)"))  # fmt: skip
            return None
    try:
        text = raw.decode("utf-8-sig" if block.encoding.lower().replace("-", "") == "utf8" else block.encoding)
    except LookupError:
        intake.error(
            "encoding", f"unknown encoding {block.encoding!r}", (*path[:-1], "encoding"), "such as utf-8, cp1252"
        )
        return None
    except UnicodeDecodeError as error:
        line = raw.count(b"\n", 0, error.start) + 1
        column = error.start - raw.rfind(b"\n", 0, error.start)
        text_ = f"{block.file!r} is not {block.encoding.upper()}: byte {error.start} is 0x{raw[error.start]:02x}"
        help = "save it as UTF-8, or say how it is stored, such as 'encoding: cp1252'"
        intake.problems.append(Problem("encoding", text_, file, line, column, help))
        return None
    if "\x00" in text:
        intake.problems.append(Problem("not-csv", f"{block.file!r} holds binary data, not text", file, 1, 1,
                                       "save it as CSV (UTF-8)"))  # fmt: skip
        return None
    return text


def _lines(text: str, delimiter: str) -> Iterator[tuple[int, list[str], list[int]]]:
    """Line (1-based), stripped cells and their columns (1-based) of every row."""
    reader = csv.reader(io.StringIO(text), delimiter=delimiter)
    before, lines = 0, text.splitlines()
    while True:
        try:
            cells = next(reader)
        except StopIteration:
            return
        except csv.Error:  # a cell longer than any of ours: give it up as one row of one cell
            cells = ["unreadable"]
        first, before = before + 1, reader.line_num
        places, quoted = [1], False
        for at, character in enumerate(lines[first - 1] if first <= len(lines) else "", 1):
            if character == '"':
                quoted = not quoted
            elif character == delimiter and not quoted:
                places.append(at + 1)
        stripped = [c.strip() for c in cells]
        places += [places[-1]] * (len(stripped) - len(places))
        yield first, stripped, places


def _columns(
    header: tuple[int, list[str], list[int]],
    block: TableBlock,
    intake: Intake,
    path: Path_,
    file: Path,
    roles: dict[str, str],
) -> dict[str, int] | None:
    """What stands in which column; None (and a problem) where the header does not tell."""
    number, names, places = header
    for other in (";", "\t", ","):
        shown = "tab" if other == "\t" else other
        if len(names) == 1 and other in names[0] and shown != block.delimiter:
            text = f"{block.file!r} has {shown!r} between its cells, not {block.delimiter!r}"
            help = f"say so: 'delimiter: \"{shown}\"'" + (" and, for 1,5, 'decimal: \",\"'" if shown == ";" else "")
            column = names[0].find(other) + 1
            intake.problems.append(Problem("delimiter", text, file, number, column, help))
            return None
    if sum(bool(re.fullmatch(r"[-+]?\d+([.,]\d+)?", n)) for n in names) >= 2:
        intake.problems.append(Problem("header", f"{block.file!r} has no header row, but numbers there", file,
                                       number, 1, "name the columns in the first line"))  # fmt: skip
        return None
    found, good = {}, True
    for what, name in block.columns.items():
        if name not in names:
            intake.error("column", f"{block.file!r} has no column {name!r}", (*path, "columns", what),
                         meant(name, names, "columns"))  # fmt: skip
            good = False
        elif names.count(name) > 1:
            second = places[names.index(name, names.index(name) + 1)]
            intake.problems.append(Problem("column", f"two columns are named {name!r}", file, number, second))
            good = False
        else:
            found[what] = names.index(name)
    for what in roles:
        if what in names and what not in block.columns:
            found[what] = names.index(what)
    return found if good else None


def _units_row(table: Table, roles: dict[str, str]) -> bool:
    """Whether the first row holds units in place of numbers (then a problem is kept)."""
    row = table.rows[0]
    cells = [row.cells[w].strip() for w in row.cells if roles[w] != "text"]
    if not cells or not all(_UNIT_WORD.fullmatch(c) for c in cells if c) or not any(cells):
        return False
    what = next(w for w in row.cells if roles[w] != "text")
    table.problem("units-row", f"line {row.line} holds units, not numbers ({', '.join(cells)})", row, what,
                  "delete the line; say units that are not the site's with 'units: {head: ft}'")  # fmt: skip
    return True


def missing_column(table: Table, what: str, path: Path_, help: str | None = None) -> None:
    """Keep the problem that a table has no column for something."""
    text = f"no column of {table.block.file!r} holds {what!r}"
    table.intake.error("column", text, (*path, "file"), help or f"name it: 'columns: {{{what}: ...}}'")
