"""The frame of a scenario: its coordinate system and the drawn box."""

import re

from .intake import Intake
from .scenario import Site
from .schema import DrawBox, SiteBlock

# common systems in longitude and latitude, refused by name; others show by their coordinates
_GEOGRAPHIC = {4019, 4152, 4167, 4171, 4202, 4230, 4258, 4267, 4269, 4277, 4283, 4312, 4313, 4314, 4326, 4490, 4612,
               4617, 4674, 4937, 4979, 6318, 6668, 7844}  # fmt: skip
_MARGIN = 0.1  # of the longer side, where no margin is stated


def read_crs(block: SiteBlock, intake: Intake) -> str:
    """The coordinate system, "local" or "EPSG:n"."""
    found = re.fullmatch(r"(?i)epsg:(\d{4,6})", block.crs.strip())
    if block.crs.strip() == "local":
        return "local"
    if found is None:
        intake.error("crs", f"site.crs: {block.crs!r} is not understood", ("site", "crs"), "write EPSG:n, or local")
        return "local"
    if int(found.group(1)) in _GEOGRAPHIC:
        intake.error("crs", f"site.crs: {block.crs} is in longitude and latitude", ("site", "crs"),
                     "choose a projected system, such as the UTM zone of the site")  # fmt: skip
    return f"EPSG:{found.group(1)}"


def read_site(
    block: SiteBlock, levels: list[tuple[float, float]], every: list[tuple[float, float]], intake: Intake
) -> Site | None:
    """The frame; None where it cannot be drawn.

    levels, every: places (x, y) in m that the drawn box may go round.
    """
    draw = block.draw
    if isinstance(draw, DrawBox):
        for axis in ("x", "y"):
            low, high = getattr(draw, axis)
            if not low < high:
                intake.error(
                    "range", f"site.draw.{axis}: the first end must be below the second", ("site", "draw", axis)
                )
                return None
        return Site(intake.crs, block.heights, block.period, *draw.x, *draw.y)
    around = levels if draw.around == "levels" else every
    if not around:
        if not intake.problems:  # else levels or lines were given, but could not be read
            intake.error("draw", f"there are no {draw.around if draw.around == 'levels' else 'places'} to draw around",
                         ("site",), "say what to draw: 'draw: {x: [a, b], y: [c, d]}'", key=True)  # fmt: skip
        return None
    xs, ys = [p[0] for p in around], [p[1] for p in around]
    by = draw.by if draw.by is not None else _MARGIN * max(max(xs) - min(xs), max(ys) - min(ys))
    if not by > 0:
        by = 500.0  # one place only: something must be seen round it
        intake.note("one place only: 500 m are drawn round it")
    return Site(intake.crs, block.heights, block.period, min(xs) - by, max(xs) + by, min(ys) - by, max(ys) + by)
