"""Fingerings: the state of every finger hole, written as one word.

Conventions: the hole nearest the mouth comes first. `x` closed, `o` open, `h` half-holed, `v` vented
(barely cracked). `oxxxxx` is a six-hole flute with the top hole open. A fingering has one to ten holes.
"""

from dataclasses import dataclass
from typing import Literal, get_args

Breath = Literal["soft", "normal", "over"]

BREATHS: tuple[Breath, ...] = get_args(Breath)
STATES = "xohv"
MAX_HOLES = 10

_OPENNESS = {"x": 0.0, "v": 0.1, "h": 0.5, "o": 1.0}


@dataclass(frozen=True, slots=True)
class Fingering:
    """Hole states, top hole first, as one word of `x`, `o`, `h` and `v`.

    Raises
    ------
    ValueError
        If the word is empty, longer than ten letters or has any other letter.
    """

    states: str

    def __post_init__(self) -> None:
        if not 1 <= len(self.states) <= MAX_HOLES:
            raise ValueError(
                f"a fingering has 1 to {MAX_HOLES} holes, not {len(self.states)}: {self.states!r}"
            )
        strange = sorted(set(self.states) - set(STATES))
        if strange:
            raise ValueError(f"{self.states!r} has {strange[0]!r}; a fingering is spelt with x, o, h and v")

    def __str__(self) -> str:
        return self.states

    @property
    def holes(self) -> int:
        """How many finger holes the flute has."""
        return len(self.states)

    @property
    def is_all_closed(self) -> bool:
        """Whether every hole is closed."""
        return set(self.states) == {"x"}

    @property
    def is_ladder(self) -> bool:
        """Whether holes are opened from the foot up with none skipped: the first-register scale."""
        return self.states == "x" * self.closed_from_top + "o" * (self.holes - self.closed_from_top)

    @property
    def closed_from_top(self) -> int:
        """How many holes from the mouth down are closed before the first that is not."""
        return len(self.states) - len(self.states.lstrip("x"))

    @property
    def openness(self) -> tuple[float, ...]:
        """How far each hole is open, 0 closed to 1 open, top hole first (nominal values for `h` and `v`)."""
        return tuple(_OPENNESS[state] for state in self.states)


def ladder(holes: int) -> tuple[Fingering, ...]:
    """Return the first-register scale, low to high: all closed, then one more hole open from the foot."""
    return tuple(Fingering("x" * (holes - k) + "o" * k) for k in range(holes + 1))
