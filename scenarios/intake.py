"""The desk at which a scenario is read: its tree, its folder, and all problems and notes found so far."""

from dataclasses import dataclass, field
from pathlib import Path

from .messages import InputError, Problem, meant
from .units import Bare
from .yaml_tree import Path_, Tree


@dataclass
class Intake:
    """What every reader of a part gets: places of errors, the meaning of bare lengths, which files may be read."""

    tree: Tree
    bare: Bare
    crs: str
    allow_outside: bool = False
    problems: list[Problem] = field(default_factory=list)
    notes: list[str] = field(default_factory=list)

    def error(self, rule: str, text: str, path: Path_, help: str | None = None, *, key: bool = False) -> None:
        """Keep a problem at a path of the scenario file."""
        self.problems.append(self.tree.problem(rule, text, path, help, key=key))

    def note(self, text: str) -> None:
        """Keep a sentence on what was done to the input, once."""
        if text not in self.notes:
            self.notes.append(text)

    def file(self, name: str, path: Path_) -> Path | None:
        """The file a scenario names at a path; None (and a problem) where it may or can not be read."""
        folder = self.tree.file.resolve().parent
        try:
            found = (folder / name).resolve()
            inside, there, folderish = found.is_relative_to(folder), found.exists(), found.is_dir()
        except (OSError, ValueError) as error:  # too long, a NUL, a loop of links
            self.error("file", f"cannot look for the file {name!r}: {error}", path)
            return None
        if not inside and not self.allow_outside:
            self.error("outside-folder", f"{name!r} lies outside the scenario's folder {folder}", path,
                       "move it beside the scenario, or allow it with --allow-outside")  # fmt: skip
        elif not there:
            near = [p.name for p in found.parent.iterdir() if p.is_file()] if found.parent.is_dir() else []
            self.error("file", f"there is no file {name!r}", path, meant(found.name, sorted(near)[:20], "files there"))
        elif folderish:
            self.error("file", f"{name!r} is a folder, not a file", path)
        else:
            return found
        return None

    def finish(self) -> None:
        """Raise every problem found, the scenario's own first."""
        if self.problems:
            own = self.tree.file
            seen: dict[Problem, None] = dict.fromkeys(self.problems)
            raise InputError(sorted(seen, key=lambda p: (p.file != own, str(p.file), p.line or 0, p.column or 0)))
