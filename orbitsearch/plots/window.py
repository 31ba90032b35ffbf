"""The map of a search window: what became of every start, and where orbits were found.

The plane is that of the two parameters of a start set, the first to the right and the second
upwards.  Every start is one pixel whose centre is the start itself.  A map fills tile by tile while
a search runs; what is not done yet stays hatched.

All layers share one palette: level 0 is clear, the next ones are the endings, the rest is a scale.
So a layer is no more than another array of bytes, and changing it changes no mapper.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from bokeh.layouts import row
from bokeh.models import (
    BoxSelectTool,
    CustomJSHover,
    HoverTool,
    Image,
    LayoutDOM,
    LinearColorMapper,
    Range1d,
    TapTool,
)
from bokeh.models.renderers import GlyphRenderer
from bokeh.palettes import viridis
from bokeh.plotting import figure
from numpy.typing import NDArray

from orbitsearch.errors import BadRequest
from orbitsearch.orbit import Status
from orbitsearch.plots.style import (
    ACCENT,
    NEUTRAL,
    SERIES,
    TEXT_SIZE,
    Data,
    blank,
    source,
    span,
    span_model,
)
from orbitsearch.plots.window_map import NOT_YET, WindowMap
from orbitsearch.records import Record
from orbitsearch.starts import start_set

__all__ = [
    "LAYERS",
    "STATES",
    "Mark",
    "chosen_data",
    "map_data",
    "marks_data",
    "marks_of",
    "nearest_mark",
    "window_data",
    "window_figure",
]

LAYERS = {
    "outcome": "how it ended",
    "together": "together for, t |E|^(3/2)",
    "syzygies": "alignments",
    "approach": "closest approach, log₁₀",
}
"""Name of each layer, and what heads its legend."""

# The palette: nothing, five endings, and a scale of the remaining levels.
ENDINGS = ("stayed together", "a body escapes", "close approach", "out of steps", "no such start")
NO_START = len(ENDINGS)
FIRST = NO_START + 1
SHADES = 256 - FIRST
PALETTE = ["rgba(0, 0, 0, 0)", *(look.colour for look in SERIES[:4]), "#a0a0a0", *viridis(SHADES)]
LEVEL_OF = {Status.CONVERGED: 1, Status.ESCAPE: 2, Status.COLLISION: 3, Status.BUDGET: 4}

# What a mark can stand for: its shape, size and inside.
MARK_LOOKS = {
    "new": ("star", 16, "#ffb000"),
    "known": ("circle", 8, "white"),
    "not confirmed": ("triangle", 11, "white"),
    "rejected": ("x", 9, "white"),
}
STATES = tuple(MARK_LOOKS)
"""What a mark can stand for; each has a shape of its own."""

# What is where in the legend: the bar from the bottom up, what comes after it, the heading.
BAR = (0.38, 0.93)
AFTER_BAR = 0.15
HEADING = 0.97
MARGIN = 0.01

OPEN: dict[str, Any] = {"fill_color": None}
RIM: dict[str, Any] = {"line_color": "white", "line_width": 4}
LINE: dict[str, Any] = {"line_color": "black", "line_width": 1.4}
HATCHED: dict[str, Any] = {
    "fill_color": None,
    "line_color": NEUTRAL,
    "line_alpha": 0.6,
    "hatch_pattern": "/",
    "hatch_color": NEUTRAL,
    "hatch_alpha": 0.5,
    "hatch_scale": 10,
    "hatch_weight": 1,
}


@dataclass(frozen=True)
class _Scale:
    """What levels mean: the bar of the legend from the bottom up, its labels, a text a level."""

    bar: NDArray[np.uint8]
    heights: list[float]
    labels: list[str]
    texts: list[str]


@dataclass(frozen=True)
class Mark:
    """An orbit on the map: where it starts, one of `STATES`, and what a hover tells of it."""

    p: float
    q: float
    state: str
    id: int | None = None
    scaled_period: float = math.nan
    word: str = ""

    def __post_init__(self) -> None:
        if self.state not in STATES:
            raise BadRequest(f"`state` must be one of {', '.join(STATES)}: {self.state!r}")


def marks_of(records: Iterable[Record], start: str, state: str = "known") -> list[Mark]:
    """Marks for every start that the records have in a start set."""
    return [
        Mark(s.p, s.q, state, record.id, record.orbit.scaled_period, record.orbit.word)
        for record in records
        for s in record.orbit.starts or (record.orbit.start,)
        if s.kind == start
    ]


def nearest_mark(
    marks: Sequence[Mark], x: float, y: float, reach: tuple[float, float]
) -> int | None:
    """Which mark a tap at (x, y) means.

    Parameters
    ----------
    marks : sequence of Mark
    x, y : float
        Coordinates of the tap.
    reach : tuple of float
        Half axes of the ellipse around the tap in which a mark is looked for, such as a fiftieth
        of the shown ranges.

    Returns
    -------
    int or None
        Index of the nearest one, as the eye measures: over `reach`.
    """
    if not marks:
        return None
    places = np.array([(mark.p, mark.q) for mark in marks])
    distance = np.hypot(*((places - (x, y)) / reach).T)
    nearest = int(distance.argmin())
    return nearest if distance[nearest] <= 1.0 else None


def window_data(
    seen: WindowMap,
    layer: str = "outcome",
    marks: Sequence[Mark] = (),
    chosen: tuple[float, float] | None = None,
) -> Data:
    """Data of the window's figure, its ranges included.

    Parameters
    ----------
    seen : WindowMap
    layer : str
        One of `LAYERS`.
    marks : sequence of Mark
    chosen : tuple of float, optional
        The start to work on, marked with a cross.

    Notes
    -----
    While a search runs, update with `map_data`, `marks_data` and `chosen_data`, its parts, which
    leave the ranges where the user has moved them.
    """
    p0, p1, q0, q1 = seen.window
    # The starts on the edge are whole pixels.
    half_p, half_q = (0.5 * pitch for pitch in seen.pitch)
    left, right, bottom, top = p0 - half_p, p1 + half_p, q0 - half_q, q1 + half_q
    letters = start_set(seen.start).letters
    return {
        "window p range": span(left, right, MARGIN),
        "window q range": span(bottom, top, MARGIN),
        "window p axis": {"axis_label": letters[0]},
        "window q axis": {"axis_label": letters[1]},
        "window frame": {"left": [left], "right": [right], "bottom": [bottom], "top": [top]},
        **map_data(seen, layer),
        **marks_data(marks),
        **chosen_data(chosen),
    }


def map_data(seen: WindowMap, layer: str = "outcome") -> Data:
    """Data of the map itself and of its legend alone; see `window_data`."""
    levels, scale = _levels(seen, layer)
    p0, _, q0, _ = seen.window
    pitch_p, pitch_q = seen.pitch
    done, of = int((seen.status != NOT_YET).sum()), seen.status.size
    shown = "" if seen.stride == (1, 1) else " (of a finer grid)"
    return {
        "window title": {"text": f"{seen.start} starts, {done:,} of {of:,}{shown}"},
        "window map": {
            # An image has its rows from the bottom up, so q goes by row.
            "image": [np.ascontiguousarray(levels.T)],
            "x": [p0 - 0.5 * pitch_p],
            "y": [q0 - 0.5 * pitch_q],
            "dw": [pitch_p * levels.shape[0]],
            "dh": [pitch_q * levels.shape[1]],
        },
        "window levels": {"text": scale.texts},
        "window bar": {"image": [scale.bar[:, None]]},
        "window labels": {
            "y": [*scale.heights, HEADING],
            "x": [AFTER_BAR] * len(scale.heights) + [0.0],
            "text": [*scale.labels, LAYERS[layer]],
        },
    }


def marks_data(marks: Sequence[Mark]) -> Data:
    """Source ``window marks`` alone, a row a mark in their order; `id` is 0 where there is none."""
    return {
        "window marks": {
            "id": [mark.id or 0 for mark in marks],
            "p": [mark.p for mark in marks],
            "q": [mark.q for mark in marks],
            "state": [mark.state for mark in marks],
            "scaled_period": [mark.scaled_period for mark in marks],
            "word": [mark.word for mark in marks],
            **_mark_look([mark.state for mark in marks]),
            "title": [f"{mark.id or 'start'}, {mark.state}" for mark in marks],
            "tells": [_tells(mark) for mark in marks],
        }
    }


def _mark_look(states: Sequence[str]) -> dict[str, list[Any]]:
    looks = [MARK_LOOKS[state] for state in states]
    return {
        "marker": [marker for marker, _, _ in looks],
        "size": [size for _, size, _ in looks],
        "fill": [fill for _, _, fill in looks],
    }


def _tells(mark: Mark) -> str:
    period = "" if math.isnan(mark.scaled_period) else f"T* = {mark.scaled_period:.6g}"
    word = mark.word if len(mark.word) <= 30 else f"{mark.word[:24]}... ({len(mark.word)})"
    return "  ".join(filter(None, [period, word]))


def chosen_data(chosen: tuple[float, float] | None) -> Data:
    """Source ``window chosen`` alone: the start to work on, or no row."""
    p, q = ([], []) if chosen is None else ([chosen[0]], [chosen[1]])
    return {"window chosen": {"p": p, "q": q}}


def _ending_levels(status: NDArray[np.int64]) -> NDArray[np.uint8]:
    # Whoever has outcomes has loaded the solver; drawing an old map need not.
    from orbitsearch import flow

    levels = np.zeros(status.shape, np.uint8)
    levels[status == -1] = NO_START
    for code, meaning in flow.STATUS.items():
        levels[status == code] = LEVEL_OF[meaning]
    return levels


def _endings(levels: NDArray[np.uint8]) -> _Scale:
    """What levels of the outcome mean, with the share of each ending."""
    count = np.bincount(levels.ravel(), minlength=256)
    done = max(1, int(count[1:FIRST].sum()))
    labels = [
        f"{name}  {100 * n / done:.0f} %" for name, n in zip(ENDINGS, count[1:], strict=False)
    ]
    bar = np.arange(1, FIRST, dtype=np.uint8)[::-1]
    heights = [_height((k + 0.5) / len(bar)) for k in range(len(bar))]
    return _Scale(bar, heights, labels[::-1], _texts())


def _scale(low: float, high: float, *, whole: bool) -> _Scale:
    """What levels of a scale mean, with labels at round numbers."""
    step = 10.0 ** math.floor(math.log10((high - low) / 3))
    step *= next(k for k in (1, 2, 5, 10) if k * step * 6 >= high - low)
    if whole:
        step = max(1.0, step)
    ticks = np.arange(math.ceil(low / step), math.floor(high / step) + 1) * step
    middle = low + (np.arange(SHADES) + 0.5) / SHADES * (high - low)
    return _Scale(
        np.arange(FIRST, 256, dtype=np.uint8),
        [_height((tick - low) / (high - low)) for tick in ticks.tolist()],
        [f"{tick:.6g}" for tick in ticks.tolist()],
        _texts(f"{value:.0f}" if whole else f"{value:.3g}" for value in middle.tolist()),
    )


def _texts(shades: Iterable[str] = ()) -> list[str]:
    texts = ["not done yet", *ENDINGS, *shades]
    return texts + [""] * (256 - len(texts))


def _height(part: float) -> float:
    """Where a part of the legend's bar is in the legend, 0 at the bottom and 1 at the top."""
    return BAR[0] + part * (BAR[1] - BAR[0])


