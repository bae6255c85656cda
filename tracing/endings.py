"""Why a pathline ends: a closed list, counted and reported by name."""

from enum import IntEnum


class Ending(IntEnum):
    """Reason for the end of a pathline; the value is what the integrator returns."""

    RUNNING = 0
    WELL = 1
    STREAM = 2
    LAKE = 3
    OUTLINE = 4
    DRAWN_AREA = 5
    STAGNATION = 6
    TIME = 7
    STEPS = 8
    DRY = 9
    NOT_FINITE = 10

    @property
    def words(self) -> str:
        """The reason as tables and maps print it."""
        return _WORDS[self]


_WORDS = {
    Ending.RUNNING: "still running",
    Ending.WELL: "reached a well",
    Ending.STREAM: "reached a stream",
    Ending.LAKE: "reached a lake",
    Ending.OUTLINE: "reached the outline",
    Ending.DRAWN_AREA: "left the area",
    Ending.STAGNATION: "came to rest",
    Ending.TIME: "time limit",
    Ending.STEPS: "step limit",
    Ending.DRY: "fell dry",
    Ending.NOT_FINITE: "not finite",
}
