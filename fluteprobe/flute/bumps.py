"""What the breath resonances of one tone say of its register.

Conventions: a bump is a breath resonance as (ratio to the sounding frequency, prominence in dB). The jet's
turbulence excites every resonance of the air column. So a tone of the first register has no bump below
it, one of the second has one, one of the third two; where none is seen at all, not even under the tone
itself, the room drowns the breath and nothing is said.

The numbers below are shares and spreads counted on some 550 tones of simulated flutes of random build
(seeds 0 to 13 of samples/builds.py among them), widened because real rooms are rougher; none comes from
the flutes that the tests judge.
"""

from collections.abc import Sequence
from math import exp, log2, sqrt

from fluteprobe.flute.evidence import REGISTERS, Clue, Register

Bump = tuple[float, float]

BELOW = (0.22, 0.93)

_CLEAR_DB = 5.0
_OWN = 0.02
_STRAY_SHARE = 0.03
_STRAY_DB = (3.0, 1.5)
# How often no bump is seen below: with the tone's own resonance clear, or faint, or no resonance at all.
_NONE_CLEAR: dict[Register, float] = {1: 0.95, 2: 0.01, 3: 0.01}
_NONE_FAINT: dict[Register, float] = {1: 0.95, 2: 0.04, 3: 0.04}
_NONE_AT_ALL: dict[Register, float] = {1: 0.3, 2: 0.15, 3: 0.15}
# The lower resonances: register -> (share seen, ratios from and to, prominence and its spread in dB).
_LOWER: dict[Register, tuple[tuple[float, float, float, float, float], ...]] = {
    1: (),
    2: ((0.97, 0.45, 0.88, 12.0, 4.0),),
    3: ((0.9, 0.28, 0.56, 8.0, 3.5), (0.88, 0.56, 0.92, 12.0, 5.0)),
}
_SOFT = 0.03
_FLOOR = 1e-4
_SAME_CENTS = 70.0
_RANKS = {1: "first", 2: "second", 3: "third"}


def bump_clue(bumps: Sequence[Bump]) -> Clue:
    """Weigh the bumps of one tone against each register."""
    below = sorted(bump for bump in bumps if BELOW[0] < bump[0] < BELOW[1])
    if not below:
        return Clue(source="breath resonances", likelihood=_without(bumps), detail=_words(bumps, below))
    likelihood = {register: _matched(below, _LOWER[register]) for register in REGISTERS}
    most = max(likelihood.values())
    bounded = {register: max(value, _FLOOR * most) for register, value in likelihood.items()}
    return Clue(source="breath resonances", likelihood=bounded, detail=_words(bumps, below))


def seen_elsewhere_clue(pitch_cents: float, others: Sequence[tuple[float, Sequence[Bump]]]) -> Clue | None:
    """Weigh a tone against the resonances that other takes of its fingering showed where it now sounds.

    `others` are (pitch in cents, bumps) of tones at another pitch. If one of them showed a bump here,
    and so many resonances below it, itself included, this is at least the next; some may have hidden under
    partials, so the word is weak. None if nothing was seen there.
    """
    for other_cents, bumps in others:
        seen = sorted([0.0, *(1200.0 * log2(ratio) for ratio, _ in bumps if ratio % 1.0)])
        here = [cents for cents in seen if abs(other_cents + cents - pitch_cents) < _SAME_CENTS]
        if here and abs(other_cents - pitch_cents) > _SAME_CENTS:
            rank = seen.index(here[0]) + 1
            likelihood: dict[Register, float] = {
                register: 0.6 if register == rank else 0.3 if register == rank + 1 else 0.1
                for register in REGISTERS
            }
            detail = f"another take showed a resonance here, the {_RANKS.get(rank, 'fourth')} that it showed"
            return Clue(source="resonances of other takes", likelihood=likelihood, detail=detail)
    return None


def _without(bumps: Sequence[Bump]) -> dict[Register, float]:
    """Return how likely it is that no bump stands below, by how clearly the breath is heard elsewhere."""
    if not bumps:
        return _NONE_AT_ALL
    own = any(abs(ratio - 1.0) < _OWN for ratio, _ in bumps)
    clear = own and max(prominence for _, prominence in bumps) >= _CLEAR_DB
    return _NONE_CLEAR if clear else _NONE_FAINT


def _strays(bumps: Sequence[Bump]) -> float:
    """Return the density of that many bumps by chance or from the room: rare, and rarer the stronger."""
    density = 1.0
    for _, prominence in bumps:
        least, fall = _STRAY_DB
        density *= _STRAY_SHARE / fall * exp(-max(prominence - least, 0.0) / fall)
    return density


def _matched(bumps: Sequence[Bump], lower: Sequence[tuple[float, float, float, float, float]]) -> float:
    """Return the density of the bumps if they are the given lower resonances, some missed, and strays."""
    if not lower:
        return _strays(bumps)
    (seen, *place), rest = lower[0], lower[1:]
    total = (1.0 - seen) * _matched(bumps, rest)
    for i, bump in enumerate(bumps):
        others = [*bumps[:i], *bumps[i + 1 :]]
        total += seen * _density(bump, *place) * _matched(others, rest)
    return total


def _density(bump: Bump, low: float, high: float, middle_db: float, spread_db: float) -> float:
    """Return the density of a bump: ratios evenly from low to high with soft edges, prominence normal."""
    ratio, prominence = bump
    beyond = max(low - ratio, ratio - high, 0.0)
    across = exp(-0.5 * (beyond / _SOFT) ** 2) / (high - low)
    return across * exp(-0.5 * ((prominence - middle_db) / spread_db) ** 2) / (spread_db * sqrt(6.283185))


def _words(bumps: Sequence[Bump], below: Sequence[Bump]) -> str:
    if below:
        listed = " and ".join(
            f"{ratio:.2f} times the tone ({prominence:.0f} dB)" for ratio, prominence in below
        )
        return f"the breath noise has a bump at {listed}"
    if bumps:
        return "the breath noise shows resonances at the tone and above, none below"
    return "the breath noise shows no resonance at all"
