"""Walks through an order of takes: from sound to sound, with what each walk has learnt of the flute.

Conventions: pitches in cents above 1 Hz (1200 log2 of the frequency); costs are minus natural logarithms of
probabilities, densities per cent; takes and sounds count from 0 in their order; registers from 1. Nothing
here knows audio.

From one sound to the next the player goes on to the next take, leaves some out, plays the same once more, or
something sounds that is no take. What each of these costs is habit (constants below, no source) and pitch: a
sound is likely to be a take where that take is expected.

Pitch is expected from physics: `likely.py` knows how the pitches of one flute's fingerings hang together, as
a factor model. A sound given to a take in a register is a measurement of these factors; by the rule for
conditioning a normal distribution (Kalman, J. Basic Eng. 82, 35 (1960)) it narrows what is expected of
every other take. So the ladder's first notes tell where the next ones are, and its low tones where its
overblown ones. As what is expected depends on the whole walk, not on its last step, dynamic programming
keeps the cheapest few walks to every take, each with its own factors (list Viterbi decoding: Seshadri &
Sundberg, IEEE Trans. Commun. 42, 313 (1994); per-survivor processing: Raheli, Polydoros & Tzou, ibid. 43,
354 (1995)). A walk's cost is then exactly that of its sounds under the model; only walks that others beat by
far are dropped.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from math import log

import numpy as np
import numpy.typing as npt

from fluteprobe.flute.fingering import Breath, Fingering
from fluteprobe.flute.likely import REGISTERS_KNOWN, LikelyPitches

Reals = npt.NDArray[np.float64]
Ints = npt.NDArray[np.intp]

# How the walk goes on after a take: habit, no source. What is left is for playing on to the next one.
_AGAIN = 0.08
_SKIP = 0.03
_SKIP_ON = 0.6  # each take more that is left out with it
_STOP_EARLY = 0.05  # the rest of the order is left out
# What is no take: any pitch of the range is as likely.
_STRAY_RANGE_CENTS = 6300.0
_STRAY_BREATH = 0.1
# The register that speaks, 1 to 3, by the breath that was asked for.
_SPEAKS: Mapping[Breath, tuple[float, float, float]] = {
    "soft": (0.98, 0.018, 0.002),
    "normal": (0.95, 0.04, 0.01),
    "over": (0.12, 0.75, 0.13),
}
_AGAIN_REGISTERS = (0.6, 0.34, 0.06)  # once more, but in another register
_SILENT: Mapping[Breath, float] = {"soft": 0.05, "normal": 0.03, "over": 0.08}  # only breath is heard
_PLAYED_CENTS = 12.0  # a tone's own deviation: the breath, and a flute that warms
_REPEAT_CENTS = 15.0  # between two takes of the same
_WILD = 0.003  # a take that sounds anywhere above its first register: a slipped finger, a higher register
_SLACK = 3.0  # deviations
# Opening a hole raises a register: the ladder's first by more than this; elsewhere it does not lower it, but
# for the breath. What goes against it costs dear.
_LEAST_RISE_CENTS = 40.0
_MOST_FALL_CENTS = 30.0
_NO_RISE = 7.0
_OPENED = 0.5

_LIST = 32  # walks kept to each take
_MOST_WALKS = 600
_MARGIN = 18.0  # a walk so much dearer than the cheapest is dropped: e^-18 of its probability

_OTHERWISE = 0.2  # of takes played once more
NONE = -1
_WILD_REGISTER = 0
_REGISTERS = np.arange(1, REGISTERS_KNOWN + 1)


@dataclass(frozen=True, slots=True, kw_only=True)
class Wanted:
    """A take of the order: the fingering and the breath."""

    fingering: Fingering
    breath: Breath


@dataclass(frozen=True, slots=True, kw_only=True)
class Heard:
    """A sound between two pauses.

    `pitch_cents` is its longest tone, `highest_cents` its highest (the same where it has but one); both None
    where only breath is heard. `stray` is the probability, by its sound alone, that it is no take.
    """

    pitch_cents: float | None
    highest_cents: float | None = None
    stray: float = 0.03

    @property
    def is_breath(self) -> bool:
        """Whether no tone speaks."""
        return self.pitch_cents is None

    def pitch_for(self, breath: Breath) -> float | None:
        """Return the pitch that counts for a take: overblown ones often begin low, so it is the highest."""
        return self.highest_cents if breath == "over" and self.highest_cents is not None else self.pitch_cents


@dataclass(frozen=True, slots=True, kw_only=True)
class Steps:
    """One step each of some walks; all arrays have shape (steps,).

    `parent` is the walk that it goes on from, `take` the take that the sound is (-1 for none), `register`
    what it speaks in (0 for a pitch out of all, -1 where there is none), `again` whether it is the same take
    once more.
    """

    parent: Ints
    take: Ints
    register: Ints
    again: npt.NDArray[np.bool_]
    cost: Reals


@dataclass(frozen=True, slots=True, kw_only=True)
class Walks:
    """Walks that have come as far as the same sound: where they are, their factors and their costs.

    Shapes: `take`, `cost`, `last_cents`, `last_register` (walks,), `mean` (walks, factors), `spread` (walks,
    factors, factors). `last_cents` is the pitch of the last take, NaN where it was breath; `last` the steps
    that led here.
    """

    take: Ints
    cost: Reals
    mean: Reals
    spread: Reals
    last_cents: Reals
    last_register: Ints
    last: Steps | None = None


class Model:
    """The order with what is expected of each of its takes; arrays by take and register."""

    def __init__(self, order: Sequence[Wanted], likely: LikelyPitches, word: Sequence[int]) -> None:
        self.order = order
        self.takes = len(order)
        self.middle: Reals = likely.middle[word]
        self.loadings: Reals = likely.loadings[word]
        self.noise: Reals = likely.own[word] ** 2 + _PLAYED_CENTS**2
        self.register_cost: Reals = -np.log([_SPEAKS[take.breath] for take in order])
        self.silent: Reals = np.array([_SILENT[take.breath] for take in order])
        self.rises = np.array([[_rises(one, other) for other in order] for one in order])
        self.on_ladder = np.array([take.fingering.is_ladder for take in order])
        gap = np.arange(self.takes + 1)
        self.skip_cost: Reals = np.where(
            gap == 0,
            -log(1.0 - _AGAIN - _SKIP),
            -log(_SKIP) - log(1.0 - _SKIP_ON) - (gap - 1) * log(_SKIP_ON),
        )

    def expected(self, walks: Walks) -> tuple[Reals, Reals]:
        """Return middle and variance of every take's pitch, (walks, takes, registers), noise included."""
        middle = self.middle + np.tensordot(walks.mean, self.loadings, axes=(1, 2))
        flat = self.loadings.reshape(-1, self.loadings.shape[2])
        turned = flat @ walks.spread
        variance = np.sum(turned * flat, axis=2).reshape(middle.shape)
        return middle, variance + self.noise


