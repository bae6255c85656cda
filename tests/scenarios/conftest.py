"""The small scenario is a tool of several tests; importlib mode adds no folder by itself."""

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parent))
