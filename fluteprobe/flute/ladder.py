"""The ladder and the other tones of a fingering: what the rest of the flute says of one tone's register.

Conventions: pitches in cents above 1 Hz (1200 log2 of the frequency). The ladder is the first-register scale:
all holes closed, then one more open from the foot each time. Its rungs are numbered by their open holes.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from math import erf, exp, sqrt

from fluteprobe.flute.evidence import REGISTERS, Clue, Register
from fluteprobe.flute.fingering import Fingering, ladder

# How far registers 2 and 3 lie above register 1, in cents: middle and standard deviation. Ladder
# fingerings (no hole skipped) are nearly harmonic; others lie anywhere from about 1.3 to 2.2 times.
LADDER_ABOVE: Mapping[Register, tuple[float, float]] = {
    1: (0.0, 25.0),
    2: (1170.0, 90.0),
    3: (1840.0, 150.0),
}
FORKED_ABOVE: Mapping[Register, tuple[float, float]] = {
    1: (0.0, 40.0),
    2: (1040.0, 250.0),
    3: (1640.0, 330.0),
}
_STEP_CENTS = 420.0
_STRAY = 1e-5
_SPARE_CENTS = 40.0

_Run = tuple[tuple[int, float], ...]


@dataclass(frozen=True, slots=True)
class Ladder:
    """First-register pitches of the ladder fingerings that are known, in cents above 1 Hz, by open holes."""

    holes: int
    rungs: Mapping[int, float]

    def reach(self, fingering: Fingering) -> tuple[float, float] | None:
        """Return the lowest and highest first-register pitch that the other rungs allow this fingering.

        Opening a hole raises the first register. So a fingering stands between the ladder note that opens
        only the holes at the foot which it opens too, and the one that opens every hole below its upper
        closed ones. Its own rung is not asked, since it is what is to be told. None if no rung is known.
        """
        highest_open = self.holes - fingering.closed_from_top
        lowest_open = self.holes - len(fingering.states.rstrip("o"))
        own = highest_open if fingering.is_ladder else None
        others = {k: pitch for k, pitch in self.rungs.items() if k != own}
        if not others:
            return None
        low_rungs = [pitch for k, pitch in others.items() if k <= lowest_open]
        high_rungs = [pitch for k, pitch in others.items() if k >= highest_open]
        low = max(low_rungs) if low_rungs else min(others.values()) - _STEP_CENTS
        high = min(high_rungs) if high_rungs else max(others.values()) + _STEP_CENTS
        return (low, max(high, low + _SPARE_CENTS))


def known_ladder(holes: int, lowest: Mapping[Fingering, float]) -> Ladder:
    """Keep the ladder notes that rise as holes are opened, the longest rising run of them.

    `lowest` holds the lowest pitch (cents above 1 Hz) heard for each fingering; a ladder fingering that was
    only overblown stands above its neighbours and is left out.
    """
    heard = [(k, lowest[rung]) for k, rung in enumerate(ladder(holes)) if rung in lowest]
    runs: list[_Run] = [()]
    for k, pitch in heard:
        runs.append((*_longest([run for run in runs if not run or _rises(run[-1], (k, pitch))]), (k, pitch)))
    return Ladder(holes, dict(_longest(runs)))


def _longest(runs: Sequence[_Run]) -> _Run:
    return max(runs, key=len)


def _rises(lower: tuple[int, float], higher: tuple[int, float]) -> bool:
    """Whether one rung stands above another by what its newly opened holes can raise it."""
    return 0.0 < higher[1] - lower[1] < (higher[0] - lower[0]) * _STEP_CENTS


def ladder_clue(flute: Ladder, fingering: Fingering, pitch_cents: float) -> Clue | None:
    """Weigh a pitch against what the ladder lets its fingering play in each register; None if it is mute."""
    reach = flute.reach(fingering)
    if reach is None:
        return None
    low, high = reach
    above = LADDER_ABOVE if fingering.is_ladder else FORKED_ABOVE
    likelihood = {
        register: _STRAY + smeared(pitch_cents - middle, low, high, spread)
        for register, (middle, spread) in above.items()
    }
    detail = (
        f"the ladder lets {fingering} play {_hz(low):.0f} to {_hz(high):.0f} Hz in the first register; "
        f"this tone is at {_hz(pitch_cents):.0f} Hz"
    )
    return Clue(source="ladder", likelihood=likelihood, detail=detail)


def companion_clue(
    fingering: Fingering, pitch_cents: float, companion_cents: float, companion: Mapping[Register, float]
) -> Clue:
    """Weigh a pitch against another tone of the same fingering, whose register is known by probability."""
    above = LADDER_ABOVE if fingering.is_ladder else FORKED_ABOVE
    interval = pitch_cents - companion_cents
    likelihood = dict.fromkeys(REGISTERS, _STRAY)
    for register in REGISTERS:
        for other in REGISTERS:
            middle = above[register][0] - above[other][0]
            spread = 25.0 if register == other else sqrt(above[register][1] ** 2 + above[other][1] ** 2)
            likelihood[register] += companion[other] * _normal(interval - middle, spread)
    side = "above" if interval >= 0.0 else "below"
    detail = f"{abs(interval):.0f} cents {side} another tone of {fingering} at {_hz(companion_cents):.0f} Hz"
    return Clue(source="same fingering", likelihood=likelihood, detail=detail)


def smeared(x: float, low: float, high: float, spread: float) -> float:
    """Density per cent of a uniform stretch from low to high with normal uncertainty."""
    return (_phi((x - low) / spread) - _phi((x - high) / spread)) / (high - low)


def _phi(z: float) -> float:
    return 0.5 * (1.0 + erf(z / sqrt(2.0)))


def _normal(x: float, spread: float) -> float:
    return exp(-0.5 * (x / spread) ** 2) / (spread * 2.506628)


def _hz(pitch_cents: float) -> float:
    return float(2.0 ** (pitch_cents / 1200.0))
