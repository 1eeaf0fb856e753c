"""One flute among the others: how far each note is from theirs, how fast it beats with them, and the whole.

Conventions: those of `values`. The others' pitch in a row is the median of all flutes but this one, and its
standard uncertainty is that of a median of as many: 1.2533 of a mean's (JCGM 100:2008 knows means alone;
for the median of normal values see Kendall & Stuart, The Advanced Theory of Statistics, vol. 1, ch. 10).
"""

from dataclasses import dataclass, replace
from math import sqrt

import numpy as np

from fluteprobe.compare.pairs import FEWEST_FOR_OFFSET, verdicts_of
from fluteprobe.compare.statistics import combined, common_offset
from fluteprobe.compare.values import Cell, Comparison, Row, Verdict
from fluteprobe.flute.fingering import Fingering

MEDIAN_OVER_MEAN = 1.2533  # √(π/2): standard errors of normal values


@dataclass(frozen=True, slots=True, kw_only=True)
class Stand:
    """One flute in one row: its own cell, and how it is apart from the others.

    `own` is None where it does not play the row, the other fields where nobody else does. `lend` is the
    fingering that most of the others with as many holes use, `players` how many of all play the row.
    """

    row: int
    own: Cell | None
    others_cents: float | None
    off_cents: float | None
    uncertainty_cents: float | None
    verdict: Verdict | None
    beats_hz: float | None
    lend: Fingering | None
    players: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Standing:
    """One flute among the others: every row, and the flute as a whole (None with too few shared rows)."""

    flute: int
    rows: tuple[Stand, ...]
    whole_cents: float | None
    whole_uncertainty_cents: float | None


def standing_of(comparison: Comparison, flute: int) -> Standing:
    """Return how a flute stands among the others of a comparison."""
    holes = comparison.flutes[flute].facts.holes
    stands = [_stand(row, k, flute, holes) for k, row in enumerate(comparison.rows)]
    known = [k for k, stand in enumerate(stands) if stand.off_cents is not None]
    off = np.array([stands[k].off_cents for k in known], dtype=np.float64)
    doubt = np.array([stands[k].uncertainty_cents for k in known], dtype=np.float64)
    _, verdicts = verdicts_of(off, doubt)
    for k, verdict in zip(known, verdicts, strict=True):
        stands[k] = replace(stands[k], verdict=verdict)
    whole = common_offset(off, doubt) if len(known) >= FEWEST_FOR_OFFSET else None
    return Standing(
        flute=flute,
        rows=tuple(stands),
        whole_cents=whole.value if whole else None,
        whole_uncertainty_cents=whole.uncertainty if whole else None,
    )


def _stand(row: Row, place: int, flute: int, holes: int) -> Stand:
    own = row.cells[flute]
    others = [cell for cell in row.played if cell.flute != flute]
    cents = _median([cell.cents for cell in others])
    off = None if own is None or cents is None else own.cents - cents
    return Stand(
        row=place,
        own=own,
        others_cents=cents,
        off_cents=off,
        uncertainty_cents=None if own is None or off is None else _uncertainty(own, others),
        verdict=None,
        beats_hz=None if own is None or off is None else _beats_hz(own.frequency_hz, off),
        lend=_usual([cell.fingering for cell in others if cell.fingering.holes == holes]),
        players=len(others),
    )


def _beats_hz(frequency_hz: float, off_cents: float) -> float:
    """Return how fast a tone beats with one that it is so many cents above."""
    return float(abs(frequency_hz * (1.0 - 2.0 ** (-off_cents / 1200.0))))


def _median(values: list[float]) -> float | None:
    return float(np.median(values)) if values else None


def _uncertainty(own: Cell, others: list[Cell]) -> float:
    mean = float(combined(*(cell.uncertainty_cents for cell in others))) / len(others)
    widened = MEDIAN_OVER_MEAN if len(others) > 2 else 1.0  # of one or two the median is the mean
    return max(1e-3, sqrt(own.uncertainty_cents**2 + (widened * mean) ** 2))


def _usual(fingerings: list[Fingering]) -> Fingering | None:
    """Return the fingering used most, of equals the first."""
    if not fingerings:
        return None
    return max(dict.fromkeys(fingerings), key=fingerings.count)