def start(model: Model) -> Walks:
    """Return the one walk that has not begun."""
    factors = model.loadings.shape[2]
    return Walks(
        take=np.array([NONE]),
        cost=np.zeros(1),
        mean=np.zeros((1, factors)),
        spread=np.eye(factors)[None],
        last_cents=np.array([np.nan]),
        last_register=np.array([NONE]),
    )


def gone_on(walks: Walks, sound: Heard, model: Model) -> Walks:
    """Return the cheapest walks that take in one more sound."""
    steps = _joined(
        _breath_steps(walks, sound, model) if sound.is_breath else _tone_steps(walks, sound, model)
    )
    total = walks.cost[steps.parent] + steps.cost
    arrived = np.where(steps.take == NONE, walks.take[steps.parent], steps.take)
    return _moved(walks, sound, model, _chosen(steps, _kept(arrived, total)))


def stop_cost(walks: Walks, model: Model) -> Reals:
    """Return what it costs to end there: the takes that are left were left out, or it ended early."""
    gap = model.takes - walks.take - 1
    return np.where(gap > 0, np.minimum(model.skip_cost[np.maximum(gap, 1)], -log(_STOP_EARLY)), 0.0)


def _steps(parent: npt.ArrayLike, take: npt.ArrayLike, register: npt.ArrayLike, cost: npt.ArrayLike) -> Steps:
    """Return steps from arrays that broadcast to one another."""
    parts = np.broadcast_arrays(parent, take, register, cost)
    parents, takes, registers, costs = (part.ravel() for part in parts)
    again = np.zeros(len(parents), np.bool_)
    return Steps(parent=parents, take=takes, register=registers, again=again, cost=costs)


