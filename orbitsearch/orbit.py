"""The values everything shares: a start, an orbit, how stable it is, and how far to believe it.

They are plain frozen dataclasses without numpy, so that the catalogue can be listed, filtered and
exported without loading a compiler or a solver.  Numbers that another group must be able to
reproduce (the two parameters of a start and its period) are kept as decimal text; everything
derived from them is a float.  Units: G = m1 = m2 = m3 = 1.
"""

from __future__ import annotations

from dataclasses import asdict, dataclass, field, replace
from enum import StrEnum
from typing import Any

from orbitsearch import period_law
from orbitsearch.braid_type import BraidType
from orbitsearch.symmetry import Symmetry
from orbitsearch.words import root_and_power

__all__ = ["Check", "Orbit", "Solution", "Stability", "Start", "Status", "Verdict"]


class Status(StrEnum):
    """How an attempt ended: the solver's endings first, then those of verification."""

    CONVERGED = "converged"
    DIVERGED = "diverged"
    COLLISION = "collision"
    ESCAPE = "escape"
    DEGENERATE = "degenerate"
    BUDGET = "budget"
    VERIFIED = "verified"
    NOT_CONFIRMED = "not confirmed"
    REJECTED = "rejected"


@dataclass(frozen=True)
class Start:
    """One state in standard form from which an orbit starts.

    Attributes
    ----------
    kind : str
        Name of the start set: ``collinear``, ``isosceles``, ``rest`` or ``perpendicular``.
    parameters : tuple of two str
        The two parameters of the set as decimal text.
    period : str
        Period of the orbit *from this start* as decimal text; another start of the same orbit has
        another scale, hence another period.
    """

    kind: str
    parameters: tuple[str, str]
    period: str

    @classmethod
    def from_floats(cls, kind: str, p: float, q: float, period: float) -> Start:
        """Start whose text has every digit of the doubles (shortest text that reads back equal)."""
        return cls(kind, (repr(float(p)), repr(float(q))), repr(float(period)))

    @property
    def p(self) -> float:
        """First parameter as a double."""
        return float(self.parameters[0])

    @property
    def q(self) -> float:
        """Second parameter as a double."""
        return float(self.parameters[1])


@dataclass(frozen=True)
class Check:
    """One line of a verdict: a measured value, the bound it was held against, and the outcome.

    `passed` is None where double precision cannot decide.
    """

    name: str
    value: float
    bound: float
    passed: bool | None
    note: str = ""


@dataclass(frozen=True)
class Verdict:
    """What verification found: a status, the reason in words, and every number behind it."""

    status: Status
    reason: str
    checks: tuple[Check, ...] = ()

    def value(self, name: str) -> float:
        """Measured value of the check called `name` (KeyError if there is none)."""
        for check in self.checks:
            if check.name == name:
                return check.value
        raise KeyError(name)


@dataclass(frozen=True)
class Stability:
    """Linear stability in the plane: two pairs of Floquet multipliers (λ, 1/λ).

    Attributes
    ----------
    kind : str
        ``elliptic-elliptic``, ``elliptic-hyperbolic``, ``hyperbolic-hyperbolic``, with
        ``inverse hyperbolic`` for a negative real pair, ``complex quadruple``, or ``undecided``.
    traces : tuple of complex
        λ + 1/λ of the two pairs, the larger modulus first.
    angles : tuple of float
        arg λ / 2π in (0, 1/2) for each pair on the unit circle.
    max_multiplier : float
        Largest |λ|.
    error : float
        Uncertainty of the traces by rounding, relative to the larger of 1 and their size.
    """

    kind: str
    traces: tuple[complex, complex]
    angles: tuple[float, ...]
    max_multiplier: float
    error: float

    @property
    def stable(self) -> bool:
        """Whether both pairs lie on the unit circle (linearly stable)."""
        return self.kind == "elliptic-elliptic"

    def to_json(self) -> dict[str, Any]:
        """Plain JSON value; traces as [real, imaginary] pairs."""
        return {
            "kind": self.kind,
            "angles": list(self.angles),
            "max_multiplier": self.max_multiplier,
            "traces": [[z.real, z.imag] for z in self.traces],
            "error": self.error,
        }

    @classmethod
    def from_json(cls, data: dict[str, Any]) -> Stability:
        """Inverse of `to_json`."""
        first, second = (complex(*pair) for pair in data["traces"])
        return cls(
            kind=data["kind"],
            traces=(first, second),
            angles=tuple(data["angles"]),
            max_multiplier=data["max_multiplier"],
            error=data["error"],
        )


@dataclass(frozen=True)
class Solution:
    """How the solver ended: work counted, and where it landed relative to the guess.

    Attributes
    ----------
    status : Status
    reason : str
        One sentence.
    condition : str
        Which set the arc ends in, as ``C3``, ``I1``, ``rest``.
    residual : float
        Largest of the three end conditions over the size of the orbit.
    iterations, steps : int
        Newton iterations, integration steps.
    digits : float
        Decimal digits of the parameters that the last correction leaves certain.
    moved : float
        Largest change of a parameter from the guess.
    period_moved : float
        Relative change of the period from the guess.
    """

    status: Status
    reason: str
    condition: str = ""
    residual: float = float("inf")
    iterations: int = 0
    steps: int = 0
    digits: float = 0.0
    moved: float = 0.0
    period_moved: float = 0.0


