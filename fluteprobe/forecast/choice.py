"""What to try next: the fingerings that fill the chromatic scale above the first register come first.

Conventions: notes are spelt as in the survey; ranks count from 1.
"""

from collections.abc import Iterable, Sequence
from dataclasses import replace
from math import exp

from fluteprobe.forecast.values import Prediction
from fluteprobe.survey import Survey

LIKELY_ENOUGH = 0.2  # to be worth a try

_OFF_CENTS = 25.0  # how far off a note may be before it is a poor one


def with_ranks(predictions: Sequence[Prediction], survey: Survey) -> list[Prediction]:
    """Say which notes would be filled, and what to try first: the best fingering of each, then others."""
    gaps = [_filling(each, survey) for each in predictions]
    worth = [0.0 if each.measured_hz is not None else _worth(each) for each in predictions]
    best: dict[str, int] = {}
    for i in sorted(range(len(predictions)), key=lambda i: -worth[i]):
        note = gaps[i]
        if note is not None and predictions[i].likely_to_speak >= LIKELY_ENOUGH:
            best.setdefault(note, i)
    first = set(best.values())
    order = sorted(
        (
            i
            for i, each in enumerate(predictions)
            if each.measured_hz is None and each.likely_to_speak >= LIKELY_ENOUGH
        ),
        key=lambda i: (i not in first, gaps[i] is None, -worth[i]),
    )
    rank = {i: place for place, i in enumerate(order, start=1)}
    return [replace(each, fills=gaps[i], rank=rank.get(i)) for i, each in enumerate(predictions)]


def _filling(prediction: Prediction, survey: Survey) -> str | None:
    """Return the note that it would add above the first register, or None."""
    first = [entry.frequency_hz for entry in survey.entries if entry.register == 1]
    played = {entry.note for entry in survey.entries}
    above = not first or prediction.frequency_hz > max(first) * 2.0 ** (1.0 / 24.0)
    new = prediction.measured_hz is None and prediction.note not in played
    return prediction.note if above and new else None


def _worth(prediction: Prediction) -> float:
    """Return how well worth a try it is: how likely it speaks, and how near its note it then is."""
    spread = prediction.uncertainty_cents**2 + _OFF_CENTS**2
    return prediction.likely_to_speak * exp(-0.5 * prediction.cents**2 / spread)


def in_order(predictions: Iterable[Prediction]) -> tuple[Prediction, ...]:
    """Put what to try first, then what was measured, then the rest, each low to high."""
    return tuple(
        sorted(
            predictions,
            key=lambda each: (
                each.rank is None,
                each.rank or 0,
                each.measured_hz is None,
                each.register,
                each.frequency_hz,
            ),
        )
    )
