"""Orbits for the tests of identity, catalogue and tables, made without a solver.

Parameters, period and T* of the figure-eight and of its twin are those of the papers named beside
them; all else about these values is made up to exercise storage, and says nothing of mechanics.
"""

import math
from dataclasses import replace

from orbitsearch.braid_type import BraidType
from orbitsearch.braids import Braid
from orbitsearch.orbit import Check, Orbit, Stability, Start, Status, Verdict
from orbitsearch.symmetry import between

# C. Moore, PRL 70 (1993) 3675; A. Chenciner & R. Montgomery, Ann. Math. 152 (2000) 881; digits
# recomputed.
EIGHT = Start(
    "collinear",
    ("0.3471168881189269382427769", "0.5327249453880302292620280"),
    "6.325913982926211677589000",
)
EIGHT_SCALED_PERIOD = 9.237681250724549696170210

# M. Suvakov, CMDA 119 (2014) 369: the orbit of the same word that is no choreography.
TWIN = Start("collinear", ("0.339407411991", "0.536184978151"), "6.2908187651")
TWIN_SCALED_PERIOD = 9.237682751

# Angles of the figure-eight over 2 pi, C. Simo (2002).
EIGHT_ANGLES = (0.00842272470813, 0.298092529004750)


def elliptic(first: float, second: float, error: float = 1e-11) -> Stability:
    """Stability of two pairs on the unit circle at the given angles over 2 pi."""
    traces = sorted((complex(2 * math.cos(2 * math.pi * nu)) for nu in (first, second)), key=abs)
    return Stability("elliptic-elliptic", (traces[1], traces[0]), (first, second), 1.0, error)


def hyperbolic(first: float, second: float, error: float = 1e-11) -> Stability:
    """Stability of two positive real pairs with the given traces, the larger first."""
    largest = first / 2 + math.sqrt(first * first / 4 - 1)
    return Stability("hyperbolic-hyperbolic", (complex(first), complex(second)), (), largest, error)


def figure_eight() -> Orbit:
    """The figure-eight."""
    return Orbit(
        start=EIGHT,
        energy=-1.287141995631857705040954,
        angular_momentum=0.0,
        rotation=0.0,
        scaled_period=EIGHT_SCALED_PERIOD,
        closure=1.5e-14,
        least_separation=0.4,
        syzygies="312312",
        cycle="123123",
        word="abAB",
        choreography=True,
        stability=elliptic(*EIGHT_ANGLES),
        verdict=Verdict(
            Status.VERIFIED,
            "closes, and every check passed",
            (Check("closure", 1.5e-14, 1e-10, True), Check("digits", math.nan, 12.0, None, "n/a")),
        ),
        starts=(EIGHT,),
        braid=pure_braid(3, part=3),
        symmetry=between("C3", "I2"),
        margins=(0.8, 1.04),
    )


def pure_braid(turns: int, part: int = 1) -> BraidType:
    """Braid type of LR so many times, without winding; `part` must divide the number."""
    braid = Braid.from_artin([1, -2]).canonical()
    return BraidType(braid.power(turns).canonical(), (0, 0, 0), part, braid.power(turns // part))


def twin() -> Orbit:
    """The twin of the figure-eight."""
    return replace(
        figure_eight(),
        start=TWIN,
        scaled_period=TWIN_SCALED_PERIOD,
        choreography=False,
        starts=(TWIN,),
        braid=pure_braid(3),
        symmetry=between("C3", "I3"),
    )


def numbered(n: int) -> Orbit:
    """One of a series of different orbits with two starts each, for bulk tests."""
    first = Start.from_floats("collinear", 0.1 + 0.001 * n, 0.2 + 0.0005 * n, 10.0 + n)
    second = Start.from_floats("isosceles", 0.3 + 0.002 * n, 0.4, 20.0 + 2 * n)
    return replace(
        figure_eight(),
        start=first,
        scaled_period=12.0 + 0.7 * n,
        word="abAB" * (n + 2),
        cycle="123123" * (n + 2),
        choreography=n % 3 == 0,
        braid=pure_braid(3 * (n + 2)),
        symmetry=between("C3", "I1" if n % 3 == 0 else "I3"),
        stability=hyperbolic(7.5 + n, 3.25) if n % 2 else elliptic(0.1, 0.2),
        starts=(first, second),
    )