@dataclass(frozen=True)
class Orbit:
    """One periodic orbit with everything known of it.

    Attributes
    ----------
    start : Start
        The start it was refined from; numbers below (period, energy) are at its scale.
    rotation : float
        Angle in (-π, π] by which the triple has turned after one period; 0 when it closes in the
        inertial frame.
    scaled_period : float
        T* = T |E|^(3/2).
    closure : float
        Largest difference of a body's position, in 1/|E|, or velocity, in |E|^(1/2), after one
        period and the rotation.
    least_separation : float
        Least distance of two bodies along the orbit, in 1/|E|.
    syzygies : str
        Middle body of every alignment along one period from the start.
    cycle : str
        Reduced syzygy cycle in canonical form (`orbitsearch.cycles.canonical_cycle`).
    word : str
        Free-group word in canonical form (`orbitsearch.words.canonical_word`).  The silent arc is
        that of the body midway at a collinear start of the orbit, as in published lists, and where
        there is none the one that makes the word least.
    starts : tuple of Start
        Every start of this orbit in every start set, `start` included.
    braid : BraidType or None
        None when it is not known: catalogues of early versions lack it for some orbits.
    symmetry : Symmetry or None
        The same.
    margins : tuple of float or None
        Least angle between the orbit and the equator of the shape sphere over all alignments, and
        least distance of an alignment from a collision point, both in radians: how certain the
        syzygies are.  Infinite when there are no alignments.
    """

    start: Start
    energy: float
    angular_momentum: float
    rotation: float
    scaled_period: float
    closure: float
    least_separation: float
    syzygies: str
    cycle: str
    word: str
    choreography: bool
    stability: Stability
    verdict: Verdict
    starts: tuple[Start, ...] = ()
    braid: BraidType | None = None
    symmetry: Symmetry | None = None
    margins: tuple[float, float] | None = None
    solution: Solution | None = field(default=None, compare=False)

    @property
    def status(self) -> Status:
        """Status of the verdict."""
        return self.verdict.status

    @property
    def period(self) -> float:
        """Period from `start`, as a double."""
        return float(self.start.period)

    @property
    def word_power(self) -> int:
        """How often the word goes round its own root: 7 for a seventh power of another motion."""
        return root_and_power(self.word)[1]

    @property
    def period_per_letter(self) -> float | None:
        """T* over the length of the word, None when the word is empty."""
        return period_law.period_per_letter(self.scaled_period, len(self.word))

    @property
    def law_residual(self) -> float | None:
        """`period_per_letter` less the published mean, None without a collinear start.

        The law (`orbitsearch.period_law`) is about words in which the arc of the body midway at
        such a start is silent.
        """
        if all(start.kind != "collinear" for start in (self.start, *self.starts)):
            return None
        return period_law.residual(self.scaled_period, len(self.word))

    def with_starts(self, starts: tuple[Start, ...]) -> Orbit:
        """Copy with another list of starts."""
        return replace(self, starts=starts)

    def to_json(self) -> dict[str, Any]:
        """Plain JSON value with the fields that commands print."""
        data: dict[str, Any] = {
            "status": str(self.status),
            "start": self.start.kind,
            "parameters": list(self.start.parameters),
            "period": self.period,
            "energy": self.energy,
            "angular_momentum": self.angular_momentum,
            "rotation": self.rotation,
            "scaled_period": self.scaled_period,
            "closure": self.closure,
            "least_separation": self.least_separation,
            "syzygies": self.syzygies,
            "cycle": self.cycle,
            "word": self.word,
            "word_power": self.word_power,
            "choreography": self.choreography,
            "braid": None if self.braid is None else self.braid.to_json(),
            "symmetry": None if self.symmetry is None else self.symmetry.to_json(),
            "margins": None if self.margins is None else list(self.margins),
            "period_per_letter": self.period_per_letter,
            "law_residual": self.law_residual,
            "stability": self.stability.to_json(),
            "verdict": {
                "status": str(self.verdict.status),
                "reason": self.verdict.reason,
                "checks": [asdict(check) for check in self.verdict.checks],
            },
            "starts": [
                {"start": s.kind, "parameters": list(s.parameters), "period": s.period}
                for s in self.starts
            ],
        }
        if self.solution is not None:
            data["solution"] = {**asdict(self.solution), "status": str(self.solution.status)}
        return data

    @classmethod
    def from_json(cls, data: dict[str, Any]) -> Orbit:
        """Inverse of `to_json`, except for `solution` and digits of the period beyond a double."""
        verdict = data["verdict"]
        starts = tuple(
            Start(s["start"], (s["parameters"][0], s["parameters"][1]), s["period"])
            for s in data["starts"]
        )
        first, second = data["parameters"]
        braid, symmetry, margins = (data.get(key) for key in ("braid", "symmetry", "margins"))
        return cls(
            start=Start(data["start"], (first, second), repr(data["period"])),
            energy=data["energy"],
            angular_momentum=data["angular_momentum"],
            rotation=data["rotation"],
            scaled_period=data["scaled_period"],
            closure=data["closure"],
            least_separation=data["least_separation"],
            syzygies=data["syzygies"],
            cycle=data["cycle"],
            word=data["word"],
            choreography=data["choreography"],
            stability=Stability.from_json(data["stability"]),
            verdict=Verdict(
                Status(verdict["status"]),
                verdict["reason"],
                tuple(Check(**check) for check in verdict["checks"]),
            ),
            starts=starts,
            braid=None if braid is None else BraidType.from_json(braid),
            symmetry=None if symmetry is None else Symmetry.from_json(symmetry),
            margins=None if margins is None else (margins[0], margins[1]),
        )
