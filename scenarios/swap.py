"""Answers appear whole or not at all: written to a folder beside the old ones, swapped in at the end."""

import os
import shutil
import tempfile
from collections.abc import Callable
from pathlib import Path

MARK = "answers.json"  # a folder without it, unless empty, is not ours to replace


class WritingError(OSError):
    """The answers could not be written; earlier ones are as they were."""


def write_folder(folder: Path, produce: Callable[[Path], None]) -> None:
    """Fill a temporary folder beside ``folder`` by ``produce``, then swap it in.

    A folder that holds anything but answers of ours is refused. Raises WritingError; the old answers then stand.
    """
    if folder.exists() and not folder.is_dir():
        raise WritingError(f"{folder} is a file; choose another folder with --out")
    if folder.is_dir() and any(folder.iterdir()) and not (folder / MARK).is_file():
        raise WritingError(f"{folder} holds other things than answers (no {MARK}); choose another folder with --out")
    fresh: Path | None = None
    try:
        folder.parent.mkdir(parents=True, exist_ok=True)
        fresh = Path(tempfile.mkdtemp(prefix=f"{folder.name}.new-", dir=folder.parent))
        fresh.chmod(0o755)
        produce(fresh)
        _swap(folder, fresh)
    except OSError as error:
        raise WritingError(f"the answers could not be written to {folder}: {error.strerror or error}") from error
    finally:
        if fresh is not None and fresh.exists():
            shutil.rmtree(fresh, ignore_errors=True)


def _swap(folder: Path, fresh: Path) -> None:
    if not folder.exists():
        fresh.rename(folder)
        return
    old = folder.with_name(f"{folder.name}.old-{os.getpid()}")
    folder.rename(old)
    try:
        fresh.rename(folder)
    except OSError:
        old.rename(folder)
        raise
    shutil.rmtree(old, ignore_errors=True)
