"""One map on one page: true to scale, readable in grey and for colour-blind eyes, legend outside the frame."""

from dataclasses import dataclass
from typing import Any

import matplotlib as mpl
import numpy as np
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import LinearSegmentedColormap
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Patch, PathPatch
from matplotlib.path import Path as Outline
from matplotlib.patheffects import withStroke

from .contours import contour_levels, contour_lines
from .labels import Labels
from .map_content import MapContent, ZoneMark

STYLE: Any = {
    "font.family": "DejaVu Sans", "font.size": 7.5, "axes.linewidth": 0.8, "svg.fonttype": "none",
    "hatch.linewidth": 0.35,
    "xtick.direction": "in", "ytick.direction": "in", "xtick.top": True, "ytick.right": True, "path.simplify": True,
}  # fmt: skip
PALE = LinearSegmentedColormap.from_list("pale", ["#f6f1e3", "#e3ecdf", "#c4dce0", "#a5c8dd"])
WATER, DEEP, LOSS, INK = "#d6e6f2", "#1b4f7a", "#a0522d", "#222222"
TIMES = [(0, (5, 2)), (0, (5, 1.5, 1, 1.5)), (0, (1.2, 1.4)), (0, (8, 2, 1, 1, 1, 2))]
DPI = 160  # of the PNG; texts are measured at the same
LANDSCAPE, PORTRAIT = (11.69, 8.27), (8.27, 11.69)  # A4, inches
TOP, SIDE = 0.62, 0.72  # inches above and beside the map
WIDE_LEGEND = 10.0  # inches that three columns of the legend take
ROW, LINE = 0.14, 0.113  # inches for a row of the legend and a line of the footer


def draw_map(content: MapContent) -> Figure:
    """The map of some content as a figure; nothing global is touched."""
    with mpl.rc_context(STYLE):
        figure = Figure(dpi=DPI)
        canvas = FigureCanvasAgg(figure)
        axes = figure.add_axes((0.1, 0.3, 0.8, 0.6))
        axes.set_autoscale_on(False)
        handles = _ground(axes, content)
        handles += _waters(axes, content)
        handles += _zones(axes, content)
        handles += _arrows(axes, content)
        handles += _marks(axes, content)
        # only now is it known how much room the legend takes; labels are placed on the finished frame
        page = _page(content, len(handles))
        figure.set_size_inches(page.width, page.height)
        _frame(axes, content.box, page)
        labels = Labels(axes, canvas.get_renderer())  # type: ignore[no-untyped-call]
        for x, y in [(w.x, w.y) for w in content.wells] + [(v.x, v.y) for v in content.levels]:
            labels.keep_free(x, y, 7.0)
        _names(labels, content)
        _margin(figure, axes, content, handles, page)
    return figure


@dataclass(frozen=True)
class Page:
    """The page's size in inches, the number of legend columns and the map's scale (inches per m)."""

    width: float
    height: float
    columns: int
    scale: float


def _page(content: MapContent, n_handles: int) -> Page:
    """The page (A4 less what would stay empty) at which the map comes out largest."""
    pages = [_fitted(content, n_handles, LANDSCAPE, 3), _fitted(content, n_handles, PORTRAIT, 2)]
    if pages[0].width < WIDE_LEGEND:  # no room for three columns
        pages[0] = _fitted(content, n_handles, LANDSCAPE, 2)
    return max(pages, key=lambda page: page.scale)


