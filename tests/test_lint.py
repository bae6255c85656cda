"""The linter and the type checker find nothing (strict for elements, solver and tracing: see pyproject.toml)."""

import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent


@pytest.mark.parametrize("command", [["check", "."], ["format", "--check", "."]], ids=["check", "format"])
def test_ruff(command):
    run = subprocess.run([sys.executable, "-m", "ruff", *command], cwd=ROOT, capture_output=True, text=True)
    assert run.returncode == 0, run.stdout + run.stderr


def test_mypy(tmp_path):
    # the repository's root is the package: mypy finds it by this name only beside a link of that name
    (tmp_path / "wellshed").symlink_to(ROOT, target_is_directory=True)
    command = [sys.executable, "-m", "mypy", "-p", "wellshed", "--config-file", str(ROOT / "pyproject.toml")]
    run = subprocess.run(
        [*command, "--cache-dir", str(tmp_path / "cache")], cwd=tmp_path, capture_output=True, text=True
    )
    assert run.returncode == 0, run.stdout + run.stderr