def _levels(seen: WindowMap, layer: str) -> tuple[NDArray[np.uint8], _Scale]:
    """Levels of the palette, shape (n, m), and what they mean."""
    levels = _ending_levels(seen.status)
    if layer == "outcome":
        return levels, _endings(levels)
    known = (levels > 0) & (levels < NO_START)
    value, low, high = _values(seen, layer, known)
    part = (np.clip(value, low, high) - low) / (high - low)
    levels[known] = FIRST + np.minimum(part * SHADES, SHADES - 1).astype(np.uint8)
    return levels, _scale(low, high, whole=layer == "syzygies")


def _values(
    seen: WindowMap, layer: str, known: NDArray[np.bool_]
) -> tuple[NDArray[np.float64], float, float]:
    """Values of a layer where it is known, and the two ends of its scale."""
    # Colours should keep their meaning while the map fills: ends are fixed, or rounded outwards.
    if layer == "together":
        return seen.lifetime[known], 0.0, seen.horizon
    if layer == "syzygies":
        count = seen.alignments[known].astype(np.float64)
        return count, 0.0, 10.0 * math.ceil(max(1.0, count.max(initial=0.0)) / 10)
    if layer == "approach":
        value = np.log10(np.maximum(seen.nearest[known], 1e-99))
        return value, min(-1.0, math.floor(value.min(initial=0.0))), 0.0
    raise BadRequest(f"`layer` must be one of {', '.join(LAYERS)}: {layer!r}")


