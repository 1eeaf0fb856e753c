"""Clues to the register, each a likelihood under registers 1, 2 and 3, combined in one place.

Conventions: register 1 is the lowest resonance of the air column for that fingering, 2 the next, 3 the
next. `None` is undecided. Pitches are in cents above 1 Hz (1200 log2 of the frequency), so that an interval
is a difference. Log-odds are natural logarithms: the favoured register against the other two together,
all three equally likely beforehand.

A clue is what one observation says; clues that share an observation are one clue.
"""

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from math import exp, log
from types import MappingProxyType
from typing import Literal

Register = Literal[1, 2, 3]
REGISTERS: tuple[Register, ...] = (1, 2, 3)

SURE = 0.9
CONTRADICTION = 12.0
OUTVOTED = 0.002
_FIRM = 1.0
PRIOR: Mapping[Register, float] = MappingProxyType({1: 0.5, 2: 0.38, 3: 0.12})


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
        How strongly, natural log; near 0 is hardly at all.
    detail
        The reason in words, with numbers and units.
    """

    source: str
    favours: Register
    log_odds: float
    detail: str


@dataclass(frozen=True, slots=True, kw_only=True)
class RegisterCall:
    """The decision on one tone: a register or undecided, with probabilities and all the reasons.

    `caution` says which reasons contradict one another; None where they agree.
    """

    register: Register | None
    probability: Mapping[Register, float]
    evidence: tuple[Evidence, ...] = field(default=())
    caution: str | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Clue:
    """One observation: how likely it is under each register (any common factor), and in words."""

    source: str
    likelihood: Mapping[Register, float]
    detail: str

    def speaks_for(self, register: Register) -> bool:
        """Whether it is likelier than either other register by the factor that makes a contradiction."""
        others = max(self.likelihood[other] for other in REGISTERS if other != register)
        return self.likelihood[register] > CONTRADICTION * others

    def speaks_against(self, register: Register) -> bool:
        """Whether another register is likelier by this clue by the factor that makes a contradiction."""
        return max(self.likelihood.values()) > CONTRADICTION * self.likelihood[register]

    @property
    def evidence(self) -> Evidence:
        """The clue as a reason: the register that it favours and its log-odds against the others together."""
        favours = max(REGISTERS, key=lambda register: self.likelihood[register])
        others = sum(self.likelihood[register] for register in REGISTERS if register != favours) / 2.0
        odds = log(max(self.likelihood[favours], 1e-300) / max(others, 1e-300))
        return Evidence(source=self.source, favours=favours, log_odds=odds, detail=self.detail)


def decide(clues: Iterable[Clue], prior: Mapping[Register, float] = PRIOR) -> RegisterCall:
    """Combine independent clues by Bayes' rule.

    Undecided unless one register reaches probability `SURE` and no clue speaks against it by a factor of
    `CONTRADICTION`: where two clues contradict each other, one of them is wrong, and which is not known. But
    where two clues say one thing as firmly as a third says another, and all together leave less than a chance
    of `OUTVOTED`, the third is the one that is wrong.
    """
    told = tuple(clues)
    logs = {
        register: log(prior[register]) + sum(log(max(clue.likelihood[register], 1e-300)) for clue in told)
        for register in REGISTERS
    }
    most = max(logs.values())
    weights = {register: exp(value - most) for register, value in logs.items()}
    total = sum(weights.values())
    probability = {register: weight / total for register, weight in weights.items()}
    best = max(REGISTERS, key=lambda register: probability[register])
    against = [clue for clue in told if clue.speaks_against(best)]
    if len(against) == 1 and sum(clue.speaks_for(best) for clue in told) >= 2:
        against = against if probability[best] < 1.0 - OUTVOTED else []
    return RegisterCall(
        register=best if probability[best] >= SURE and not against else None,
        probability=probability,
        evidence=tuple(clue.evidence for clue in told),
        caution=_contradiction(told) if against else None,
    )


def _contradiction(clues: Sequence[Clue]) -> str:
    """Name the clues that contradict one another."""
    told = [clue.evidence for clue in clues]
    sides = ", ".join(f"{reason.source} for {reason.favours}" for reason in told if reason.log_odds > _FIRM)
    return f"register undecided: the evidence disagrees ({sides})"
