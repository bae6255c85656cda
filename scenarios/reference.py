"""The reference of the scenario file in the README, made from the vocabulary itself.

``python -m wellshed.scenarios.reference README.md`` writes it anew between its two marks.
"""

import sys
from collections.abc import Iterator
from pathlib import Path
from types import UnionType
from typing import Annotated, Any, Union, get_args, get_origin

from pydantic import BaseModel
from pydantic.fields import FieldInfo

from .quantities import Takes
from .schema import scenario_model
from .units import allowed

BEGIN, END = "<!-- reference of the scenario file, generated -->\n", "<!-- end of the reference -->\n"


def reference() -> str:
    """Every key of a scenario file with its meaning, as Markdown tables, one for each block."""
    parts: list[str] = []
    _add(parts, "the file", scenario_model(), "", set())
    return "\n".join(parts)


def _add(parts: list[str], heading: str, model: type[BaseModel], path: str, done: set[type]) -> None:
    """The table of a block, then those of the blocks in it; each block once."""
    if model in done:
        return
    done.add(model)
    rows = [f"#### {heading}", "", "| key | meaning | units |", "| --- | --- | --- |"]
    inner = []
    for name, field in _fields(model):
        words = (field.description or "").replace("|", "\\|").replace("\n", " ")
        need = " **needed**" if field.is_required() else ""
        rows.append(f"| `{name}`{need} | {words} | {_units(field)} |")
        for block, many in _blocks(field.annotation, field.metadata):
            where = f"{path}.{name}".lstrip(".") + (".NAME" if many else "")
            inner.append((f"`{where}`", block, where))
    if len(rows) > 4:
        parts += [*rows, ""]
    for found in inner:
        _add(parts, *found, done)


def _fields(model: type[BaseModel]) -> Iterator[tuple[str, FieldInfo]]:
    for name, field in model.model_fields.items():
        yield field.alias or name, field
    extra = model.__annotations__.get("__pydantic_extra__")
    if extra is not None:
        words = get_args(extra)[1].__doc__
        yield "NAME", FieldInfo(annotation=get_args(extra)[1], default=None, description=words)


def _units(field: FieldInfo) -> str:
    """The units that a value with a unit of its own may carry."""
    for part in _walk(field.annotation, field.metadata):
        if isinstance(part, Takes) and part.dimension not in ("length", "number"):
            return allowed(part.dimension)
    return ""


def _blocks(annotation: Any, metadata: list[Any]) -> Iterator[tuple[type[BaseModel], bool]]:
    """Blocks that a value can be, and whether the value holds many of them by name."""
    many = get_origin(annotation) is dict
    for part in _walk(annotation, metadata):
        if isinstance(part, type) and issubclass(part, BaseModel):
            yield part, many


def _walk(annotation: Any, metadata: Any) -> Iterator[Any]:
    """All types and annotations inside an annotation."""
    yield from metadata
    origin = get_origin(annotation)
    if origin is Annotated:
        inner, *marks = get_args(annotation)
        yield from _walk(inner, marks)
    elif origin in (Union, UnionType, list, dict):
        for part in get_args(annotation):
            yield from _walk(part, ())
    else:
        yield annotation


def put_into(text: str) -> str:
    """The README's text with the reference between its marks."""
    before, rest = text.split(BEGIN)
    _, after = rest.split(END)
    return before + BEGIN + "\n" + reference() + "\n" + END + after


if __name__ == "__main__":
    readme = Path(sys.argv[1])
    readme.write_text(put_into(readme.read_text(encoding="utf-8")), encoding="utf-8", newline="\n")