def window_figure(data: Data) -> LayoutDOM:
    """Map and legend, with tap and box select.

    A tap selects a mark (source ``window marks``) and, wherever it is, sends `bokeh.events.Tap`
    with the coordinates from the figure called ``window figure``.  A box drawn with box select
    stays and sends `bokeh.events.SelectionGeometry` with a geometry of type ``rect``; a tap sends
    one, too, of type ``point``.
    """
    plot = blank(
        data,
        "window",
        width=560,
        height=520,
        labels=(data["window p axis"]["axis_label"], data["window q axis"]["axis_label"]),
        x_range=span_model(data, "window p range"),
        y_range=span_model(data, "window q range"),
    )
    plot.xaxis[0].name, plot.yaxis[0].name = "window p axis", "window q axis"
    plot.grid.visible = False
    plot.quad(source=source(data, "window frame"), **HATCHED)
    # Level k has colour k: each is the middle of its share of the palette.
    mapper = LinearColorMapper(palette=PALETTE, low=-0.5, high=255.5)
    picture = plot.add_glyph(source(data, "window map"), Image(color_mapper=mapper))
    marks = _draw_marks(plot, data)
    cross: dict[str, Any] = {"source": source(data, "window chosen"), "marker": "circle_cross"}
    plot.scatter("p", "q", **cross, **OPEN, size=26, line_color="white", line_width=5)
    plot.scatter("p", "q", **cross, **OPEN, size=26, line_color="black", line_width=2)
    _add_tools(plot, data, marks, picture)
    return row(plot, _legend(data, mapper))


