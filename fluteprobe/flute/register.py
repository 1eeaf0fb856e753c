"""Which register sounds: pieces of evidence, each a log-odds, combined in one place.

Conventions: register 1 is the lowest resonance of the air column for that fingering, 2 the next, 3 the
next. `None` is undecided. Log-odds are natural logarithms, in favour of the register that is named against
the other two together.
"""

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal

Register = Literal[1, 2, 3]
REGISTERS: tuple[Register, ...] = (1, 2, 3)


@dataclass(frozen=True, slots=True, kw_only=True)
class Evidence:
    """One reason to believe in a register.

    Attributes
    ----------
    source
        Where it comes from, a few plain words: "same fingering", "ladder", "breath in the file name" …
    favours
        The register that it speaks for.
    log_odds
        How strongly, natural log, never negative.
    detail
        The reason in words, with numbers and units.
    """

    source: str
    favours: Register
    log_odds: float
    detail: str


@dataclass(frozen=True, slots=True, kw_only=True)
class RegisterCall:
    """The decision on one tone: a register or undecided, with probabilities and all the reasons."""

    register: Register | None
    probability: Mapping[Register, float]
    evidence: tuple[Evidence, ...] = field(default=())
