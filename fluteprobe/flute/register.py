"""Which register sounds: from the tones of a flute to a register, or undecided, for each.

Conventions: register 1 is the lowest resonance of the air column for that fingering, 2 the next, 3 the
next. Pitches are in cents above 1 Hz (1200 log2 of the frequency).

Every tone is judged twice: from what it says itself, and then also from the other tones of its fingering,
whose registers are known by then with some probability. To add a kind of evidence, write a function that
returns a `Clue` and call it from `_own_clues`.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from fluteprobe.flute.bumps import Bump, bump_clue, seen_elsewhere_clue
from fluteprobe.flute.evidence import REGISTERS, Clue, Evidence, Register, RegisterCall, decide
from fluteprobe.flute.fingering import Breath, Fingering
from fluteprobe.flute.ladder import Ladder, companion_clue, known_ladder, ladder_clue
from fluteprobe.flute.model import Dimensions, Model, fitted_model, model_clue

__all__ = [
    "REGISTERS",
    "Dimensions",
    "Evidence",
    "Register",
    "RegisterCall",
    "Sounding",
    "register_alone",
    "registers_of",
]

SAME_PITCH_CENTS = 120.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Sounding:
    """What is known of one tone: its take, fingering and breath, its pitch, its breath resonances."""

    take: str
    fingering: Fingering
    breath: Breath
    pitch_cents: float
    bumps: tuple[Bump, ...] = ()


def register_alone(bumps: Sequence[Bump]) -> RegisterCall:
    """Decide the register of one tone of which nothing is known but its breath resonances."""
    return decide([bump_clue(bumps)])


def registers_of(
    holes: int, soundings: Sequence[Sounding], dimensions: Dimensions | None = None
) -> list[RegisterCall]:
    """Decide the register of every tone of one flute with that many holes, in the order given."""
    flute = known_ladder(holes, _lowest(soundings))
    played = {sounding.fingering for sounding in soundings}
    model = None if dimensions is None else fitted_model(dimensions, flute.rungs, played)
    own = [_own_clues(flute, model, sounding, soundings) for sounding in soundings]
    alone = [decide(clues) for clues in own]
    return [
        decide([*clues, *_companion_clues(sounding, soundings, alone)])
        for sounding, clues in zip(soundings, own, strict=True)
    ]


def _own_clues(
    flute: Ladder, model: Model | None, sounding: Sounding, soundings: Sequence[Sounding]
) -> list[Clue]:
    """Return what a tone's breath resonances, its pitch and its take's name say."""
    if model is None:
        clue = ladder_clue(flute, sounding.fingering, sounding.pitch_cents)
    else:
        clue = model_clue(model, sounding.fingering, sounding.pitch_cents)
    clues = [bump_clue(sounding.bumps)] if clue is None else [bump_clue(sounding.bumps), clue]
    highest = max(other.pitch_cents for other in soundings if other.take == sounding.take)
    if sounding.breath != "over" or sounding.pitch_cents > highest - SAME_PITCH_CENTS:
        clues.append(breath_clue(sounding.breath))
    return clues


def _companion_clues(
    sounding: Sounding, soundings: Sequence[Sounding], alone: Sequence[RegisterCall]
) -> list[Clue]:
    """Compare a tone with the surest other pitch that the same fingering gave."""
    apart = [
        (max(call.probability.values()), other.pitch_cents, call.probability)
        for other, call in zip(soundings, alone, strict=True)
        if other.fingering == sounding.fingering
        and abs(other.pitch_cents - sounding.pitch_cents) > SAME_PITCH_CENTS
    ]
    if not apart:
        return []
    _, companion_cents, probability = max(apart, key=lambda other: other[0])
    clue = companion_clue(sounding.fingering, sounding.pitch_cents, companion_cents, probability)
    others = [(each.pitch_cents, each.bumps) for each in soundings if each.fingering == sounding.fingering]
    seen = seen_elsewhere_clue(sounding.pitch_cents, others)
    return [clue] if seen is None else [clue, seen]


def _lowest(soundings: Sequence[Sounding]) -> Mapping[Fingering, float]:
    """Return the lowest pitch that each fingering gave."""
    lowest: dict[Fingering, float] = {}
    for sounding in soundings:
        lowest[sounding.fingering] = min(lowest.get(sounding.fingering, 1e9), sounding.pitch_cents)
    return lowest


_NAMED: Mapping[Breath, Mapping[Register, float]] = {
    "soft": {1: 1.3, 2: 0.8, 3: 0.6},
    "normal": {1: 1.1, 2: 0.9, 3: 0.8},
    "over": {1: 0.3, 2: 1.6, 3: 1.5},
}


def breath_clue(breath: Breath) -> Clue:
    """Take the breath that the file's name says as a weak hint."""
    detail = {"soft": "blown softly", "normal": "blown normally", "over": "overblown"}[breath]
    return Clue(source="breath in the file name", likelihood=_NAMED[breath], detail=f"the name says {detail}")
