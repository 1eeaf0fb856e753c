"""What pitches a flute of so many holes may have, before it was heard: its fingerings' resonances by chance.

Conventions: pitches in cents above 1 Hz (1200 log2 of the frequency); registers count from 1 and are the
second axis of arrays; a deviation is a standard one. The same fingerings give the same values at each call.

Flutes are laid out at random (bore, wall, holes and steps of the scale as they are usual, common practice, no
source), and the tube model of `tube.py` says at what pitches each fingering resonates. Over all these flutes
the pitches lie about a middle and move together along a few directions: how low the flute is, how wide each
step, how large the holes. That is a factor model, z = middle + loadings u + own deviation, with u
standard normal (principal components: Jolliffe, Principal Component Analysis, 2002, ch. 7).
"""

from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from itertools import islice

import numpy as np
import numpy.typing as npt

from fluteprobe.flute.fingering import Fingering, ladder
from fluteprobe.flute.tube import FOOT_CORRECTION, Tube, resonances
from fluteprobe.flute.tuning import speed_of_sound_m_per_s

Reals = npt.NDArray[np.float64]

REGISTERS_KNOWN = 3

_FLUTES = 24
_SEED = 20
_TRIES = 40
_LOWEST_HZ = 330.0  # of the flutes laid out; how low the flute really is stands apart
_USUAL_CENTS = 1200.0 * np.log2(400.0)
_ANY_CENTS = 800.0  # two flutes in three have their lowest note within 250 to 640 Hz
_SPAN_CENTS = 1180.0  # of a usual ladder: its holes share an octave, few of them in wider steps
_MIDDLE_STEPS_CENTS = (160.0, 235.0)
_STEP_CENTS = 65.0
_STEP_LIMITS_CENTS = (70.0, 420.0)
_FACTORS = 12
_WIDER = 1.3  # real flutes differ more than laid-out ones: two chambers, conical bores, undercut holes
_OWN_CENTS = (15.0, 30.0, 45.0)  # what the tube model leaves of each register, two in three; no source
_MISSING_CENTS = 400.0
_LUCK = {"x": (0.0, 0.0), "o": (1.0, 1.0), "h": (0.3, 0.6), "v": (0.03, 0.15)}  # how far a hole is uncovered


@dataclass(frozen=True, slots=True, kw_only=True)
class LikelyPitches:
    """The pitches of some fingerings in registers 1 to 3 before the flute was heard.

    `middle` and `own` (a deviation) have shape (fingerings, 3), `loadings` (fingerings, 3, factors).
    """

    middle: Reals
    loadings: Reals
    own: Reals


def likely_pitches(fingerings: Sequence[Fingering]) -> LikelyPitches:
    """Return what is to be expected of some fingerings of one flute.

    Raises
    ------
    ValueError
        If there is no fingering, or they are of flutes with different numbers of holes.
    """
    if len({fingering.holes for fingering in fingerings}) != 1:
        raise ValueError("fingerings of one flute are needed, all with the same number of holes")
    return _likely(tuple(fingerings))


@lru_cache(maxsize=8)
def _likely(fingerings: tuple[Fingering, ...]) -> LikelyPitches:
    holes = fingerings[0].holes
    random = np.random.default_rng([_SEED, holes, len(fingerings)])
    pitches = np.stack([_pitches(tube, _uncovered(fingerings, random)) for tube in _flutes(holes)])
    missing = np.isnan(pitches).mean(axis=0)
    middle = np.nanmean(pitches, axis=0, where=~np.isnan(pitches) | (missing == 1.0))
    middle = np.where(missing == 1.0, np.nanmax(middle), middle)
    away = np.where(np.isnan(pitches), 0.0, pitches - middle).reshape(len(pitches), -1)
    factors, left = _factors(away)
    own = np.hypot(left.reshape(middle.shape), _OWN_CENTS) + missing * _MISSING_CENTS
    loadings = np.concatenate([_ANY_CENTS * np.ones((1, away.shape[1])), _WIDER * factors])
    return LikelyPitches(
        middle=middle + _USUAL_CENTS, loadings=loadings.T.reshape(*middle.shape, -1), own=own
    )


def _factors(away: Reals) -> tuple[Reals, Reals]:
    """Return the directions in which flutes differ, (factors, pitches), and what is left beside them."""
    _, size, directions = np.linalg.svd(away / np.sqrt(len(away)), full_matrices=False)
    factors = size[:_FACTORS, None] * directions[:_FACTORS]
    left = np.mean(away**2, axis=0) - np.sum(factors**2, axis=0)
    return factors, np.sqrt(np.maximum(left, 0.0))


def _uncovered(fingerings: Sequence[Fingering], random: np.random.Generator) -> Reals:
    """Return how far each hole is open, shape (fingerings, holes), with a finger's luck on half holes."""
    return np.array([[random.uniform(*_LUCK[state]) for state in word.states] for word in fingerings])


def _pitches(tube: Tube, openness: Reals) -> Reals:
    """Return a flute's pitches over its own lowest note, in cents, shape (fingerings, 3)."""
    lowest_hz = resonances(tube, ladder(len(tube.holes_mm))[:1], 1).frequency_hz[0, 0]
    cents = 1200.0 * np.log2(resonances(tube, openness, REGISTERS_KNOWN).frequency_hz / lowest_hz)
    return np.asarray(cents)


@lru_cache(maxsize=4)
def _flutes(holes: int) -> tuple[Tube, ...]:
    """Return flutes laid out at random whose ladder rises by steps that are usual."""
    random = np.random.default_rng([_SEED, holes])
    drawn = (_drawn(holes, random) for _ in range(_TRIES * _FLUTES))
    usual = (tube for tube in drawn if tube is not None and _steps_are_usual(tube))
    return tuple(islice(usual, _FLUTES))


def _steps_are_usual(tube: Tube) -> bool:
    rungs = resonances(tube, ladder(len(tube.holes_mm)), 1).frequency_hz[:, 0]
    steps = 1200.0 * np.diff(np.log2(rungs))
    return bool(np.all((steps > _STEP_LIMITS_CENTS[0]) & (steps < _STEP_LIMITS_CENTS[1])))


def _drawn(holes: int, random: np.random.Generator) -> Tube | None:
    """Return one flute, None where the holes fall upon one another.

    A hole stands where half a wave of its note ends, less the length that its narrow mouth adds: about the
    hole's own depth and end, times the bore's area over the hole's.
    """
    bore = random.uniform(15.0, 23.0)
    wall, ratio = random.uniform(3.0, 6.0), random.uniform(0.34, 0.55, holes)
    head = bore * random.uniform(2.0, 4.5)
    middle = np.clip(_SPAN_CENTS / holes, *_MIDDLE_STEPS_CENTS)
    steps = np.clip(random.normal(middle, _STEP_CENTS, holes), *_STEP_LIMITS_CENTS)
    notes_hz = _LOWEST_HZ * 2.0 ** (np.concatenate([[0.0], np.cumsum(steps)]) / 1200.0)
    ends = 500.0 * speed_of_sound_m_per_s(20.0) / notes_hz - head
    sizes = ratio * bore
    places = ends[1:] - 0.45 * (wall + 0.7 * sizes) / ratio**2
    length = float(ends[0] - FOOT_CORRECTION * bore / 2.0)
    pairs = tuple((float(p), float(d)) for p, d in zip(places[::-1], sizes[::-1], strict=True))
    try:
        return Tube(bore_mm=bore, length_mm=length, wall_mm=wall, holes_mm=pairs, head_correction_mm=head)
    except ValueError:
        return None
