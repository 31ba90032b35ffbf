"""Periodic orbits from the literature, as plain numbers with their source beside them.

Masses and G are 1.  These are figures to check against and nothing else: no code is tuned to them.
Where a source prints few digits, or a period that is off, the comment says so.
"""

from typing import NamedTuple


class Collinear(NamedTuple):
    """Bodies at (-1, 0), (1, 0), (0, 0) with velocities (a, b), (a, b), (-2a, -2b); L = 0."""

    a: float
    b: float
    period: float
    scaled_period: float | None = None
    word: str | None = None
    energy: float | None = None


class AtRest(NamedTuple):
    """Bodies at (-1/2, 0), (1/2, 0), (x, y), all at rest."""

    x: float
    y: float
    period: float


class Aligned(NamedTuple):
    """Bodies on the x-axis with velocities along y."""

    positions: tuple[float, float, float]
    velocities: tuple[float, float, float]
    period: float
    energy: float | None = None
    angular_momentum: float | None = None


class Relative(NamedTuple):
    """Periodic up to a rotation: ρ = (a, 0), λ = (1, 0), ρ' = (0, c), λ' = (0, L - a c).

    ρ = (r1 - r2)/√2 and λ = (r1 + r2 - 2 r3)/√6.
    """

    angular_momentum: float
    a: float
    c: float
    period: float


# The figure-eight: C. Moore, PRL 70 (1993) 3675; A. Chenciner & R. Montgomery, Ann. Math. 152
# (2000) 881.  Digits recomputed for this project with more than 40.
EIGHT = Collinear(
    a=0.3471168881189269382427769,
    b=0.5327249453880302292620280,
    period=6.325913982926211677589000,
    scaled_period=9.237681250724549696170210,
    word="abAB",
    energy=-1.287141995631857705040954,
)

# arg λ / 2π of its two pairs of multipliers; C. Simó (2002) gives the same leading digits, the
# rest was recomputed.
EIGHT_ANGLES = (0.00842272470813, 0.298092529004750)

# X. Li & S. Liao, Sci. China Phys. Mech. Astron. 60 (2017) 129511 (arXiv 1705.00527).
LI_LIAO_2017 = (
    Collinear(0.3068934205, 0.1255065670, 6.2346748391, 19.932, "BAbabaBA"),
    Collinear(0.6150407229, 0.5226158545, 37.3205235945, 15.048, "BaBabAbA"),
    Collinear(0.5379557207, 0.3414578545, 26.9186696160, 39.075, "BabaBABabABAbabA"),
    Collinear(0.4112926910, 0.2607551013, 20.7490650080, 49.630, "BAbabABAbabaBABabaBA"),
    Collinear(0.4425908552, 0.4235138348, 35.8334644158, 57.728, "BabaBAbaBABabABAbaBAbabA"),
    Collinear(0.1214534165, 0.1012023800, 15.7440944954, 59.455, "BAbaabABBAbabaBAABabbaBA"),
    Collinear(0.4094945913, 0.3628231655, 33.8677507235, 68.673),
    Collinear(0.5255769251, 0.2501253528, 43.8698538026, 79.277),
    Collinear(0.4364192674, 0.4457095477, 49.5954033190, 76.298),
)

# The same paper: T* over the length of the word, mean and standard deviation of all families.
LI_LIAO_2017_SCALED_PERIOD_PER_LETTER = (2.433, 0.075)

# M. Šuvakov & V. Dmitrašinović, PRL 110 (2013) 114301.  Guesses only: the printed periods are off
# from the fourth digit on, and the last two pairs of rows are one orbit each.
SUVAKOV_DMITRASINOVIC_2013 = (
    Collinear(0.39295, 0.09758, 7.0039),
    Collinear(0.18428, 0.58719, 63.5345),
    Collinear(0.46444, 0.39606, 14.8939),
    Collinear(0.43917, 0.45297, 28.6703),
    Collinear(0.40592, 0.23016, 13.8658),
    Collinear(0.38344, 0.37736, 25.8406),
    Collinear(0.08330, 0.12789, 10.4668),
    Collinear(0.350112, 0.07934, 79.4759),
    Collinear(0.08058, 0.58884, 21.2710),
    Collinear(0.55906, 0.34919, 55.5018),
    Collinear(0.51394, 0.30474, 17.3284),
    Collinear(0.28270, 0.32721, 10.9626),
    Collinear(0.41682, 0.33033, 55.7898),
    Collinear(0.41734, 0.31310, 54.2076),
)

# Its tenth row, period recomputed.
SUVAKOV_DMITRASINOVIC_2013_TENTH_PERIOD = 55.502423388762243774838417

# M. Šuvakov, Celest. Mech. Dyn. Astron. 119 (2014) 369, starts from Am. J. Phys. 82 (2014) 609;
# digits refined for this project.  The first has the figure-eight's word and very nearly its T*,
# and is another orbit: no choreography.
EIGHT_TWIN = Collinear(0.339407411991, 0.536184978151, 6.2908187651, 9.237682751, "abAB")

# The same sources: the figure-eight's word seven times over.  One of the two is a choreography.
EIGHT_SEVENTH_POWERS = (
    Collinear(0.255430935650, 0.516385839015, 35.0430870217),
    Collinear(0.203491687451, 0.518112860741, 32.8490711671),
)

# X. Li & S. Liao, New Astronomy 70 (2019) 22, equal masses.
LI_LIAO_2019 = (
    AtRest(0.0207067154, 0.3133550361, 2.1740969264),
    AtRest(0.2053886532, 0.1952668419, 1.6896364928),
    AtRest(0.0562664280, 0.4691503375, 4.5419125588),
    AtRest(0.3142334050, 0.5384825297, 4.8672002993),
    AtRest(0.3089693008, 0.4236727692, 4.8914942162),
)

# R. Broucke, Celest. Mech. 12 (1975) 439, orbits A1 and A2; periods recomputed (the first is 2π).
BROUCKE_1975 = (
    Aligned(
        (-0.9892620043, 2.2096177241, -1.2203557197),
        (1.9169244185, 0.1910268738, -2.1079512924),
        6.283185307179586,
        energy=-0.854131,
        angular_momentum=1.098206,
    ),
    Aligned(
        (0.3361300950, 0.7699893804, -1.1061194753),
        (1.5324315370, -0.6287350978, -0.9036964391),
        7.702164291,
    ),
)

# M. Janković, V. Dmitrašinović & M. Šuvakov, Comput. Phys. Commun. 250 (2020) 107052.
JANKOVIC_2020 = (
    Relative(0.7, 0.427052524289, -1.336907801590, 4.46125383),
    Relative(0.85, 0.225423376709, -2.161172667330, 4.93326124),
)
