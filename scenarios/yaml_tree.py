"""YAML read like YAML 1.2, with the place of every key and value.

PyYAML follows YAML 1.1: ``yes`` is a truth value, ``12:30`` is 750, ``1e-5`` is text, and the second of two equal
keys wins without a word. Here numbers are numbers, ``true`` and ``false`` the only truth values, equal keys an error.
"""

import re
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import yaml

from .messages import InputError, Problem

MOST_NODES = 200_000  # aliases are expanded: a file that grows beyond this is refused
_INT = re.compile(r"^[-+]?\d+$")
_FLOAT = re.compile(r"^[-+]?(\d+\.?\d*|\.\d+)([eE][-+]?\d+)?$")

Path_ = tuple[str | int, ...]


@dataclass
class Tree:
    """Plain data and, for every path in it, line and column (1-based) of its value and its key."""

    data: Any
    file: Path
    values: dict[Path_, tuple[int, int]] = field(default_factory=dict)
    keys: dict[Path_, tuple[int, int]] = field(default_factory=dict)
    widths: dict[Path_, int] = field(default_factory=dict)  # characters of the values that are one word or number

    def problem(self, rule: str, text: str, path: Path_, help: str | None = None, *, key: bool = False) -> Problem:
        """A problem at a path (or at the nearest part of it that the file has)."""
        table = self.keys if key else self.values
        for n in range(len(path), -1, -1):
            part = path[:n]
            # a part that the path does not reach is best shown by its key: the first line of its block
            own = table if n == len(path) else self.keys
            place = own.get(part) or self.keys.get(part) or self.values.get(part)
            if place:
                at_key = place == self.keys.get(part) and bool(part)
                width = len(str(part[-1])) if at_key else self.widths.get(part, 1)
                return Problem(rule, text, self.file, *place, help, width)
        return Problem(rule, text, self.file, 1, 1, help)


def read_tree(file: Path) -> Tree:
    """Read a YAML file; raises InputError with every duplicate key, or the place where it is no YAML."""
    try:
        text = file.read_bytes().decode("utf-8-sig")
    except UnicodeDecodeError as error:
        raise InputError([Problem("encoding", f"not UTF-8 at byte {error.start}", file, None, None,
                                  "save the file as UTF-8")]) from None  # fmt: skip
    except OSError as error:
        raise InputError([Problem("file", f"cannot read the scenario: {error.strerror or error}", file)]) from None
    try:
        node = yaml.compose(text, Loader=yaml.SafeLoader)
    except yaml.MarkedYAMLError as error:
        mark = error.problem_mark or error.context_mark
        line, column = (None, None) if mark is None else (mark.line + 1, mark.column + 1)
        hint = "indent with spaces, put text with ': ' or '#' in quotes"
        raise InputError(
            [Problem("yaml", f"not readable as YAML: {error.problem}", file, line, column, hint)]
        ) from None
    except (yaml.YAMLError, RecursionError) as error:
        raise InputError([Problem("yaml", f"not readable as YAML: {error}", file)]) from None
    tree = Tree(None, file)
    if node is None:
        raise InputError([Problem("empty", "the file is empty", file, 1, 1, "start one with 'wellshed start FOLDER'")])
    problems: list[Problem] = []
    budget = [MOST_NODES]
    tree.data = _plain(node, (), tree, problems, budget, ())
    if problems:
        raise InputError(problems)
    return tree


def _plain(
    node: yaml.Node, path: Path_, tree: Tree, problems: list[Problem], budget: list[int], above: tuple[int, ...]
) -> Any:
    place = node.start_mark.line + 1, node.start_mark.column + 1
    tree.values[path] = place
    budget[0] -= 1
    if budget[0] < 0 or id(node) in above:
        text = "anchors and aliases expand without end" if id(node) in above else "anchors and aliases expand too far"
        raise InputError([Problem("anchors", text, tree.file, *place, "write the values out")])
    if isinstance(node, yaml.ScalarNode):
        if node.end_mark.line == node.start_mark.line:
            tree.widths[path] = max(1, node.end_mark.column - node.start_mark.column)
        return _scalar(node)
    inner = (*above, id(node))
    if isinstance(node, yaml.SequenceNode):
        return [_plain(child, (*path, i), tree, problems, budget, inner) for i, child in enumerate(node.value)]
    out: dict[str, Any] = {}
    for key_node, value_node in node.value:
        at = key_node.start_mark.line + 1, key_node.start_mark.column + 1
        key = str(key_node.value) if isinstance(key_node, yaml.ScalarNode) else None
        if not key:
            problems.append(Problem("key", "a key must be a word", tree.file, *at))
            continue
        if key in out:
            first = tree.keys[(*path, key)][0]
            problems.append(
                Problem("duplicate-key", f"{key!r} stands twice; the first is in line {first}", tree.file, *at,
                        "keep one of them", len(key))
            )  # fmt: skip
            continue
        tree.keys[(*path, key)] = at
        out[key] = _plain(value_node, (*path, key), tree, problems, budget, inner)
    return out


def _scalar(node: yaml.ScalarNode) -> Any:
    text = node.value
    if node.style is not None:  # quoted
        return text
    if text in ("", "~", "null"):
        return None
    if text in ("true", "false"):
        return text == "true"
    if _INT.match(text):
        return int(text) if len(text) < 400 else float("inf")
    if _FLOAT.match(text):
        return float(text)
    return text
