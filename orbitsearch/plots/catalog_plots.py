"""Figures of a catalogue: the law of periods, the starts of one set, the kinds of braids.

They are for finding one's way: a tap or a box selects, and every source with orbits has the column
`id`, by which a selection is carried from one figure to another.  Tens of thousands of points lie
on top of each other, so what a hover tells is about cells of the plane, each with all it holds.
"""

from __future__ import annotations

from collections.abc import Callable, Collection, Iterable, Sequence
from typing import Any

import numpy as np
from bokeh.layouts import gridplot
from bokeh.models import (
    BoxSelectTool,
    ColumnDataSource,
    FixedTicker,
    HoverTool,
    LayoutDOM,
    LinearColorMapper,
    NumeralTickFormatter,
    Range1d,
    TapTool,
)
from bokeh.models.annotations import ColorBar
from bokeh.models.renderers import GlyphRenderer
from bokeh.palettes import viridis
from bokeh.plotting import figure
from numpy.typing import ArrayLike

from orbitsearch import period_law
from orbitsearch.plots.style import (
    ACCENT,
    FONT,
    NEUTRAL,
    SERIES,
    TEXT_SIZE,
    Data,
    blank,
    dress_legend,
    source,
    span,
    span_model,
)
from orbitsearch.records import Kind, Record, StartPoint
from orbitsearch.starts import start_set
from orbitsearch.turns import cycle_text

__all__ = [
    "kinds_data",
    "kinds_figure",
    "law_data",
    "law_figure",
    "points_of",
    "starts_data",
    "starts_figure",
]

WIDTH = 640
# Cells that a hover tells of, along each axis: about as large as the mark under the pointer.
CELLS = (90, 60)
MANY = 3000
# Members that a hover names.
NAMED = 6

# The darkest of the scale would be lost on a dark page, the palest on a white one.
SHADES = viridis(256)[70:240]

# The two kinds of words, and how the law's points of each look.  Stable ones are filled.
WORDS = ("collinear start", "no collinear start")
BRAIDS = ("pseudo-Anosov", "reducible", "periodic")
LOOKS = dict(zip((*WORDS, *BRAIDS), (*SERIES[:2], *SERIES[:3]), strict=True))


def law_data(records: Iterable[Record]) -> Data:
    """Data of T* against the length of the word, and of their ratio.

    Parameters
    ----------
    records : iterable of Record

    Notes
    -----
    The published mean is about words of orbits with a collinear start; others are told apart by
    shape, and stable orbits are filled.
    """
    # Those that the law is about are drawn over the others, and stable ones, which are few, on top.
    rows = sorted(records, key=lambda r: (r.orbit.stability.stable, _has_collinear(r)))
    orbits = [record.orbit for record in rows]
    ids = [record.id for record in rows]
    names = [str(id) for id in ids]
    length = np.array([len(orbit.word) for orbit in orbits], dtype=np.float64)
    period = np.array([orbit.scaled_period for orbit in orbits], dtype=np.float64)
    stable = [orbit.stability.stable for orbit in orbits]
    ratio = np.divide(period, length, out=np.full(len(rows), np.nan), where=length > 0)
    words = [WORDS[not _has_collinear(record)] for record in rows]
    longest = float(length.max(initial=1.0))
    top = max(period.max(initial=1.0), longest * (period_law.MEAN + period_law.SPREAD))
    ratios = [*ratio[np.isfinite(ratio)].tolist(), *_law(1.0)]
    return {
        "law title": {"text": f"{len(rows):,} orbits, {sum(stable):,} stable"},
        "ratio title": {"text": ""},
        "law length range": span(0.0, longest, 0.03),
        "law period range": span(0.0, float(top), 0.03),
        "law ratio range": span(min(ratios), max(ratios), 0.08),
        "law orbits": {
            "id": ids,
            "length": length,
            "scaled_period": period,
            "ratio": ratio,
            "group": [f"{w}, stable" if s else w for w, s in zip(words, stable, strict=True)],
            **_look(words, stable),
        },
        "law band": {
            "length": [0.0, longest],
            **{
                name: [0.0, longest * factor]
                for name, factor in zip(("low", "mean", "high"), _law(1.0), strict=True)
            },
            **{
                f"{name}_ratio": [factor, factor]
                for name, factor in zip(("low", "mean", "high"), _law(1.0), strict=True)
            },
        },
        "law cells": _cells(names, length, period, ("word length {}", "T* {}")),
        "ratio cells": _cells(names, length, ratio, ("word length {}", "T*/L {}")),
    }


def _law(length: float) -> tuple[float, float, float]:
    """T* for a word of that length: the published mean less, without, and plus its spread."""
    mean, spread = period_law.MEAN, period_law.SPREAD
    return (mean - spread) * length, mean * length, (mean + spread) * length


