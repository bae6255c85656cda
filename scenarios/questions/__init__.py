"""The questions a scenario can ask, one module each.

A question is a module of this package with a class ``Options`` (its keys in a scenario, ``cases`` among them), a
function ``problems(options, scenario)`` that checks the options against the rest of the scenario, and a function
``answer(options, case, context)`` that is called for the base and for each of the asked cases.
Module level imports stay light, since every check of a scenario loads all of them.
"""

from importlib import import_module
from pkgutil import iter_modules
from typing import Any


def question_names() -> tuple[str, ...]:
    """Names of the questions, sorted: the modules of this package."""
    return tuple(sorted(m.name for m in iter_modules(__path__) if not m.name.startswith("_")))


def question_module(name: str) -> Any:
    """The module of a question."""
    return import_module(f".{name}", __name__)


def options_of(name: str) -> Any:
    """The class of a question's options."""
    return question_module(name).Options
