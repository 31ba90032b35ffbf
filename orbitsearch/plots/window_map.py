"""What is known of the starts of a search window: arrays that fill tile by tile."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from orbitsearch.starts import start_set

__all__ = ["LARGEST", "NOT_YET", "Outcomes", "WindowMap"]

LARGEST = 400
"""Starts along one side of the map; of a finer grid every second, third ... start is shown."""

NOT_YET = -2
"""Status of a start that nothing is known of yet."""


class Outcomes(Protocol):
    """What became of the starts of one tile: four arrays of one shape, indexed by p, then q.

    `orbitsearch.scan.Outcomes` is one; drawing a map asks for no more than this of it.
    """

    @property
    def status(self) -> NDArray[Any]:
        """Keys of `orbitsearch.flow.STATUS`; -1 outside the domain or not bound."""

    @property
    def lifetime(self) -> NDArray[Any]:
        """Scaled time that the three stayed together, at most half the T* asked for."""

    @property
    def alignments(self) -> NDArray[Any]:
        """Number of alignments in that time."""

    @property
    def nearest(self) -> NDArray[Any]:
        """Closest approach over the size of the start."""


@dataclass
class WindowMap:
    """Everything known of the starts of a window; the arrays have shape (n, m).

    Attributes
    ----------
    start : str
        Name of the start set.
    window : tuple of float
        (p0, p1, q0, q1), ranges of the two parameters.
    grid : tuple of int
        Starts of the search along each parameter.
    horizon : float
        Scaled time over which starts are followed: half the T* asked for.
    stride : tuple of int
        Every so many-th start of the grid is on the map.
    status : ndarray of int
        Keys of `orbitsearch.flow.STATUS`, -1 where there is no start, -2 where nothing is known.
    lifetime, nearest : ndarray
        As in `Outcomes`; NaN where nothing is known.
    alignments : ndarray of int
        As in `Outcomes`; -1 where nothing is known.
    """

    start: str
    window: tuple[float, float, float, float]
    grid: tuple[int, int]
    horizon: float
    stride: tuple[int, int]
    status: NDArray[np.int64]
    lifetime: NDArray[np.float64]
    alignments: NDArray[np.int64]
    nearest: NDArray[np.float64]

    @classmethod
    def blank(
        cls,
        start: str,
        window: tuple[float, float, float, float],
        grid: tuple[int, int],
        scaled_period: float,
    ) -> WindowMap:
        """Map of a search that has not begun; arguments are those of a search request."""
        start_set(start)
        stride = (math.ceil(grid[0] / LARGEST), math.ceil(grid[1] / LARGEST))
        shape = (math.ceil(grid[0] / stride[0]), math.ceil(grid[1] / stride[1]))
        return cls(
            start,
            window,
            grid,
            0.5 * scaled_period,
            stride,
            status=np.full(shape, NOT_YET),
            lifetime=np.full(shape, np.nan),
            alignments=np.full(shape, -1),
            nearest=np.full(shape, np.nan),
        )

    def fill(self, i0: int, j0: int, outcomes: Outcomes) -> None:
        """Enter a tile whose first start has the indices i0, j0 in the grid of the search.

        Tiles may overlap, and one may be entered twice.
        """
        (skip_i, here_i), (skip_j, here_j) = (
            self._place(first, count, stride)
            for first, count, stride in zip(
                (i0, j0), outcomes.status.shape, self.stride, strict=True
            )
        )
        for name in ("status", "lifetime", "alignments", "nearest"):
            getattr(self, name)[here_i, here_j] = getattr(outcomes, name)[skip_i, skip_j]

    @staticmethod
    def _place(first: int, count: int, stride: int) -> tuple[slice, slice]:
        """Which of `count` starts from number `first` on are shown, and where on the map."""
        skip = -first % stride
        place = (first + skip) // stride
        shown = len(range(skip, count, stride))
        return slice(skip, count, stride), slice(place, place + shown)

    @property
    def pitch(self) -> tuple[float, float]:
        """Distance of neighbouring starts of the map in p and q."""
        p0, p1, q0, q1 = self.window
        return (
            (p1 - p0) / (self.grid[0] - 1) * self.stride[0],
            (q1 - q0) / (self.grid[1] - 1) * self.stride[1],
        )