def _has_collinear(record: Record) -> bool:
    orbit = record.orbit
    return orbit.start.kind == "collinear" or any(s.kind == "collinear" for s in orbit.starts)


def _look(names: Sequence[str], stable: Sequence[bool]) -> dict[str, list[Any]]:
    return {
        "marker": [LOOKS[name].marker for name in names],
        "colour": [LOOKS[name].colour for name in names],
        "inside": [0.9 if filled else 0.0 for filled in stable],
        "size": _sizes(stable, 6, 9),
    }


def _sizes(special: Sequence[bool], usual: int, large: int) -> list[int]:
    """Sizes of marks, smaller where there are many: they hide less and are drawn faster."""
    less = 2 if len(special) > MANY else 0
    return [(large if one else usual) - less for one in special]


def _cells(
    names: Sequence[str],
    x: ArrayLike,
    y: ArrayLike,
    texts: tuple[str, str],
    noun: str = "orbit",
    back: Callable[[Any], Any] = lambda value: value,
) -> dict[str, Any]:
    """Cells of a plane and what a hover tells of them; `back` takes y to what is on its axis."""
    across, up = np.asarray(x, dtype=np.float64), np.asarray(y, dtype=np.float64)
    rows = np.flatnonzero(np.isfinite(across) & np.isfinite(up))
    columns: dict[str, Any] = {
        key: [] for key in ("left", "right", "bottom", "top", "title", "tells")
    }
    if not len(rows):
        return columns
    across, up = across[rows], up[rows]
    (i, dx), (j, dy) = _bins(across, CELLS[0]), _bins(up, CELLS[1])
    order = np.lexsort((j, i))
    cell = (i * (CELLS[1] + 1) + j)[order]
    first = np.flatnonzero(np.diff(cell, prepend=cell[0] - 1))
    low_x, high_x = (f.reduceat(across[order], first) for f in (np.minimum, np.maximum))
    low_y, high_y = (f.reduceat(up[order], first) for f in (np.minimum, np.maximum))
    # About what is in it, not about its place in the grid: a lone mark is hit in its middle.
    x_middle, y_middle = 0.5 * (low_x + high_x), 0.5 * (low_y + high_y)
    columns["left"], columns["right"] = x_middle - 0.5 * dx, x_middle + 0.5 * dx
    columns["bottom"], columns["top"] = back(y_middle - 0.5 * dy), back(y_middle + 0.5 * dy)
    low_y, high_y = back(low_y), back(high_y)
    members = [group.tolist() for group in np.split(rows[order], first[1:])]
    columns["title"] = [_title([names[k] for k in group], noun) for group in members]
    columns["tells"] = [
        f"{texts[0].format(_between(a, b))}, {texts[1].format(_between(c, d))}"
        for a, b, c, d in zip(
            *(ends.tolist() for ends in (low_x, high_x, low_y, high_y)), strict=True
        )
    ]
    return columns


def _bins(values: np.ndarray[Any, Any], count: int) -> tuple[Any, float]:
    """Number of the bin of each value, and the width of a bin."""
    low, high = float(values.min()), float(values.max())
    width = (high - low) / count or 1.0
    return np.rint((values - low) / width).astype(np.int64), width


def _title(names: Sequence[str], noun: str) -> str:
    if len(names) == 1:
        return f"{noun} {names[0]}"
    return f"{len(names)} {noun}s: {', '.join(names[:NAMED])}{', ...' if names[NAMED:] else ''}"


def _between(low: float, high: float) -> str:
    one, other = f"{low:.6g}", f"{high:.6g}"
    return one if one == other else f"{one} to {other}"


def law_figure(data: Data) -> LayoutDOM:
    """T* against the length of the word, and below it their ratio.

    Taps and boxes select in both (source ``law orbits``).
    """
    lengths = span_model(data, "law length range")
    orbits, band = source(data, "law orbits"), source(data, "law band")
    law = _plane(
        data, "law", 380, ("", "T* = T |E|^(3/2)"), lengths, span_model(data, "law period range")
    )
    ratio = _plane(
        data,
        "ratio",
        170,
        ("length L of the free-group word", "T* / L"),
        lengths,
        span_model(data, "law ratio range"),
    )
    for plot, y, end in ((law, "scaled_period", ""), (ratio, "ratio", "_ratio")):
        points = _points(plot, orbits, "length", y)
        # Over the points, which would cover it where they are many; black on a white rim is seen
        # on any page and any number of points.
        plot.varea(
            "length", f"low{end}", f"high{end}", source=band, fill_color=NEUTRAL, fill_alpha=0.25
        )
        mean: dict[str, Any] = {"x": "length", "y": f"mean{end}", "source": band}
        plot.line(**mean, line_color="white", line_alpha=0.6, line_width=2.5)
        plot.line(**mean, line_color="black", line_dash="dashed", line_width=1.2)
        name = "law cells" if plot is law else "ratio cells"
        _add_tools(plot, points, source(data, name))
    ratio.legend.visible = False
    return gridplot([[law], [ratio]], toolbar_location="right", toolbar_options={"logo": None})


