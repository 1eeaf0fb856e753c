"""The A4 at which the most of what is asked for is in tune.

Conventions: `deviations` maps each note that is asked for to how far the flute's tones are off it, in cents,
at the A4 that was given; `weights` says how much each note counts. An offset moves the A4, in cents, by at
most `REACH_CENTS` either way: further is another key.

A note is met where an offset leaves one of its tones within the tolerance, on a union of intervals. Where
the most weight is met at once, the offset is the weighted mean of the nearest deviations, which is that of
least squares, or the nearest to it that loses none.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import pairwise

REACH_CENTS = 50.0

Deviations = Mapping[float, Sequence[float]]
Weights = Mapping[float, float]


@dataclass(frozen=True, slots=True, kw_only=True)
class _Stretch:
    """Offsets between which the same notes are met, and how much weight they have."""

    weight: float
    low_cents: float
    high_cents: float


def best_offset_cents(deviations: Deviations, weights: Weights, tolerance_cents: float) -> float:
    """Return how far to move A4 so that the most weight is within the tolerance; 0 where nothing can be."""
    stretches = _stretches(deviations, weights, tolerance_cents)
    if not stretches:
        return 0.0
    most = max(stretch.weight for stretch in stretches)
    found = [
        _settled(deviations, weights, stretch, tolerance_cents)
        for stretch in stretches
        if stretch.weight >= most * (1.0 - 1e-9)
    ]
    return min(found, key=lambda settled: (round(settled[1], 6), abs(settled[0])))[0]


def _stretches(deviations: Deviations, weights: Weights, tolerance_cents: float) -> list[_Stretch]:
    """Return the stretches of offsets between two changes, from low to high, where any weight is met."""
    changes: list[tuple[float, float]] = []
    for target, found in deviations.items():
        for low, high in _united(found, tolerance_cents):
            changes += [(low, weights[target]), (high, -weights[target])]
    changes.sort(key=lambda change: (change[0], -change[1]))
    stretches, met = [], 0.0
    for (place, weight), (after, _) in pairwise(changes):
        met += weight
        if met > 0.0:
            stretches.append(_Stretch(weight=met, low_cents=place, high_cents=after))
    return stretches


def _united(deviations: Sequence[float], tolerance_cents: float) -> list[tuple[float, float]]:
    """Return the union of the intervals of ± a tolerance around each deviation, within reach."""
    united: list[tuple[float, float]] = []
    for deviation in sorted(deviations):
        low = max(deviation - tolerance_cents, -REACH_CENTS)
        high = min(deviation + tolerance_cents, REACH_CENTS)
        if low > high:
            continue
        if united and low <= united[-1][1]:
            united[-1] = (united[-1][0], max(high, united[-1][1]))
        else:
            united.append((low, high))
    return united


def _settled(
    deviations: Deviations, weights: Weights, stretch: _Stretch, tolerance_cents: float
) -> tuple[float, float]:
    """Return the best offset inside a stretch, and the sum of squares that it leaves (cents squared)."""
    middle = (stretch.low_cents + stretch.high_cents) / 2.0
    nearest = {
        target: min(found, key=lambda deviation: abs(deviation - middle))
        for target, found in deviations.items()
        if any(abs(deviation - middle) <= tolerance_cents + 1e-9 for deviation in found)
    }
    total = sum(weights[target] for target in nearest)
    mean = sum(weights[target] * deviation for target, deviation in nearest.items()) / total
    offset = min(max(mean, stretch.low_cents), stretch.high_cents)
    left = sum(weights[target] * (deviation - offset) ** 2 for target, deviation in nearest.items())
    return offset, left
