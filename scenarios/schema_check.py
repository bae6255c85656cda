"""A scenario's tree against the vocabulary: every fault with its place and the nearest valid spelling; JSON Schema."""

import json
from collections.abc import Mapping
from types import UnionType
from typing import Annotated, Any, Union, get_args, get_origin

from pydantic import BaseModel, ValidationError

from .messages import Problem, comma_help, meant, nearest
from .schema import scenario_model
from .units import Bare
from .yaml_tree import Path_, Tree

_MISSING_HELP = {
    "beyond": "nothing fixes the far field: write 'beyond: {balance: none}' (lakes and streams take all the water) or "
    "'beyond: {reference: {at: [x, y], head: ...}}'",
    "wellshed": "the first line of a scenario is 'wellshed: 1'",
    "questions": "ask something, such as '- water_table: {interval: auto}'",
    "crs": "a projected system such as EPSG:32633, or 'local'",
    "error": "the standard deviation of a reading, such as 0.03, or one for each quality {surveyed: 0.03, gps: 0.5}",
}


def check_block(model: type[BaseModel], data: Any, tree: Tree, bare: Bare, at: Path_ = ()) -> tuple[Any, list[Problem]]:
    """The block as checked data, or None and every problem of it; ``at`` is where the block stands in the tree."""
    try:
        return model.model_validate(data, context={"bare": bare}), []
    except ValidationError as error:
        return None, _problems(error, model, data, tree, at)


def _problems(error: ValidationError, model: type[BaseModel], data: Any, tree: Tree, at: Path_) -> list[Problem]:
    faults = [(_in_data(e["loc"], data), e) for e in error.errors(include_url=False)]
    extras: dict[Path_, list[str]] = {}
    for loc, fault in faults:
        if fault["type"] == "extra_forbidden":
            extras.setdefault(loc[:-1], []).append(str(loc[-1]))
    found = []
    for loc, fault in faults:
        kind, ctx = fault["type"], fault.get("ctx") or {}
        if kind == "missing":
            key = str(loc[-1])
            if isinstance(loc[-1], int):  # the second number of a pair
                text = f"{_dotted((*at, *loc[:-1]))}: a pair has two entries"
                found.append(tree.problem("form", text, (*at, *loc[:-1])))
                continue
            # a misspelt key is one fault, not an unknown and a missing one
            if any(nearest(extra, _keys_at(model, loc[:-1], data)) == key for extra in extras.get(loc[:-1], [])):
                continue
            where = f"in {_dotted((*at, *loc[:-1]))}" if (*at, *loc[:-1]) else "in the scenario"
            place = (*at, *loc[:-1])
            found.append(
                tree.problem("missing-key", f"{key!r} is missing {where}", place, _MISSING_HELP.get(key), key=True)
            )
        elif kind == "extra_forbidden":
            keys = _keys_at(model, loc[:-1], data)
            text = f"{_dotted((*at, *loc))} is not a known key"
            help = comma_help(str(loc[-1]), fault["input"]) or meant(str(loc[-1]), keys)
            found.append(tree.problem("unknown-key", text, (*at, *loc), help, key=True))
        elif kind == "wellshed":
            path = (*at, *loc, *ctx["at"])
            text = f"{_dotted(path)}: {ctx['text']}" if path else ctx["text"]
            found.append(
                tree.problem(ctx["rule"], text, path, ctx["help"], key=ctx["key"] or ctx["rule"] == "exactly-one")
            )
        else:
            words, mend = _words(kind, ctx, fault)
            path = (*at, *loc)
            found.append(tree.problem("form", f"{_dotted(path)}: {words}", path, mend))
    return found