def points_of(records: Iterable[Record], start: str) -> list[StartPoint]:
    """Every start that the records have in a start set."""
    return [
        StartPoint(s.p, s.q, record.orbit.scaled_period, record.id)
        for record in records
        for s in record.orbit.starts or (record.orbit.start,)
        if s.kind == start
    ]


def starts_data(
    points: Iterable[StartPoint],
    start: str,
    stable: Collection[int] = (),
    window: tuple[float, float, float, float] | None = None,
) -> Data:
    """Data of the catalogued starts of one set.

    Parameters
    ----------
    points : iterable of StartPoint
        From `Catalog.starts` or `points_of`.
    start : str
        Name of the start set.
    stable : collection of int
        Records that are linearly stable.
    window : tuple of float, optional
        (p0, p1, q0, q1) to show; by default the window of the set and every start.
    """
    stable = frozenset(stable)
    rows = sorted(points, key=lambda point: point.orbit_id in stable)
    p, q, period = (
        np.array([getattr(point, name) for point in rows], dtype=np.float64)
        for name in ("p", "q", "scaled_period")
    )
    ids = [point.orbit_id for point in rows]
    low, high = (period.min(), period.max()) if rows else (0.0, 1.0)
    p0, p1, q0, q1 = start_set(start).window
    if window is None:
        window = (
            min(p.min(initial=p0), p0), max(p.max(initial=p1), p1),
            min(q.min(initial=q0), q0), max(q.max(initial=q1), q1),
        )  # fmt: skip
    letters = start_set(start).letters
    return {
        "starts title": {
            "text": f"{len(rows):,} {start} starts of {len(set(ids)):,} orbits, coloured by T*"
        },
        "starts p range": span(*window[:2], 0.02),
        "starts q range": span(*window[2:], 0.02),
        "starts p axis": {"axis_label": letters[0]},
        "starts q axis": {"axis_label": letters[1]},
        "starts colours": {"low": float(low), "high": float(max(high, low + 1e-9))},
        "starts orbits": {
            "id": ids,
            "p": p,
            "q": q,
            "scaled_period": period,
            "group": ["stable" if id in stable else "not stable" for id in ids],
            "marker": ["circle_dot" if id in stable else "circle" for id in ids],
            "size": _sizes([id in stable for id in ids], 7, 12),
        },
        "starts cells": _cells(
            [str(id) for id in ids], p, q, (letters[0] + " = {}", letters[1] + " = {}")
        ),
    }


def starts_figure(data: Data) -> LayoutDOM:
    """The plane of a start set with every catalogued start (source ``starts orbits``)."""
    plot = _plane(
        data,
        "starts",
        520,
        (data["starts p axis"]["axis_label"], data["starts q axis"]["axis_label"]),
        span_model(data, "starts p range"),
        span_model(data, "starts q range"),
    )
    plot.xaxis[0].name, plot.yaxis[0].name = "starts p axis", "starts q axis"
    mapper = _scale(plot, data, "starts colours")
    points = _points(
        plot, source(data, "starts orbits"), "p", "q",
        fill_color={"field": "scaled_period", "transform": mapper}, fill_alpha=1.0,
        line_color="black", line_width=0.6,
    )  # fmt: skip
    _add_tools(plot, points, source(data, "starts cells"))
    return plot


