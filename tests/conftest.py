"""What all tests share: the option for longer studies, and the source tree."""

import os
import sys
from pathlib import Path

# as the command line does: small matrices lose more by waiting threads than they gain (set before numpy is loaded)
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")

import pytest

# the finite-element truth (fem.py, fem_mesh.py) is a tool of several tests; importlib mode adds no folder by itself
sys.path.insert(0, str(Path(__file__).resolve().parent))


def pytest_addoption(parser):
    parser.addoption("--thorough", action="store_true", help="also run the longer studies")


def pytest_collection_modifyitems(config, items):
    if config.getoption("--thorough"):
        return
    skip = pytest.mark.skip(reason="a longer study: needs --thorough")
    for item in items:
        if item.get_closest_marker("thorough"):
            item.add_marker(skip)


@pytest.fixture(scope="session")
def source_root():
    """Folder of the package's sources, which is also the folder of the repository."""
    return Path(__file__).resolve().parent.parent
