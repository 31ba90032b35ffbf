"""Floquet multipliers of an orbit against the unit circle.

A multiplier λ is drawn in its own direction, at the radius 1 + log10 |λ| / D.  So the unit circle
is a circle of radius 1 whatever the scale, λ and 1/λ are equally far from it, and multipliers of
1e40 have a place.  D is chosen so that all fit; the rings say what they stand for.

The two pairs come from their traces: with λ + 1/λ = 2 cosh w, w is the logarithm of λ, and neither
huge multipliers overflow nor do those on the circle leave it by rounding.
"""

from __future__ import annotations

import cmath
import math
from typing import Any

import numpy as np
from bokeh.core.properties import value
from bokeh.models import ColumnDataSource, LayoutDOM, Range1d
from bokeh.models.annotations import Title
from bokeh.models.tools import HoverTool
from bokeh.plotting import figure

from orbitsearch.orbit import Orbit, Stability
from orbitsearch.plots import style

__all__ = ["multipliers", "multipliers_data", "multipliers_figure"]

# Decades that the rim may be away from the unit circle; more only by powers of 10.
DECADES = (0.1, 0.2, 0.5, 1.0, 2.0, 5.0, 10.0, 20.0, 50.0, 100.0, 200.0, 400.0)
# Share of them that the largest multiplier may take.
FILL = 0.85
ROOM = 2.25

PAIRS = (("one pair", style.SERIES[3]), ("other pair", style.SERIES[0]))
SUPERSCRIPTS = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")


def multipliers(stability: Stability) -> list[list[tuple[float, float]]]:
    """Logarithm of |λ| and arg λ, in radians, of both members of each pair.

    Examples
    --------
    >>> stability = Stability("elliptic-hyperbolic", (2.5, 0.0), (0.25,), 2.0, 0.0)
    >>> [[(round(m, 6), round(a, 6)) for m, a in pair] for pair in multipliers(stability)]
    [[(0.693147, 0.0), (-0.693147, -0.0)], [(0.0, 1.570796), (-0.0, -1.570796)]]
    """
    logarithms = [cmath.acosh(0.5 * complex(trace)) for trace in stability.traces]
    return [[(w.real, w.imag), (-w.real, -w.imag)] for w in logarithms]


def multipliers_data(orbit: Orbit) -> style.Data:
    """Data of `multipliers_figure`.

    Parameters
    ----------
    orbit : Orbit
    """
    stability = orbit.stability
    pairs = multipliers(stability)
    decades = _decades(max(abs(log) for pair in pairs for log, _ in pair) / math.log(10.0))
    return {
        "multipliers title": {"text": _title(stability)},
        "multipliers scale": {"text": f"radius 1 + log10 |λ| / {decades:g}; bold: |λ| = 1"},
        "multipliers rings": _rings(decades),
        **{
            f"multipliers {number}": _columns(pair, decades)
            for number, pair in enumerate(pairs, start=1)
        },
    }


def multipliers_figure(data: style.Data, *, size: int = 340) -> LayoutDOM:
    """Multipliers about the unit circle.

    Parameters
    ----------
    data : dict
        From `multipliers_data`.
    size : int
        Side of the square frame, in pixels.
    """
    plot = style.blank(
        data,
        "multipliers",
        width=size,
        height=size,
        labels=("", ""),
        tools="save",
        x_range=Range1d(start=-ROOM, end=ROOM),
        y_range=Range1d(start=-ROOM, end=ROOM),
    )
    plot.axis.visible = plot.grid.visible = False
    plot.outline_line_color = None
    _draw_rings(plot, data)
    marks: list[Any] = [
        plot.scatter(
            "x", "y", source=style.source(data, f"multipliers {number}"), marker=look.marker,
            size=13, fill_color=look.colour, line_color="#000000", legend_label=label,
        )
        for number, (label, look) in enumerate(PAIRS, start=1)
    ]  # fmt: skip
    tips = [("|λ|", "@modulus"), ("arg λ / 2π", "@turns{0.000000}")]
    plot.add_tools(HoverTool(renderers=marks, tooltips=tips, visible=False))
    style.dress_legend(plot.legend[0])
    plot.legend[0].update(location="bottom_left", orientation="horizontal")
    scale = Title(
        name="multipliers scale",
        text_color=style.NEUTRAL,
        text_font=style.FONT,
        text_font_size=style.TEXT_SIZE,
        text_font_style="normal",
        align="center",
        **data["multipliers scale"],
    )
    plot.add_layout(scale, "below")
    return plot


