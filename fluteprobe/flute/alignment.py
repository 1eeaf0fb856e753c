"""Which sound of a long recording is which take: what was heard, aligned with the order it was planned in.

Conventions: pitches in cents above 1 Hz (1200 log2 of the frequency); costs are minus natural logarithms of
probabilities; takes and sounds count from 0 in their order. Nothing here knows audio.

The recording is taken for a walk through the order, and the cheapest walk is the answer: `walks.py` says what
a step costs, and how all walks are followed at once. The probability of a step is its share of all walks that
were kept to the end, each weighted by exp(-cost).
"""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt

from fluteprobe.flute.likely import likely_pitches
from fluteprobe.flute.walks import NONE, Heard, Model, Steps, Walks, Wanted, gone_on, start, stop_cost

__all__ = ["Alignment", "Heard", "Part", "Placed", "Wanted", "align"]

Reals = npt.NDArray[np.float64]
Ints = npt.NDArray[np.intp]

_LEAST_TOLD = 0.001

Part = Literal["take", "again", "stray"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Placed:
    """What a sound is: a take (its place in the order), the same again, or none.

    `register` is the one that fits the pitch (None for breath, for a stray sound and for a wild take).
    `probability` is that of this answer; `others` gives the next likely takes (None for no take) with
    theirs.
    """

    part: Part
    take: int | None
    register: int | None
    probability: float
    others: tuple[tuple[int | None, float], ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Alignment:
    """What every sound is, which takes were not heard, and what each take was expected to sound.

    `expected_cents` has shape (takes, 2): middle and deviation of the register that its breath asks for,
    knowing all that was heard. `cost` is that of the whole walk.
    """

    placed: tuple[Placed, ...]
    missing: tuple[int, ...]
    expected_cents: Reals
    cost: float


def align(heard: Sequence[Heard], order: Sequence[Wanted]) -> Alignment:
    """Return what every sound is, by the cheapest walk through the order.

    Raises
    ------
    ValueError
        If the order is empty, or its fingerings are of different flutes.
    """
    if not order:
        raise ValueError("an order has at least one take")
    words = list(dict.fromkeys(take.fingering for take in order))
    model = Model(order, likely_pitches(words), [words.index(take.fingering) for take in order])
    history = [start(model)]
    for sound in heard:
        history.append(gone_on(history[-1], sound, model))
    return _told(history, model)


def _told(history: Sequence[Walks], model: Model) -> Alignment:
    """Return the cheapest walk, and how much of all walks agrees with each of its steps."""
    last = history[-1]
    cost = last.cost + stop_cost(last, model)
    best = int(np.argmin(cost))
    share = np.exp(cost[best] - cost)
    share /= share.sum()
    placed, walk = [], np.arange(len(cost))
    for walks in reversed(history[1:]):
        assert walks.last is not None  # noqa: S101  (only where nothing was heard yet)
        placed.append(_placed(walks.last, walk, share, best))
        walk = walks.last.parent[walk]
    placed.reverse()
    found = {each.take for each in placed}
    return Alignment(
        placed=tuple(placed),
        missing=tuple(take for take in range(model.takes) if take not in found),
        expected_cents=_expected(last, best, model),
        cost=float(cost[best]),
    )


def _expected(walks: Walks, best: int, model: Model) -> Reals:
    """Return middle and deviation of each take's pitch in the register asked for, (takes, 2)."""
    middle, variance = model.expected(walks)
    which = best, np.arange(model.takes), np.argmin(model.register_cost, axis=1)
    return np.stack([middle[which], np.sqrt(variance[which])], axis=1)


def _placed(steps: Steps, walk: Ints, share: Reals, best: int) -> Placed:
    """Return one sound's place on the best walk, and its shares over all walks."""
    weight: dict[int, float] = {}
    for take, each in zip(steps.take[walk].tolist(), share.tolist(), strict=True):
        weight[take] = weight.get(take, 0.0) + each
    mine, register = int(steps.take[walk[best]]), int(steps.register[walk[best]])
    part: Part = "stray" if mine == NONE else "again" if steps.again[walk[best]] else "take"
    others = sorted(
        (chance, take) for take, chance in weight.items() if take != mine and chance > _LEAST_TOLD
    )
    return Placed(
        part=part,
        take=None if mine == NONE else mine,
        register=register if register > 0 else None,
        probability=min(weight[mine], 1.0),
        others=tuple((None if take == NONE else take, chance) for chance, take in reversed(others)),
    )