def kinds_data(kinds: Iterable[Kind]) -> Data:
    """Data of the braid types of a catalogue: how many orbits, and their shortest T*.

    Parameters
    ----------
    kinds : iterable of Kind
        From `Catalog.kinds`.

    Notes
    -----
    The `id` of a type is its orbit with the shortest T*; colours are entropies.
    """
    rows = sorted(kinds, key=lambda kind: bool(kind.stable))
    ids = [kind.orbit_id for kind in rows]
    shortest = np.array([kind.shortest for kind in rows], dtype=np.float64)
    count = np.array([kind.count for kind in rows], dtype=np.float64)
    names = [kind.braid.kind for kind in rows]
    stable = [kind.stable > 0 for kind in rows]
    entropy = [kind.braid.entropy for kind in rows]
    most = float(count.max(initial=2.0))
    return {
        "kinds title": {
            "text": f"{len(rows):,} braid types of {int(count.sum()):,} orbits, coloured by entropy"
        },
        "kinds period range": span(0.0, float(shortest.max(initial=1.0)), 0.03),
        # On a scale of logarithms a margin is a factor.
        "kinds count range": {"start": 0.7, "end": 1.5 * most}
        | {"reset_start": 0.7, "reset_end": 1.5 * most},
        "kinds ticks": {"ticks": [k * 10**n for n in range(6) for k in (1, 2, 5)]},
        "kinds colours": {"low": 0.0, "high": max(entropy, default=0.0) or 1.0},
        "kinds types": {
            "id": ids,
            "shortest": shortest,
            "count": count,
            "entropy": entropy,
            "braid": names,
            "cycle": [kind.braid.cycle for kind in rows],
            "exponent_sum": [kind.braid.exponent_sum for kind in rows],
            "group": [f"{n}, some stable" if s else n for n, s in zip(names, stable, strict=True)],
            "marker": [LOOKS[n].marker + "_dot" * s for n, s in zip(names, stable, strict=True)],
            "size": _sizes(stable, 9, 13),
        },
        "kinds cells": _cells(
            [_cut(cycle_text(kind.braid.cycle)) for kind in rows],
            shortest,
            np.log10(count),
            ("shortest T* {}", "orbits of the type: {}"),
            "braid",
            lambda value: 10**value,
        ),
    }


def _cut(text: str) -> str:
    return text if len(text) <= 30 else f"{text[:24]}... ({len(text)})"


def kinds_figure(data: Data) -> LayoutDOM:
    """Braid types: number of orbits against the shortest T* (source ``kinds types``)."""
    plot = _plane(
        data,
        "kinds",
        380,
        ("shortest T* of the type", "orbits of the type"),
        span_model(data, "kinds period range"),
        span_model(data, "kinds count range"),
        y_axis_type="log",
    )
    mapper = _scale(plot, data, "kinds colours")
    points = _points(
        plot, source(data, "kinds types"), "shortest", "count",
        fill_color={"field": "entropy", "transform": mapper}, fill_alpha=1.0,
        line_color="black", line_width=0.6,
    )  # fmt: skip
    plot.yaxis[0].ticker = FixedTicker(name="kinds ticks", **data["kinds ticks"])
    plot.yaxis[0].formatter = NumeralTickFormatter(format="0")
    _add_tools(plot, points, source(data, "kinds cells"))
    return plot


def _plane(
    data: Data,
    name: str,
    height: int,
    labels: tuple[str, str],
    across: Range1d,
    up: Range1d,
    **more: Any,
) -> figure:
    return blank(
        data, name, width=WIDTH, height=height, labels=labels, x_range=across, y_range=up, **more
    )


def _scale(plot: figure, data: Data, name: str) -> LinearColorMapper:
    """Mapper of that name, with its bar at the right of the plot."""
    mapper = LinearColorMapper(name=name, palette=SHADES, **data[name])
    bar = ColorBar(
        color_mapper=mapper, width=12, background_fill_color=None,
        major_label_text_color=NEUTRAL, major_label_text_font=FONT,
        major_label_text_font_size=TEXT_SIZE,
    )  # fmt: skip
    plot.add_layout(bar, "right")
    return mapper


def _points(
    plot: figure, orbits: ColumnDataSource, x: str, y: str, **look: Any
) -> GlyphRenderer[Any]:
    """Marks of orbits; selected ones stand out and the others stay as they are."""
    points = plot.scatter(
        x, y, source=orbits, marker="marker", size="size", legend_field="group",
        **{"line_color": "colour", "fill_color": "colour", "fill_alpha": "inside", **look},
    )  # fmt: skip
    points.nonselection_glyph = points.glyph.clone()
    points.selection_glyph = points.glyph.clone()
    points.selection_glyph.update(
        fill_color=ACCENT, fill_alpha=1.0, line_color="black", line_width=1.5, size=14
    )
    legend = plot.legend[0]
    dress_legend(legend)
    # One renderer has all entries: there is nothing to hide one by one.
    legend.update(click_policy="none", orientation="horizontal")
    # Above the plot it hides no point.
    plot.center.remove(legend)
    plot.add_layout(legend, "above")
    return points


def _add_tools(plot: figure, points: GlyphRenderer[Any], cells: ColumnDataSource) -> None:
    """Selection by tap and box, and a hover that tells of cells."""
    places = plot.quad(
        "left", "right", "top", "bottom", source=cells,
        fill_color=None, line_color=None,
    )  # fmt: skip
    hover = HoverTool(renderers=[places], tooltips=[("", "@title"), ("", "@tells")])
    plot.add_tools(TapTool(renderers=[points]), BoxSelectTool(renderers=[points]), hover)