def _joined(steps: Sequence[Steps]) -> Steps:
    return Steps(
        parent=np.concatenate([part.parent for part in steps]),
        take=np.concatenate([part.take for part in steps]),
        register=np.concatenate([part.register for part in steps]),
        again=np.concatenate([part.again for part in steps]),
        cost=np.concatenate([part.cost for part in steps]),
    )


def _chosen(steps: Steps, which: Ints) -> Steps:
    return Steps(
        parent=steps.parent[which],
        take=steps.take[which],
        register=steps.register[which],
        again=steps.again[which],
        cost=steps.cost[which],
    )


def _repeated(steps: Steps) -> Steps:
    return replace(steps, again=np.ones(len(steps.parent), np.bool_))


def _breath_steps(walks: Walks, sound: Heard, model: Model) -> list[Steps]:
    """Return how walks can go on where only breath is heard: nothing, or a take that failed."""
    every = np.arange(len(walks.take))
    stray = max(sound.stray, _STRAY_BREATH)
    failed = -np.log(model.silent) - log(1.0 - stray)
    onward = _onward_cost(walks, model) + failed
    old = np.flatnonzero(walks.take != NONE)
    again = failed[walks.take[old]] - log(_AGAIN)
    return [
        _steps(every, NONE, NONE, -log(stray)),
        _steps(every[:, None], np.arange(model.takes), NONE, onward),
        _repeated(_steps(old, walks.take[old], NONE, again)),
    ]


def _tone_steps(walks: Walks, sound: Heard, model: Model) -> list[Steps]:
    """Return how walks can go on where a tone speaks: no take, on to a later take, or the same again."""
    every, takes = np.arange(len(walks.take)), np.arange(model.takes)
    anywhere = log(_STRAY_RANGE_CENTS)
    pitch = _pitch_for(sound, model)
    middle, variance = model.expected(walks)
    off = _normal_cost(pitch[:, None] - middle, variance) - log(1.0 - _WILD)
    speaks = -np.log(1.0 - model.silent) - log(1.0 - sound.stray)
    onward = _onward_cost(walks, model) + speaks
    in_register = onward[:, :, None] + off + model.register_cost + _unrisen_cost(walks, pitch, model)
    too_low = pitch < middle[:, :, 0] - _SLACK * np.sqrt(variance[:, :, 0])
    wild = np.where(too_low, np.inf, onward + anywhere - log(_WILD))
    return [
        _steps(every, NONE, NONE, anywhere - log(sound.stray)),
        _steps(every[:, None, None], takes[:, None], _REGISTERS, in_register),
        _steps(every[:, None], takes, _WILD_REGISTER, wild),
        *_again_steps(walks, pitch, off, speaks - log(_AGAIN)),
    ]


def _unrisen_cost(walks: Walks, pitch: Reals, model: Model) -> Reals:
    """Return what it costs that a register does not rise with more open holes, (walks, takes, registers)."""
    known = np.isfinite(walks.last_cents) & (walks.last_register > 0)
    here = np.where(known, walks.take, 0)
    register = np.where(known, walks.last_register, 1)
    rises = np.where(known[:, None], model.rises[here, :, register - 1], 0)
    risen = rises * (pitch - np.where(known, walks.last_cents, 0.0)[:, None])
    rungs = model.on_ladder[here, None] & model.on_ladder & (register[:, None] == 1)
    least = np.where(rungs, _LEAST_RISE_CENTS, -_MOST_FALL_CENTS)
    cost = np.where((rises != 0) & (risen < least), _NO_RISE, 0.0)
    return np.asarray(cost[:, :, None] * (register[:, None, None] == _REGISTERS))


def _again_steps(walks: Walks, pitch: Reals, off: Reals, cost: Reals) -> list[Steps]:
    """Return how walks can play their last take once more: as before, or in another register."""
    sounded = np.flatnonzero(np.isfinite(walks.last_cents))
    here = walks.take[sounded]
    same = _normal_cost(pitch[here] - walks.last_cents[sounded], 2.0 * _REPEAT_CENTS**2)
    every = np.flatnonzero(walks.take != NONE)
    there = walks.take[every]
    other = off[every, there] + cost[there, None] - np.log(_AGAIN_REGISTERS)
    other = np.where(walks.last_register[every, None] == _REGISTERS, np.inf, other - log(_OTHERWISE))
    return [
        _repeated(
            _steps(sounded, here, walks.last_register[sounded], same + cost[here] - log(1.0 - _OTHERWISE))
        ),
        _repeated(_steps(every[:, None], there[:, None], _REGISTERS, other)),
    ]


