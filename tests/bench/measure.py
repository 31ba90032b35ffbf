"""Process time of contestants that take turns, and the table of their medians."""

import statistics
import time
from collections.abc import Callable
from dataclasses import dataclass

from tabulate import tabulate

__all__ = ["Contestant", "Section", "measure", "take_turns"]


@dataclass(frozen=True)
class Contestant:
    """One way to do the work of a section.

    Attributes
    ----------
    name : str
    run : callable
        Does the work once and returns how many units of it were done.
    """

    name: str
    run: Callable[[], float]


@dataclass(frozen=True)
class Section:
    """One table: who did a unit of work in what time, and against whom that is held.

    Attributes
    ----------
    title, unit : str
        `unit` names what the runs count.
    contestants : list of Contestant
        The first is ours; ratios say how many times longer than ours the others take.
    """

    title: str
    unit: str
    contestants: list[Contestant]


def take_turns(contestants: list[Contestant], repeats: int) -> list[float]:
    """Median process time a unit of each contestant, in nanoseconds.

    They run in turns, so that a slow spell of the machine meets them all; process time leaves out
    what other programs take.  A first round is thrown away: it compiles, and fills the caches.
    """
    times: list[list[float]] = [[] for _ in contestants]
    for turn in range(repeats + 1):
        for contestant, taken in zip(contestants, times, strict=True):
            begin = time.process_time()
            units = contestant.run()
            if turn > 0:
                taken.append((time.process_time() - begin) / units * 1e9)
    return [statistics.median(taken) for taken in times]


def measure(section: Section, repeats: int) -> tuple[str, list[tuple[str, str, str]]]:
    """Measure a section now: its table, and for every rival a row of how it compares with ours."""
    medians = take_turns(section.contestants, repeats)
    named = [(c.name, median) for c, median in zip(section.contestants, medians, strict=True)]
    table = tabulate(
        [(name, f"{median:,.0f}", f"{6e10 / median:,.0f}") for name, median in named],
        (section.title, f"ns per {section.unit}", "per CPU-minute"),
        tablefmt="simple",
        colalign=("left", "right", "right"),
    )
    first = named[0][0]
    return table, [(name, f"{median / medians[0]:.2f}", first) for name, median in named[1:]]
