"""The main job in the small: how fast starts are scanned and orbits confirmed, on one core."""

import numpy as np

from orbitsearch import scan
from orbitsearch.orbit import Status
from orbitsearch.search import Finished, SearchRequest, search
from orbitsearch.starts import start_set
from tests.bench.measure import Contestant, Section

__all__ = ["sections"]

REQUEST = SearchRequest("collinear", (0.0, 0.6, 0.0, 0.6), (60, 60), 40.0)


def scan_window() -> float:
    """Starts of the window scanned over half the scaled period, events and candidates included."""
    starts = start_set(REQUEST.start)
    p = np.linspace(*REQUEST.window[:2], REQUEST.grid[0])
    q = np.linspace(*REQUEST.window[2:], REQUEST.grid[1])
    seen = scan.scan(starts, p, q, REQUEST.scaled_period)
    scan.candidates(starts, seen, REQUEST.scaled_period)
    return float(np.sum(seen.valid))


def search_window() -> float:
    """Orbits of the window verified or marked as not confirmed."""
    counts = next(e.counts for e in search(REQUEST, workers=1) if isinstance(e, Finished))
    return float(counts[Status.VERIFIED] + counts[Status.NOT_CONFIRMED])


def sections() -> list[Section]:
    """Tables of this group."""
    return [
        Section("scan", "start", [Contestant("60 x 60 collinear starts, T* < 40", scan_window)]),
        Section("search", "orbit", [Contestant("the same window, all of it", search_window)]),
    ]
