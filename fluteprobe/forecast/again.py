"""What to record next: a forecast becomes planned takes.

Conventions: the best first, as the forecast ranks them; all are overblown. What a take should give is told in
words, with its standard uncertainty and the chance that it speaks.
"""

from fluteprobe.flute.plan import PlannedTake
from fluteprobe.forecast.values import Forecast, Prediction

MOST_TAKES = 24

_BASIS = "estimates: the note, cents off it ± standard uncertainty, and how likely it speaks"
_FILLING = ("New notes", "Each would give a note above the first register that nothing played so far gives.")
_OTHERS = ("Other ways", "Likely to speak: other fingerings for notes that are there, or nearly in tune.")


def next_takes(forecast: Forecast, most: int = MOST_TAKES) -> tuple[PlannedTake, ...]:
    """Return the takes worth recording next, none of a fingering and breath twice."""
    ranked = sorted((each for each in forecast.predictions if each.rank), key=lambda each: each.rank or 0)
    first: dict[str, Prediction] = {}
    for each in ranked:
        first.setdefault(str(each.fingering), each)
    chosen = list(first.values())[:most]
    filling, others = ([p for p in chosen if (p.fills is not None) == new] for new in (True, False))
    return tuple(_planned(each, *_FILLING) for each in filling) + tuple(
        _planned(each, *_OTHERS) for each in others
    )


def _planned(prediction: Prediction, group: str, why: str) -> PlannedTake:
    return PlannedTake(
        fingering=prediction.fingering,
        breath="over",
        group=group,
        why=why,
        basis=_BASIS,
        number=prediction.tried + 1,
        expects=_expected(prediction),
    )


def _expected(prediction: Prediction) -> str:
    """Return note, deviation and chance: `A♯5 −17 ± 27, 92 %`."""
    note, cents = prediction.note.replace("#", "♯"), f"{prediction.cents:+.0f}".replace("-", "−")
    return f"{note} {cents} ± {prediction.uncertainty_cents:.0f}, {100 * prediction.likely_to_speak:.0f} %"
