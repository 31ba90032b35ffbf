"""What all figures have in common: colours, frames, and how a figure is brought up to date.

A figure is made of three things: a function that computes its data, one that draws a layout from
data, and `update`, which gives a layout that was drawn before other data.  Data is a dictionary of
dictionaries.  Its keys are names of models in the layout; below the name of a ColumnDataSource are
all its columns, below the name of any other model are properties: the ends of a range, the text of
a title, the colour of a line.  All of it replaces what was there, so that nothing depends on what
was shown before, and sending it twice does no harm.

Whether the page is light or dark is not known here.  Backgrounds are left clear, and text and axes
have a grey of contrast 4:1 both on white and on #111111 (as WCAG 2.1 defines contrast); lines and
marks reach 3:1 on both.  The colours for bodies are three of the set of M. Okabe & K. Ito (2008,
from memory), made for colour-blind readers; the others were darkened until they reach that
contrast.  No difference rests on colour alone: marks and dashes differ, too.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any, NamedTuple

import numpy as np
from bokeh.models import ColumnDataSource, InlineStyleSheet, LayoutDOM, Range1d
from bokeh.models.annotations import Legend, Title
from bokeh.plotting import figure
from numpy.typing import ArrayLike, NDArray

from orbitsearch.errors import BadRequest

__all__ = [
    "ACCENT",
    "BODIES",
    "NEUTRAL",
    "PAIRS",
    "SERIES",
    "Data",
    "Look",
    "blank",
    "controls",
    "described",
    "dress_legend",
    "equal_spans",
    "places",
    "source",
    "span",
    "span_model",
    "update",
]

Data = dict[str, dict[str, Any]]
"""Name of a model in the layout -> all its columns, or its properties."""

NEUTRAL = "#777777"
"""Text, axes, and curves that belong to no body in particular."""
ACCENT = "#b4508f"
"""The one thing to look at where no body is meant."""

FONT = "sans-serif"
TEXT_SIZE = "12px"
TITLE_SIZE = "13px"


class Look(NamedTuple):
    """How one of several alike things is told from the others."""

    label: str
    colour: str
    marker: str
    dash: str


BODIES = (
    Look("1", "#0072b2", "circle", "solid"),
    Look("2", "#d55e00", "square", "dashed"),
    Look("3", "#009e73", "triangle", "dotted"),
)
"""Bodies 1, 2, 3.  Black on any of the colours has contrast 4:1."""

PAIRS = (
    Look("12", "#b4508f", "diamond", "solid"),
    Look("23", "#9a7000", "hex", "dashed"),
    Look("31", "#777777", "inverted_triangle", "dotted"),
)
"""Pairs of bodies."""

SERIES = (
    Look("", "#0072b2", "circle", "solid"),
    Look("", "#d55e00", "square", "dashed"),
    Look("", "#009e73", "triangle", "dotted"),
    Look("", "#b4508f", "diamond", "dotdash"),
    Look("", "#9a7000", "inverted_triangle", "dashdot"),
    Look("", "#777777", "cross", "solid"),
)
"""Classes of anything else, in the order in which they should be taken."""


def source(data: Data, name: str) -> ColumnDataSource:
    """Column data source of that name with its columns."""
    return ColumnDataSource(name=name, data=data[name])


def places(values: ArrayLike) -> NDArray[np.float32]:
    """Column of places on the screen, which single precision is enough for; never shared.

    The browser writes into columns, and half the size is half the wait.
    """
    return np.array(values, dtype=np.float32)


def span(low: float, high: float, margin: float = 0.05) -> dict[str, float]:
    """Properties of a range from low to high and a margin, a share of the length, on both sides.

    Examples
    --------
    >>> span(0.0, 10.0, margin=0.1)
    {'start': -1.0, 'end': 11.0, 'reset_start': -1.0, 'reset_end': 11.0}
    """
    room = margin * ((high - low) or 1.0)
    start, end = float(low - room), float(high + room)
    # Without the last two the reset tool would return to the range of the first data ever shown.
    return {"start": start, "end": end, "reset_start": start, "reset_end": end}


def equal_spans(
    x: ArrayLike, y: ArrayLike, margin: float = 0.05
) -> tuple[dict[str, float], dict[str, float]]:
    """Ranges of equal length for x and y, so that a square frame has equal scales.

    Examples
    --------
    >>> x, y = equal_spans([0.0, 4.0], [5.0, 7.0], margin=0.0)
    >>> (x["start"], x["end"]), (y["start"], y["end"])
    ((0.0, 4.0), (4.0, 8.0))
    """
    ends = [(float(np.nanmin(v)), float(np.nanmax(v))) for v in (x, y)]
    half = 0.5 * max(high - low for low, high in ends) or 1.0
    centres = [0.5 * (low + high) for low, high in ends]
    across, up = (span(centre - half, centre + half, margin) for centre in centres)
    return across, up


def span_model(data: Data, name: str) -> Range1d:
    """Range of that name with its ends."""
    return Range1d(name=name, **data[name])


def blank(
    data: Data,
    name: str,
    *,
    width: int,
    height: int,
    labels: tuple[str, str],
    tools: str = "pan,box_zoom,wheel_zoom,reset,save",
    **ranges: Any,
) -> figure:
    """Empty figure that can stand on any background.

    Parameters
    ----------
    data : dict
        Has the text of the title under ``"<name> title"``.
    name : str
        The figure is called ``"<name> figure"``; a source may have the name alone.
    width, height : int
        Of the frame inside the axes, in pixels.
    labels : tuple of str
        What is on the two axes, with units.
    tools : str
        The first of them that answers to a drag is on, wheel zoom is not: a notebook scrolls.
    **ranges
        Further properties of a Bokeh figure.
    """
    plot = figure(
        name=f"{name} figure",
        frame_width=width,
        frame_height=height,
        tools=tools,
        x_axis_label=labels[0],
        y_axis_label=labels[1],
        **ranges,
    )
    plot.title = Title(
        name=f"{name} title",
        text_color=NEUTRAL,
        text_font=FONT,
        text_font_size=TITLE_SIZE,
        **data[f"{name} title"],
    )
    plot.background_fill_color = plot.border_fill_color = None
    plot.outline_line_color = NEUTRAL
    plot.outline_line_alpha = 0.4
    plot.toolbar.logo = None
    _dress_axes(plot)
    return plot


def _dress_axes(plot: figure) -> None:
    for axis in plot.axis:
        axis.axis_line_color = axis.major_tick_line_color = NEUTRAL
        axis.minor_tick_line_color = None
        axis.axis_label_text_color = axis.major_label_text_color = NEUTRAL
        axis.axis_label_text_font = axis.major_label_text_font = FONT
        axis.axis_label_text_font_size = axis.major_label_text_font_size = TEXT_SIZE
        axis.axis_label_text_font_style = "normal"
    for grid in plot.grid:
        grid.grid_line_color = NEUTRAL
        grid.grid_line_alpha = 0.2


def dress_legend(legend: Legend) -> None:
    """Make a legend legible on any background; a click on an entry hides what it stands for."""
    legend.update(
        background_fill_color=None,
        border_line_color=None,
        label_text_color=NEUTRAL,
        label_text_font=FONT,
        label_text_font_size=TEXT_SIZE,
        click_policy="hide",
        margin=4,
        padding=4,
    )


def controls() -> InlineStyleSheet:
    """Style sheet for sliders, buttons and menus; every control needs one of its own."""
    # A border for what has the focus of the keyboard, which must be seen on any background.
    return InlineStyleSheet(
        css=f"""
        :host {{ color: {NEUTRAL}; font-family: {FONT}; font-size: {TEXT_SIZE}; }}
        .bk-slider-title, label {{ color: {NEUTRAL}; }}
        .bk-btn {{ color: {NEUTRAL}; background: transparent; border: 1px solid {NEUTRAL}; }}
        .bk-btn.bk-active {{ color: {ACCENT}; border-color: {ACCENT}; background: transparent; }}
        .noUi-target {{ background: {NEUTRAL}40; border-color: {NEUTRAL}; box-shadow: none; }}
        .noUi-handle {{ background: {NEUTRAL}; border-color: {NEUTRAL}; box-shadow: none; }}
        .bk-btn:focus-visible, .noUi-handle:focus-visible {{
            outline: 2px solid {ACCENT}; outline-offset: 1px;
        }}
        """
    )


def described(name: str, description: str) -> dict[str, Any]:
    """Properties of a control: its name, its look, and what it does in a sentence.

    The sentence is shown when the pointer rests on it, and read out to who cannot see it.
    """
    return {
        "name": name,
        "stylesheets": [controls()],
        "html_attributes": {"title": description, "role": "group", "aria-label": description},
    }


def update(layout: LayoutDOM, data: Data) -> None:
    """Bring a layout up to date with other data.

    Parameters
    ----------
    layout : LayoutDOM
        As a figure function made it, or a layout that holds several such.
    data : dict
        As the data function of the same figure makes it; whole, not what is new.

    Raises
    ------
    BadRequest
        When the layout has no model of one of the names.

    Examples
    --------
    >>> columns = ColumnDataSource(name="points", data={"x": [1.0], "y": [2.0]})
    >>> plot = figure(width=100, height=100)
    >>> dots = plot.scatter("x", "y", source=columns)
    >>> update(plot, {"points": {"x": [3.0, 4.0], "y": [5.0, 6.0]}})
    >>> columns.data["x"]
    [3.0, 4.0]
    """
    named: dict[str, list[Any]] = {}
    for model in _models(layout):
        if model.name is not None:
            named.setdefault(model.name, []).append(model)
    _refuse_missing(data, named)
    # In the order of the data: sources that the browser answers to come last (see `clock`).
    for name, values in data.items():
        for model in named[name]:
            if isinstance(model, ColumnDataSource):
                model.data = dict(values)
            else:
                model.update(**values)


def _models(layout: LayoutDOM) -> Iterable[Any]:
    """All models in a layout."""
    document = layout.document
    # A document knows its models; to find them by going through the layout takes 25 ms.
    if document is not None and document.roots == [layout]:
        return document.models
    return layout.references()


def _refuse_missing(wanted: Iterable[str], named: Mapping[str, Any]) -> None:
    missing = [name for name in wanted if name not in named]
    if missing:
        raise BadRequest(
            f"`layout` must have been made from data of the same kind, it has nothing called "
            f"{', '.join(missing)}: give the layout that the figure function of this data returned"
        )
