"""Tables as CSV: UTF-8, a header with units in the names, ten significant digits."""

import csv
import io
from collections.abc import Mapping, Sequence
from typing import Any

from .layers import plain

_FORMULA = ("=", "+", "-", "@", "\t", "\r")


def table_text(rows: Sequence[Mapping[str, Any]]) -> str:
    """Rows as CSV text; the columns are those of all rows in order of appearance.

    A text that a spreadsheet would take for a formula gets a leading apostrophe.
    """
    columns = list(dict.fromkeys(name for row in rows for name in row))
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(columns)
    for row in rows:
        writer.writerow([_cell(row.get(name)) for name in columns])
    return out.getvalue()


def _cell(value: Any) -> str:
    value = plain(value)
    if value is None:
        return ""
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, float):
        return f"{value:.10g}"
    text = str(value)
    return f"'{text}" if text.startswith(_FORMULA) and not isinstance(value, int) else text