def _rises(one: Wanted, other: Wanted) -> tuple[int, int, int]:
    """Return whether registers 1 to 3 rise (1) or fall (-1) from one take to another; 0 where unknown.

    The first register rises wherever holes are opened and none is closed, by half at least; the second on the
    ladder as well. Of the third nothing is said.
    """
    opened = np.subtract(other.fingering.openness, one.fingering.openness)
    both_ways = opened.min() < 0.0 < opened.max()
    way = 0 if both_ways or np.abs(opened).max() < _OPENED else int(np.sign(opened.sum()))
    on_ladder = one.fingering.is_ladder and other.fingering.is_ladder
    return way, way if on_ladder else 0, 0


def _onward_cost(walks: Walks, model: Model) -> Reals:
    """Return what it costs to go on to each take, (walks, takes); infinite for those behind."""
    gap = np.arange(model.takes) - walks.take[:, None] - 1
    return np.where(gap >= 0, model.skip_cost[np.maximum(gap, 0)], np.inf)


def _pitch_for(sound: Heard, model: Model) -> Reals:
    return np.array([sound.pitch_for(take.breath) for take in model.order], dtype=np.float64)


def _normal_cost(off: Reals, variance: Reals | float) -> Reals:
    return np.asarray(0.5 * (off**2 / variance + np.log(2.0 * np.pi * variance)))


def _kept(take: Ints, cost: Reals) -> Ints:
    """Return which walks go on: to each take the cheapest few, none far dearer than the cheapest."""
    order = np.argsort(cost, kind="stable")
    order = order[cost[order] < cost[order[0]] + _MARGIN]
    seen: dict[int, int] = {}
    kept = []
    for walk, place in zip(order.tolist(), take[order].tolist(), strict=True):
        seen[place] = seen.get(place, 0) + 1
        if seen[place] <= _LIST:
            kept.append(walk)
        if len(kept) == _MOST_WALKS:
            break
    return np.array(kept, dtype=np.intp)


def _moved(walks: Walks, sound: Heard, model: Model, steps: Steps) -> Walks:
    """Return walks after their step, with what the pitch tells of their flutes."""
    placed = steps.take != NONE
    last_cents, last_register = walks.last_cents[steps.parent], walks.last_register[steps.parent]
    mean, spread = walks.mean[steps.parent], walks.spread[steps.parent]
    if sound.is_breath:
        anew = placed & ~steps.again
        last_cents = np.where(anew, np.nan, last_cents)
        last_register = np.where(anew, NONE, last_register)
    else:
        pitch = _pitch_for(sound, model)
        last_cents = np.where(placed, pitch[steps.take], last_cents)
        last_register = np.where(placed, steps.register, last_register)
        as_before = steps.again & (steps.register == walks.last_register[steps.parent])
        tells = np.flatnonzero(placed & (steps.register > 0) & ~as_before)
        which = steps.take[tells], steps.register[tells] - 1
        off = pitch[which[0]] - model.middle[which]
        mean[tells], spread[tells] = _learnt(
            mean[tells], spread[tells], model.loadings[which], off, model.noise[which]
        )
    return Walks(
        take=np.where(placed, steps.take, walks.take[steps.parent]),
        cost=walks.cost[steps.parent] + steps.cost,
        mean=mean,
        spread=spread,
        last_cents=last_cents,
        last_register=last_register,
        last=steps,
    )


def _learnt(mean: Reals, spread: Reals, loads: Reals, off: Reals, noise: Reals) -> tuple[Reals, Reals]:
    """Condition the factors on one pitch each: Kalman's update for a scalar measurement."""
    gain = np.einsum("wij,wj->wi", spread, loads)
    variance = np.einsum("wi,wi->w", gain, loads) + noise
    left = off - np.einsum("wi,wi->w", loads, mean)
    mean = mean + gain * (left / variance)[:, None]
    spread = spread - gain[:, :, None] * gain[:, None, :] / variance[:, None, None]
    return mean, spread
