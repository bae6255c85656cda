"""Labels on a map that overlap neither each other nor marks nor the frame: greedy placement by bounding boxes."""

from dataclasses import dataclass, field
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import RendererAgg
from matplotlib.patheffects import withStroke
from matplotlib.text import Text
from matplotlib.transforms import Bbox

_AROUND = [
    (1, 0.6),
    (1, -0.6),
    (-1, 0.6),
    (-1, -0.6),
    (0, 1),
    (0, -1),
    (1.6, 1.3),
    (-1.6, 1.3),
    (1.6, -1.3),
    (-1.6, -1.3),
]
_PAD = 1.0  # pixels kept free round a label


@dataclass
class Labels:
    """Places labels on an axes, in the order of their importance; keeps the boxes taken so far (pixels)."""

    axes: Axes
    renderer: RendererAgg
    taken: list[Bbox] = field(default_factory=list)

    def keep_free(self, x: float, y: float, points: float) -> None:
        """Reserve the place of a mark of some size (typographic points) at data coordinates x, y."""
        px, py = self.axes.transData.transform((x, y))
        r = 0.5 * points * self.axes.figure.dpi / 72.0
        self.taken.append(Bbox.from_extents(px - r, py - r, px + r, py + r))

    def beside(self, x: float, y: float, text: str, away: float, **style: Any) -> Text | None:
        """A label ``away`` points from a mark at x, y; None where no free place was found."""
        width, height = self._size(text, style)
        px, py = self.axes.transData.transform((x, y))
        per_point = self.axes.figure.dpi / 72.0
        for dx, dy in _AROUND:
            left = px + away * dx * per_point - width * (0.0 if dx > 0 else 1.0 if dx < 0 else 0.5)
            low = py + away * dy * per_point - height * (0.0 if dy > 0 else 1.0 if dy < 0 else 0.5)
            if self._take(Bbox.from_bounds(left, low, width, height)):
                across = "left" if dx > 0 else "right" if dx < 0 else "center"
                up = "bottom" if dy > 0 else "top" if dy < 0 else "center"
                return self.axes.annotate(
                    text, (x, y), (away * dx, away * dy), textcoords="offset points", ha=across, va=up,
                    path_effects=[withStroke(linewidth=2.0, foreground="white")], **style,
                )  # fmt: skip
        return None

    def centred(self, x: float, y: float, text: str, **style: Any) -> Text | None:
        """A label with its middle at x, y; None where that place is taken."""
        return self._turned(self.axes.transData.transform((x, y)), 0.0, self._size(text, style), text, style)

    def along(self, line: np.ndarray, text: str, candidates: int = 15, **style: Any) -> Text | None:
        """A label on a line (n, 2), turned with it, at the first of some evenly spread places that is free."""
        if len(line) < 2:
            return None
        pixels = self.axes.transData.transform(line)
        s = np.concatenate([[0.0], np.cumsum(np.hypot(*np.diff(pixels, axis=0).T))])
        if s[-1] < 30.0:
            return None
        size = self._size(text, style)
        shares = 0.5 + np.array([(-1) ** k * ((k + 1) // 2) / candidates for k in range(candidates)])
        for share in shares[(shares > 0.06) & (shares < 0.94)]:
            at = share * s[-1]
            ends = [np.array([np.interp(at + d, s, pixels[:, i]) for i in (0, 1)]) for d in (-12.0, 12.0)]
            angle = float(np.degrees(np.arctan2(*(ends[1] - ends[0])[::-1])))
            angle = (angle + 90.0) % 180.0 - 90.0
            placed = self._turned(0.5 * (ends[0] + ends[1]), angle, size, text, style)
            if placed is not None:
                return placed
        return None

    def _turned(
        self, pixel: np.ndarray, angle: float, size: tuple[float, float], text: str, style: dict[str, Any]
    ) -> Text | None:
        """A label about a pixel, turned by an angle (deg); None where that place is taken."""
        c, s = abs(np.cos(np.radians(angle))), abs(np.sin(np.radians(angle)))
        width, height = size[0] * c + size[1] * s, size[0] * s + size[1] * c
        if not self._take(Bbox.from_bounds(pixel[0] - 0.5 * width, pixel[1] - 0.5 * height, width, height)):
            return None
        x, y = self.axes.transData.inverted().transform(pixel)
        return self.axes.text(
            x, y, text, rotation=angle, rotation_mode="anchor", ha="center", va="center",
            path_effects=[withStroke(linewidth=2.2, foreground="white")], **style,
        )  # fmt: skip

    def _size(self, text: str, style: dict[str, Any]) -> tuple[float, float]:
        """Width and height (pixels) of a label lying level."""
        probe = self.axes.text(0.0, 0.0, text, **style)
        box = probe.get_window_extent(self.renderer)
        probe.remove()
        return float(box.width), float(box.height)

    def _take(self, box: Bbox) -> bool:
        """Take a place for a label unless another has it or it leaves the frame."""
        box = box.padded(_PAD)
        frame = self.axes.get_window_extent(self.renderer)
        if box.x0 < frame.x0 or box.x1 > frame.x1 or box.y0 < frame.y0 or box.y1 > frame.y1:
            return False
        if any(box.overlaps(other) for other in self.taken):
            return False
        self.taken.append(box)
        return True