def _draw_marks(plot: figure, data: Data) -> GlyphRenderer[Any]:
    columns = source(data, "window marks")
    look: dict[str, Any] = {"source": columns, "marker": "marker", "size": "size"}
    # The rim shows shapes without an inside on dark pixels, and stays when others are selected.
    plot.scatter("p", "q", **look, **OPEN, **RIM, nonselection_line_alpha=1.0)
    return plot.scatter(
        "p", "q", **look, **LINE,
        fill_color="fill", selection_fill_color=ACCENT,
        nonselection_fill_alpha=1.0, nonselection_line_alpha=1.0,
    )  # fmt: skip


def _add_tools(
    plot: figure, data: Data, marks: GlyphRenderer[Any], picture: GlyphRenderer[Any]
) -> None:
    levels = CustomJSHover(
        args={"levels": source(data, "window levels")}, code="return levels.data.text[value]"
    )
    tell_mark = HoverTool(
        renderers=[marks], tooltips=[("", "@title"), ("", "@tells")], description="Marks"
    )
    tell_start = HoverTool(
        renderers=[picture],
        tooltips=[("", "($x{0.000000}, $y{0.000000})"), ("", "@image{custom}")],
        formatters={"@image": levels},
        description="Starts",
    )
    # A box means a part of the window, not the marks in it.
    box = BoxSelectTool(renderers=[], persistent=True, description="Choose a part of the window")
    box.overlay.update(
        line_color=ACCENT, line_width=3, line_dash="solid", fill_color="white", fill_alpha=0.25
    )
    plot.add_tools(TapTool(renderers=[marks]), box, tell_mark, tell_start)
    plot.toolbar.active_inspect = [tell_mark]


def _legend(data: Data, mapper: LinearColorMapper) -> figure:
    """What colours and marks mean, in a strip beside the map."""
    strip = figure(
        frame_width=170, frame_height=520, toolbar_location=None, tools="",
        x_range=Range1d(start=0, end=1), y_range=Range1d(start=0, end=1),
    )  # fmt: skip
    strip.background_fill_color = strip.border_fill_color = strip.outline_line_color = None
    strip.axis.visible = strip.grid.visible = False
    bar = Image(x=0, y=BAR[0], dw=AFTER_BAR - 0.05, dh=BAR[1] - BAR[0], color_mapper=mapper)
    strip.add_glyph(source(data, "window bar"), bar)
    text: dict[str, Any] = {
        "text_color": NEUTRAL, "text_font_size": TEXT_SIZE, "text_baseline": "middle"
    }  # fmt: skip
    strip.text("x", "y", source=source(data, "window labels"), **text)
    strip.quad(left=0, right=AFTER_BAR - 0.05, bottom=0.26, top=0.30, **HATCHED)
    heights = [0.05 * k for k in range(len(STATES), 0, -1)]
    look = _mark_look(STATES)
    shapes: dict[str, Any] = {"marker": look["marker"], "size": look["size"]}
    at = [0.5 * (AFTER_BAR - 0.05)] * len(STATES)
    strip.scatter(at, heights, **shapes, **OPEN, **RIM)
    strip.scatter(at, heights, **shapes, **LINE, fill_color=look["fill"])
    strip.text(AFTER_BAR, [*heights, 0.28], text=[*STATES, "not done yet"], **text)
    return strip