def _fitted(content: MapContent, n_handles: int, sheet: tuple[float, float], columns: int) -> Page:
    """A sheet trimmed round the map; never narrower than an upright A4, the width of two legend columns."""
    x0, x1, y0, y1 = content.box
    bottom = 0.42 + ROW * -(-n_handles // columns) + 0.18 + LINE * len(content.footer) + 0.14
    scale = min((sheet[0] - 2 * SIDE) / (x1 - x0), (sheet[1] - TOP - bottom) / (y1 - y0))
    width = max(scale * (x1 - x0) + 2 * SIDE, PORTRAIT[0])
    return Page(min(width, sheet[0]), min(scale * (y1 - y0) + TOP + bottom, sheet[1]), columns, scale)


def _frame(axes: Axes, box: tuple[float, float, float, float], page: Page) -> None:
    """Axes of equal scale that fill what the margins leave, centred across."""
    x0, x1, y0, y1 = box
    width, height = page.scale * (x1 - x0), page.scale * (y1 - y0)
    left = 0.5 * (page.width - width)
    low = page.height - TOP - height
    axes.set_position((left / page.width, low / page.height, width / page.width, height / page.height))
    axes.set_xlim(x0, x1)
    axes.set_ylim(y0, y1)
    axes.set_aspect("equal")
    for axis, low, high in ((axes.xaxis, x0, x1), (axes.yaxis, y0, y1)):
        step = _round_step((high - low) / 5.5)
        axis.set_ticks(np.arange(np.ceil(low / step), np.floor(high / step) + 0.5) * step + 0.0)
        axis.set_major_formatter(lambda value, _: f"{value + 0.0:,.0f}".replace(",", "\u2009"))
    axes.tick_params(axis="y", labelrotation=90)
    for label in axes.get_yticklabels():
        label.set_verticalalignment("center")
    axes.set_xlabel("x (m)", labelpad=1)
    axes.set_ylabel("y (m)", labelpad=3)


def _round_step(value: float) -> float:
    """The nearest of 1, 2, 5 x 10^n not above a value."""
    power = 10.0 ** np.floor(np.log10(value))
    return float(power * max(f for f in (1, 2, 5) if f * power <= value * 1.0001))


def _ground(axes: Axes, content: MapContent) -> list[Any]:
    """Heads as a pale fill and contour lines."""
    if content.head.size == 0 or not np.isfinite(content.head).any():
        return []
    low, high = float(np.nanmin(content.head)), float(np.nanmax(content.head))
    levels = contour_levels(low, high, content.interval)
    if high > low and len(levels):
        fill = np.concatenate([[levels[0] - content.interval], levels, [levels[-1] + content.interval]])
        axes.contourf(content.x, content.y, np.ma.masked_invalid(content.head), levels=fill, cmap=PALE, zorder=1)
    for level, line in contour_lines(content.x, content.y, content.head, levels):
        index = round(level / content.interval) % 5 == 0
        axes.plot(*line.T, color="#4a6572", lw=1.15 if index else 0.55, zorder=3, solid_capstyle="round")
    return [Line2D([], [], color="#4a6572", lw=0.8, label=f"head, every {content.interval:g} m")]


def _waters(axes: Axes, content: MapContent) -> list[Any]:
    handles: list[Any] = []
    for _, _, ring in content.lakes:
        axes.fill(*ring.T, facecolor=WATER, edgecolor=DEEP, lw=0.9, zorder=4)
    if content.lakes:
        handles.append(Patch(facecolor=WATER, edgecolor=DEEP, lw=0.9, label="lake, stage in m"))
    for _, line in content.streams:
        axes.plot(*line.T, color=DEEP, lw=0.9, zorder=4)
    if content.streams and not content.reaches:
        handles.append(Line2D([], [], color=DEEP, lw=0.9, label="stream"))
    kinds: dict[str, tuple[dict[str, Any], str]] = {
        "gains": ({"color": DEEP, "lw": 2.3, "ls": "-"}, "reach or shore that takes ground water"),
        "loses": ({"color": LOSS, "lw": 2.3, "ls": (0, (1.6, 1.0))}, "reach or shore that feeds the ground"),
    }
    for state, (style, words) in kinds.items():
        found = [r for r in content.reaches if r.state == state]
        for reach in found:
            axes.plot(*reach.line.T, zorder=5, solid_capstyle="butt", dash_capstyle="butt", **style)
        if found:
            handles.append(Line2D([], [], label=words, **style))
    if content.outline is not None:
        axes.plot(*content.outline.T, color="#555555", lw=1.6, ls=(0, (9, 2, 2, 2)), zorder=4)
        handles.append(
            Line2D([], [], color="#555555", lw=1.6, ls=(0, (9, 2, 2, 2)), label="outline, impermeable or given inflow")
        )
    return handles


def time_words(days: float) -> str:
    """A travel time as people say it."""
    years = days / 365.25
    return f"{years:g} yr" if years >= 1 and abs(years - round(years, 2)) < 1e-9 else f"{days:g} d"


def _zones(axes: Axes, content: MapContent) -> list[Any]:
    handles: list[Any] = []
    times = sorted({z.days for z in content.zones if z.days is not None})
    for zone in content.zones:
        if not zone.rings:
            continue
        if zone.days is None:
            axes.add_artist(PathPatch(_compound(zone), fill=False, hatch="///", ec="#00000055", lw=0, zorder=6))
            axes.add_artist(PathPatch(_compound(zone), fill=False, ec=INK, lw=1.9, joinstyle="round", zorder=7))
        else:
            style = TIMES[times.index(zone.days) % len(TIMES)]
            axes.add_artist(PathPatch(_compound(zone), fill=False, ec="white", lw=2.6, joinstyle="round", zorder=7))
            axes.add_artist(PathPatch(_compound(zone), fill=False, ec="#7b1e3a", lw=1.4, ls=style, zorder=8))
    if any(z.days is None for z in content.zones):
        words = "capture zone: some water, at some depth, goes to the well"
        handles.append(Patch(fill=False, hatch="////", ec=INK, lw=1.6, label=words))
    for k, days in enumerate(times):
        handles.append(
            Line2D([], [], color="#7b1e3a", lw=1.4, ls=TIMES[k % len(TIMES)], label=f"{time_words(days)} to the well")
        )
    if content.stagnation:
        axes.plot(*np.array(content.stagnation).T, "P", ms=5.5, mfc="white", mec=INK, mew=0.9, zorder=9)
        handles.append(Line2D([], [], ls="", marker="P", ms=5.5, mfc="white", mec=INK, label="stagnation point"))
    return handles


def _compound(zone: ZoneMark) -> Outline:
    return Outline.make_compound_path(*[Outline(ring, closed=True) for ring in zone.rings])


def _arrows(axes: Axes, content: MapContent) -> list[Any]:
    for path in content.arrows:
        line = path[:, :2]
        axes.plot(*line.T, color="#2f6b4f", lw=0.8, zorder=5)
        back = line[max(len(line) - 4, 0)] if len(line) > 2 else line[0]
        axes.annotate(
            "", line[-1], back, zorder=5,
            arrowprops={"arrowstyle": "-|>,head_width=0.16,head_length=0.34", "color": "#2f6b4f", "lw": 0.8,
                        "shrinkA": 0, "shrinkB": 0},
        )  # fmt: skip
    return (
        [Line2D([], [], color="#2f6b4f", lw=0.9, marker=">", ms=4, label="flow, all arrows one travel time")]
        if content.arrows
        else []
    )


def _marks(axes: Axes, content: MapContent) -> list[Any]:
    handles: list[Any] = []
    halo = [withStroke(linewidth=2.4, foreground="white")]
    for sign, marker, words in ((1, "h", "pumping well"), (-1, "s", "injecting well")):
        found = [w for w in content.wells if (w.rate > 0) == (sign > 0)]
        if found:
            style: dict[str, Any] = {"marker": marker, "ms": 7.5, "mfc": "#f2c14e", "mec": INK, "mew": 1.1, "ls": ""}
            axes.plot([w.x for w in found], [w.y for w in found], zorder=11, path_effects=halo, **style)
            handles.append(Line2D([], [], label=f"{words}, rate in m3/d", **style))
    largest = max([abs(v.residual) for v in content.levels if not v.left_out], default=0.0)
    for face, words, chosen in (
        (INK, "level above the computed head", [v for v in content.levels if not v.left_out and v.residual > 0]),
        ("white", "level below the computed head", [v for v in content.levels if not v.left_out and v.residual <= 0]),
    ):
        for v in chosen:
            size = 2.6 + 4.4 * np.sqrt(abs(v.residual) / largest) if largest > 0 else 3.0
            axes.plot([v.x], [v.y], "o", ms=size, mfc=face, mec=INK, mew=0.7, zorder=10)
        if chosen:
            handles.append(
                Line2D([], [], ls="", marker="o", ms=4.5, mfc=face, mec=INK, label=f"{words} (size: by how much)")
            )
    left = [v for v in content.levels if v.left_out]
    if left:
        axes.plot([v.x for v in left], [v.y for v in left], "x", ms=5, color="#777777", mew=1.2, zorder=10)
        handles.append(Line2D([], [], ls="", marker="x", ms=5, color="#777777", label="level left out of the fit"))
    for places, marker, words in ((content.summits, "^", "summit"), (content.basins, "v", "basin")):
        if places:
            xy = np.array(places)[:, :2]
            axes.plot(*xy.T, marker, ms=5.5, mfc="none", mec="#5b2a86", mew=1.2, zorder=9)
            handles.append(
                Line2D(
                    [], [], ls="", marker=marker, ms=5.5, mfc="none", mec="#5b2a86", label=f"{words} of the water table"
                )
            )
    return handles


def _names(labels: Labels, content: MapContent) -> None:
    """Text on the map, the most important first: wells, waters, times, contours, levels, summits."""
    for w in content.wells:
        labels.beside(w.x, w.y, f"{w.name}\n{abs(w.rate):.4g} m3/d", 6.5, fontsize=7.5, fontweight="bold", zorder=14)
    for name, stage, ring in content.lakes:
        x, y = ring.mean(axis=0)
        placed = labels.centred(x, y, f"{name}\n{stage:.2f}", fontsize=7.5, color=DEEP, style="italic", zorder=13)
        if placed is None:
            labels.along(
                np.concatenate([ring, ring[:1]]),
                f"{name} {stage:.2f}",
                fontsize=7,
                color=DEEP,
                style="italic",
                zorder=13,
            )
    for name, line in content.streams:
        labels.along(line, name, fontsize=7.5, color=DEEP, style="italic", zorder=13)
    for zone in sorted(content.zones, key=lambda z: -(z.days or 0.0)):
        if zone.days is not None and zone.rings:
            labels.along(max(zone.rings, key=len), time_words(zone.days), fontsize=6.5, color="#7b1e3a", zorder=13)
    if content.head.size and np.isfinite(content.head).any():
        levels = contour_levels(float(np.nanmin(content.head)), float(np.nanmax(content.head)), content.interval)
        decimals = max(0, -int(np.floor(np.log10(content.interval) + 1e-9)))
        lines = sorted(contour_lines(content.x, content.y, content.head, levels), key=lambda p: -len(p[1]))
        for level, line in lines:
            labels.along(line, f"{level:.{decimals}f}", fontsize=6.2, color="#33474f", zorder=12)
    for v in content.levels:
        labels.beside(v.x, v.y, f"{v.head:.2f}", 3.6, fontsize=5.8, color=INK, zorder=12)
    for x, y, head in (*content.summits, *content.basins):
        labels.beside(x, y, f"{head:.2f}", 4.0, fontsize=5.8, color="#5b2a86", zorder=12)


def _margin(figure: Figure, axes: Axes, content: MapContent, handles: list[Any], page: Page) -> None:
    """Title above; legend, scale bar, north arrow and footer below the frame."""
    frame = axes.get_position()
    title = figure.text(frame.x0, 1 - 0.26 / page.height, content.title, fontsize=12, fontweight="bold", va="top")
    width = title.get_window_extent(figure.canvas.get_renderer()).width  # type: ignore[attr-defined]
    room = figure.bbox.width * (0.98 * frame.x1 - frame.x0 - 0.2 * frame.width) - 0.7 * figure.dpi  # bar and arrow
    title.set_fontsize(12 * min(1.0, room / width))
    figure.text(frame.x0, 1 - 0.46 / page.height, content.case, fontsize=8, va="top", color="#444444")
    below = frame.y0 - 0.36 / page.height
    figure.legend(
        handles=handles, loc="upper left", bbox_to_anchor=(frame.x0 - 0.008, below), ncols=page.columns, frameon=False,
        fontsize=6.6, handlelength=3.4, columnspacing=1.4, labelspacing=0.45, borderaxespad=0.0,
    )  # fmt: skip
    _scale_bar(figure, axes, content, frame.x1, frame.y1 + 0.3 / page.height, page)
    figure.text(
        0.5 * SIDE / page.width,
        0.14 / page.height,
        "\n".join(content.footer),
        fontsize=5.8,
        va="bottom",
        color="#333333",
        linespacing=1.35,
    )
    if content.incomplete:
        axes.text(
            0.5, 0.5, "INCOMPLETE", transform=axes.transAxes, fontsize=46, color="#b0000088", ha="center", va="center",
            rotation=25, zorder=30, fontweight="bold",
        )  # fmt: skip


def _scale_bar(figure: Figure, axes: Axes, content: MapContent, right: float, y: float, page: Page) -> None:
    x0, x1, _, _ = content.box
    per_m = axes.get_position().width / (x1 - x0)
    length = _round_step(0.2 * (x1 - x0))
    left = right - length * per_m
    for k in range(4):
        a, b = left + k * length * per_m / 4, left + (k + 1) * length * per_m / 4
        figure.add_artist(Line2D([a, b], [y, y], color=INK if k % 2 == 0 else "#bbbbbb", lw=4, solid_capstyle="butt"))
    text = f"{length / 1000:g} km" if length >= 1000 else f"{length:g} m"
    figure.text(left, y - 0.14 / page.height, "0", fontsize=6.5, ha="center", va="top")
    figure.text(right, y - 0.14 / page.height, text, fontsize=6.5, ha="right", va="top")
    north = left - 0.35 / page.width
    figure.add_artist(Line2D([north, north], [y - 0.22 / page.height, y + 0.1 / page.height], color=INK, lw=1.0))
    figure.add_artist(Line2D([north], [y + 0.1 / page.height], color=INK, marker="^", ms=5))
    figure.text(north - 0.09 / page.width, y - 0.05 / page.height, "grid\nnorth", fontsize=5.5, ha="right", va="center")
