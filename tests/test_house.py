"""The shape of the package: who may import whom, what stays light, what is documented and how long files get."""

import ast
import doctest
import importlib
import pkgutil
import subprocess
import sys
import tomllib
from pathlib import Path

import pytest
import wellshed

ROOT = Path(__file__).resolve().parent.parent
MAY_IMPORT = {
    "": set(),
    "elements": {"elements"},
    "solver": {"solver", "elements"},
    "tracing": {"tracing", "elements"},
    "scenarios": {"scenarios", "solver", "tracing", "elements", ""},
}
MOST_LINES = 500


def sources():
    rooms = [ROOT / room for room in MAY_IMPORT if room]
    found = [ROOT / "__init__.py"]
    for room in rooms:
        found += [p for p in sorted(room.rglob("*.py")) if "examples" not in p.parts and "__pycache__" not in p.parts]
    return found


def package_of(path):
    """Parts of the package a file stands in, without ``wellshed``."""
    return path.relative_to(ROOT).parts[:-1]


def imports_of(path):
    """(room, line, relative) of every import of the package itself in a file; room "" is the top."""
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.ImportFrom) and node.level:
            package = package_of(path)
            base = package[: len(package) - (node.level - 1)]
            full = base + tuple((node.module or "").split(".") if node.module else ())
            if full:
                yield full[0], node.lineno, True
            else:
                for alias in node.names:
                    yield (alias.name if alias.name in MAY_IMPORT else ""), node.lineno, True
        elif isinstance(node, ast.ImportFrom) and node.module and node.module.split(".")[0] == "wellshed":
            yield "", node.lineno, False
        elif isinstance(node, ast.Import):
            for alias in node.names:
                if alias.name.split(".")[0] == "wellshed":
                    yield "", node.lineno, False


IDS = [str(p.relative_to(ROOT)) for p in sources()]


@pytest.mark.parametrize("path", sources(), ids=IDS)
def test_imports_run_downward_and_are_relative(path):
    room = package_of(path)[0] if package_of(path) else ""
    for target, line, relative in imports_of(path):
        assert relative, f"{path.name}:{line} imports wellshed by name"
        assert target in MAY_IMPORT[room], f"{path.name}:{line}: {room or 'top'} imports {target or 'top'}"


def test_the_import_rule_sees_a_breach(tmp_path, monkeypatch):
    (tmp_path / "solver").mkdir()
    breach = tmp_path / "solver" / "bad.py"
    breach.write_text("from ..tracing.zones import capture_zone\nfrom .. import scenarios\nimport wellshed\n")
    monkeypatch.setattr(sys.modules[__name__], "ROOT", tmp_path)
    assert list(imports_of(breach)) == [("tracing", 1, True), ("scenarios", 2, True), ("", 3, False)]


@pytest.mark.parametrize("path", sources(), ids=IDS)
def test_files_stay_short(path):
    assert len(path.read_text(encoding="utf-8").splitlines()) <= MOST_LINES


@pytest.mark.parametrize("path", sources(), ids=IDS)
def test_public_names_are_documented(path):
    tree = ast.parse(path.read_text(encoding="utf-8"))
    assert ast.get_docstring(tree), f"{path.name} has no docstring"
    bodies = [tree.body] + [n.body for n in tree.body if isinstance(n, ast.ClassDef) and not n.name.startswith("_")]
    for body in bodies:
        for node in body:
            if isinstance(node, ast.FunctionDef | ast.ClassDef) and not node.name.startswith("_"):
                assert ast.get_docstring(node), f"{path.name}:{node.lineno}: {node.name} has no docstring"


def test_every_package_is_in_the_distribution():
    listed = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))["tool"]["setuptools"]["packages"]
    present = {".".join(("wellshed", *package_of(p))) for p in sources()}
    assert set(listed) == present
    for path in sources():
        assert (path.parent / "__init__.py").exists(), f"{path.parent} has no __init__.py"


def test_plain_import_loads_no_heavy_package():
    code = "import sys, wellshed; print(sorted({'numba', 'scipy', 'matplotlib', 'numpy'} & set(sys.modules)))"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


def test_elements_can_be_made_without_a_compiler():
    code = (
        "import sys, wellshed as w; w.Aquifer(10, 0), w.PumpingWell('a', 0, 0, 1), w.Stream, w.LakeEdge,"
        " w.Outline, w.RechargeArea, w.RegionalFlow; print('numba' in sys.modules)"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "False"


def test_unknown_public_name_is_an_attribute_error():
    with pytest.raises(AttributeError, match="no attribute 'sovle'"):
        wellshed.sovle  # noqa: B018


def modules():
    names = (m.name for m in pkgutil.walk_packages(wellshed.__path__, "wellshed."))
    rooms = {f"wellshed.{room}" for room in MAY_IMPORT if room}
    return [n for n in names if ".".join(n.split(".")[:2]) in rooms and ".examples" not in n]


def test_the_walk_finds_every_source():
    dotted = {".".join(("wellshed", *p.relative_to(ROOT).with_suffix("").parts)) for p in sources()}
    dotted = {d.removesuffix(".__init__") for d in dotted} - {"wellshed"}
    assert set(modules()) == dotted


@pytest.mark.parametrize("name", modules())
def test_doctests(name):
    assert doctest.testmod(importlib.import_module(name)).failed == 0
