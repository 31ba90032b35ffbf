"""Bokeh figures: one orbit, a search window, a whole catalogue.

A figure comes as two functions, ``<name>_data`` of what is to be shown and ``<name>_figure`` of
these data, and `update` brings a figure that was drawn before up to date with other data.  All of
them may be imported from here.  What is not asked for is not loaded: figures of a catalogue do
without the solver, which those of an orbit need.

Examples
--------
>>> from orbitsearch.plots import multipliers_data, multipliers_figure, update
>>> from orbitsearch.refine import refine
>>> eight = refine("collinear", 0.34712, 0.53272, 6.3259).orbit
>>> layout = multipliers_figure(multipliers_data(eight))
>>> layout.title.text.splitlines()
['Multipliers: elliptic-elliptic', 'ν = 0.008423, 0.298093']
>>> update(layout, multipliers_data(eight))
"""

from __future__ import annotations

from importlib import import_module
from importlib.util import find_spec
from typing import Any

if find_spec("bokeh") is None:
    raise ImportError("`orbitsearch.plots` needs Bokeh: pip install 'orbitsearch[lab]'")

_MODULES = {
    "alignments": ("alignments_data", "alignments_figure"),
    "data": ("Motion", "motion_of"),
    "multipliers": ("multipliers_data", "multipliers_figure"),
    "orbit_view": ("orbit_data", "orbit_figure"),
    "plane": ("plane_data", "plane_figure"),
    "separation": ("separation_data", "separation_figure"),
    "sphere": ("sphere_data", "sphere_figure"),
    "style": ("update",),
    "catalog_plots": (
        "kinds_data",
        "kinds_figure",
        "law_data",
        "law_figure",
        "starts_data",
        "starts_figure",
    ),
    "page": ("catalog_page", "figure_page"),
    "window": ("window_data", "window_figure"),
    "window_map": ("Outcomes", "WindowMap"),
}
_HOMES = {name: module for module, names in _MODULES.items() for name in names}


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(f"{__name__}.{_HOMES[name]}"), name)


def __dir__() -> list[str]:
    return sorted(_HOMES)
