"""The lab: panels for a search, for checking an orbit, and for a catalogue, in JupyterLab.

Each panel takes a catalogue file and can be shown in a cell of any notebook::

    from orbitsearch.lab import SearchPanel
    SearchPanel("catalog/orbits.db")

`launch` starts JupyterLab on a folder of notebooks and needs none of the libraries that panels draw
with; so nothing is loaded here before it is asked for.
"""

from importlib import import_module
from typing import Any

_HOMES = {
    "BrowsePanel": "browse_panel",
    "Figure": "host",
    "SearchPanel": "search_panel",
    "StartView": "start_view",
    "VerifyPanel": "verify_panel",
}

__all__ = list(_HOMES)


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(f"{__name__}.{_HOMES[name]}"), name)


def __dir__() -> list[str]:
    return sorted(__all__)