def _decades(largest: float) -> float:
    """Decades between the unit circle and the rim."""
    if largest == 0.0:
        return 1.0
    return next((d for d in DECADES if largest <= FILL * d), 1.2 * largest)


def _title(stability: Stability) -> str:
    angles = ", ".join(f"{angle:.6f}" for angle in stability.angles)
    rotation = f"ν = {angles}" if angles else "no pair on the unit circle"
    if stability.kind == "undecided":
        rotation = f"traces known to {stability.error:.1g}"
    elif not stability.stable:
        rotation += f"; largest |λ| = {stability.max_multiplier:.6g}"
    return f"Multipliers: {stability.kind}\n{rotation}"


def _columns(pair: list[tuple[float, float]], decades: float) -> dict[str, Any]:
    places = [(1.0 + log / math.log(10.0) / decades) * cmath.exp(1j * angle) for log, angle in pair]
    return {
        "x": [z.real for z in places],
        "y": [z.imag for z in places],
        "modulus": [_power(log / math.log(10.0)) for log, _ in pair],
        "turns": [angle / (2.0 * math.pi) for _, angle in pair],
    }


def _power(decades: float, digits: int = 6) -> str:
    """10 to a power as text: plain where that is short."""
    if abs(decades) < 3.0:
        return f"{10.0**decades:.{digits}g}"
    whole = math.floor(decades)
    part = 10.0 ** (decades - whole)
    return f"{part:.{digits}g} · 10{str(whole).translate(SUPERSCRIPTS)}"


def _rings(decades: float) -> dict[str, Any]:
    """Rings of equal |λ|: half way to the rim and on it, inside and outside the unit circle."""
    steps = (-0.5, 0.0, 0.5, 1.0)
    labels = [_power(step * decades, 3).removeprefix("1 · ") for step in steps]
    direction = cmath.exp(0.375j * math.pi)
    return {
        "radius": [1.0 + step for step in steps],
        "width": [2.5 if step == 0.0 else 1.0 for step in steps],
        "alpha": [1.0 if step == 0.0 else 0.5 for step in steps],
        "label": labels,
        "x": [(1.0 + step) * direction.real for step in steps],
        "y": [(1.0 + step) * direction.imag for step in steps],
    }


def _draw_rings(plot: figure, data: style.Data) -> None:
    rings = style.source(data, "multipliers rings")
    plot.circle(
        0, 0, radius="radius", source=rings, fill_color=None,
        line_color=style.NEUTRAL, line_width="width", line_alpha="alpha",
    )  # fmt: skip
    turns = np.array([0.0, 0.25, 0.5, 0.75])
    x, y = np.cos(2.0 * np.pi * turns), np.sin(2.0 * np.pi * turns)
    spokes = ColumnDataSource(
        data={
            "x": 2.0 * x,
            "y": 2.0 * y,
            "label": ["ν = 0 ", " 1/4", " 1/2", " −1/4"],
            "align": ["right", "left", "left", "left"],
            "base": ["bottom", "bottom", "bottom", "top"],
        }
    )
    plot.segment(0, 0, "x", "y", source=spokes, line_color=style.NEUTRAL, line_alpha=0.3)
    text: dict[str, Any] = {
        "text": "label",
        "text_color": style.NEUTRAL,
        "text_font": value(style.FONT),
        "text_font_size": "11px",
    }
    plot.text("x", "y", source=rings, x_offset=3, y_offset=-1, **text)
    plot.text("x", "y", source=spokes, text_align="align", text_baseline="base", **text)