def _words(kind: str, ctx: Mapping[str, Any], fault: Any) -> tuple[str, str | None]:
    """What is wrong and how to mend it, for the kinds of fault that the library finds by itself."""
    received = fault["input"]
    if received is None:
        return "nothing stands here", "write its entries, or leave the key out"
    shown = "" if isinstance(received, dict | list) else f"; received {received}"
    if kind == "literal_error":
        choices = [c.strip().strip("'") for c in str(ctx["expected"]).replace(" or ", ", ").split(",")]
        return f"must be {ctx['expected']}{shown}", meant(str(received), choices) if len(choices) > 1 else None
    if kind in ("too_short", "too_long"):
        return f"needs {_count(ctx)} entries; received {ctx['actual_length']}", None
    words = {
        "model_type": "expected a map of keys", "dict_type": "expected a map of names", "list_type": "expected a list",
        "tuple_type": "expected a pair [x, y]", "string_type": "expected a word or a text",
        "bool_type": "expected true or false", "bool_parsing": "expected true or false",
        "int_type": "expected a whole number", "union_tag_not_found": "not understood",
    }  # fmt: skip
    text = words.get(kind) or str(fault["msg"]).removeprefix("Input should be ").removeprefix("a valid ")
    return (text[:1].lower() + text[1:] if kind not in words and kind != "form" else text) + shown, None


def _count(ctx: Mapping[str, Any]) -> str:
    if "min_length" in ctx:
        return f"at least {ctx['min_length']}"
    return f"at most {ctx['max_length']}"


def _in_data(loc: tuple[int | str, ...], data: Any) -> Path_:
    """The path without the library's names of alternatives, which the file does not have."""
    path: list[str | int] = []
    for i, part in enumerate(loc):
        if isinstance(data, Mapping):
            if part in data:
                data = data[part]
            elif i < len(loc) - 1:
                continue
        elif isinstance(data, list) and isinstance(part, int):
            data = data[part] if part < len(data) else None  # the missing entry of a pair
        else:
            continue
        path.append(part)
    return tuple(path)


def _keys_at(annotation: Any, path: Path_, data: Any) -> list[str]:
    """The keys that the vocabulary knows at a path."""
    if get_origin(annotation) is Annotated:
        return _keys_at(get_args(annotation)[0], path, data)
    if get_origin(annotation) in (Union, UnionType):
        found = [_keys_at(a, path, data) for a in get_args(annotation)]
        # of several alternatives, the one that shares most keys with the map that was written
        here = _at(data, path)
        written = set(here) if isinstance(here, Mapping) else set()
        return max(found, key=lambda keys: (len(written & set(keys)), len(keys)), default=[])
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        fields = {f.alias or n: f.annotation for n, f in annotation.model_fields.items()}
        if not path:
            return list(fields)
        inner = fields.get(str(path[0]))
        if inner is None and annotation.__annotations__.get("__pydantic_extra__"):
            inner = get_args(annotation.__annotations__["__pydantic_extra__"])[1]
        return _keys_at(inner, path[1:], data[path[0]] if isinstance(data, Mapping) and path[0] in data else None)
    arguments = [a for a in get_args(annotation) if a is not Ellipsis]
    if path and arguments:
        return _keys_at(arguments[-1], path[1:], _at(data, path[:1]))
    return []


def _at(data: Any, path: Path_) -> Any:
    for part in path:
        try:
            data = data[part]
        except (KeyError, IndexError, TypeError):
            return None
    return data


def _dotted(path: Path_) -> str:
    """A path as a person says it: wells.Mill 1.pumps, questions[2].interval."""
    text = ""
    for part in path:
        text += f"[{part + 1}]" if isinstance(part, int) else f".{part}" if text else str(part)
    return text


def json_schema() -> str:
    """The vocabulary as JSON Schema for editors (draft 7), as text."""
    schema = scenario_model().model_json_schema(by_alias=True, ref_template="#/definitions/{model}")
    schema["definitions"] = schema.pop("$defs", {})
    text = json.dumps(
        {"$schema": "http://json-schema.org/draft-07/schema#", **_draft_7(schema)}, indent=1, sort_keys=True
    )
    return text + "\n"


def _draft_7(node: Any) -> Any:
    """The same without constructs that are younger than draft 7, and without titles made from names."""
    if isinstance(node, list):
        return [_draft_7(n) for n in node]
    if not isinstance(node, dict):
        return node
    out = {k: _draft_7(v) for k, v in node.items() if not (k == "title" and isinstance(v, str))}
    if "prefixItems" in out:
        out["items"] = out.pop("prefixItems")
    if "$ref" in out and len(out) > 1:  # draft 7 ignores what stands beside a reference
        out = {"allOf": [{"$ref": out.pop("$ref")}], **out}
    return out
