"""A process that draws maps while the answers are still being computed.

Loading the drawing library takes as long as drawing a map, and both as long as fitting a site: on a second core they
cost nothing. The process reads maps from a pipe and ends with it, whatever happens to us.
"""

import pickle
import subprocess
import sys
import tempfile
from pathlib import Path
from typing import Any

from .map_content import MapContent

KINDS = "png", "svg"  # files of a map
COMMAND = [sys.executable, "-P", "-c", "from wellshed.scenarios.drawing import main; main()"]


class DrawingDesk:
    """Has maps drawn beside us; a ``with`` statement ends what it started."""

    def __enter__(self) -> "DrawingDesk":
        self._contents: dict[str, MapContent] = {}
        self._folder = tempfile.TemporaryDirectory(prefix="wellshed-", ignore_cleanup_errors=True)
        self._process = subprocess.Popen(
            COMMAND, stdin=subprocess.PIPE, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL, start_new_session=True
        )
        return self

    def __exit__(self, *_: Any) -> None:
        self._process.kill()
        self._process.communicate()
        self._folder.cleanup()

    def take(self, case: str, content: MapContent) -> None:
        """Have the map of a case drawn."""
        files = [Path(self._folder.name) / f"{len(self._contents)}.{kind}" for kind in KINDS]
        self._contents[case] = content
        assert self._process.stdin is not None
        try:
            pickle.dump((files, content), self._process.stdin)
            self._process.stdin.flush()
        except OSError:
            pass  # the process is gone: see ``drawings``

    def drawings(self) -> dict[str, dict[str, bytes]]:
        """The maps by case and kind, once all are finished.

        What the process could not draw, for want of memory or by an error, is drawn here: errors are raised as usual.
        """
        self._process.communicate()
        return {
            case: {kind: self._drawing(Path(self._folder.name) / f"{k}.{kind}", content) for kind in KINDS}
            for k, (case, content) in enumerate(self._contents.items())
        }

    def _drawing(self, file: Path, content: MapContent) -> bytes:
        try:
            return file.read_bytes()
        except FileNotFoundError:
            from .drawing import draw

            return draw(content, file.suffix[1:])
