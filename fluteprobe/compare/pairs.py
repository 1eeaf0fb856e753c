"""Two flutes at a time: their offset as wholes, single notes beside it, and which differences are real.

Conventions: a difference is the first flute minus the second, in cents; uncertainties are standard and
combined by JCGM 100:2008, eq. 10 for what is independent and eq. 13 for a note and the offset that rests on
it. A difference is called one where it is larger than SURE combined standard uncertainties; of those that are
called "different", the expected share of chance is at most FALSE_SHARE (Benjamini & Hochberg 1995).
"""

from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass, replace
from itertools import combinations
from math import log, sqrt

import numpy as np

from fluteprobe.compare.statistics import (
    FALSE_SHARE,
    MAD_TO_SIGMA,
    SURE,
    Mean,
    Reals,
    adjusted,
    chance_of,
    combined,
    common_offset,
    weighted_median,
)
from fluteprobe.compare.table import Table
from fluteprobe.compare.values import Beats, Difference, Flute, Pair, Verdict
from fluteprobe.flute.tuning import temperature_shift_cents

PAIRS_UP_TO = 32  # flutes; of more, every pair is more than anybody reads
FEWEST_FOR_OFFSET = 3
# A blown flute is warmed by the breath, so that its air follows the room's only in part: a tenth of what a
# pitch is carried counts as its standard uncertainty. An estimate of ours, no source.
CARRIED_SHARE = 0.1
# Where nobody tells the air's temperature: anything from 12 to 28 °C, as a rectangular distribution
# (JCGM 100:2008, 4.3.7). The range is common practice for rooms, no source.
UNKNOWN_AIR_C = (12.0, 28.0)
FEWEST_TO_WIDEN, PLAINLY_WIDER = 6, 1.5

_CENTS = log(2.0) / 1200.0  # what a cent is of a frequency


@dataclass(frozen=True, slots=True, kw_only=True)
class _Weighed:
    """A pair's arrays, one number for each shared row."""

    flutes: tuple[int, int]
    rows: tuple[int, ...]
    apart: Reals
    whole_uncertainty: Reals
    offset: Mean | None
    offset_uncertainty: float
    alone: Reals
    alone_uncertainty: Reals
    widened: float


def pairs_of(table: Table, flutes: Sequence[Flute]) -> tuple[Pair, ...]:
    """Return every pair that shares a row, up to PAIRS_UP_TO flutes, and none for more."""
    if len(flutes) > PAIRS_UP_TO:
        return ()
    weighed = [
        w
        for a, b in combinations(range(len(flutes)), 2)
        if (w := _weighed(table, flutes, (a, b))) is not None
    ]
    whole = _called(_scores(w.apart, w.whole_uncertainty) for w in weighed)
    alone = _called(_scores(w.alone, w.alone_uncertainty) for w in weighed)
    offset = _called(
        [np.array([0.0 if w.offset is None else w.offset.value / w.offset_uncertainty]) for w in weighed]
    )
    return tuple(
        _pair(w, table, whole[k], alone[k], _offset_verdict(w, flutes, offset[k][1][0]))
        for k, w in enumerate(weighed)
    )


def verdicts_of(values: Reals, uncertainties: Reals) -> tuple[Reals, tuple[Verdict | None, ...]]:
    """Return adjusted probabilities and verdicts of values (values,) that chance alone scatters about 0."""
    ((probabilities, verdicts),) = _called([_scores(values, uncertainties)])
    return probabilities, verdicts


def beats_between(table: Table, row: int, flutes: tuple[int, int]) -> Beats:
    """Return how fast two flutes beat in a row that both have: the difference of their frequencies."""
    hz = [float(2.0 ** (table.pitch[row, flute] / 1200.0)) for flute in flutes]
    doubts = [f * _CENTS * float(table.uncertainty[row, flute]) for f, flute in zip(hz, flutes, strict=True)]
    return Beats(flutes=flutes, rate_hz=abs(hz[0] - hz[1]), uncertainty_hz=float(combined(*doubts)))


def unknown_air_cents() -> float:
    """Return the standard uncertainty of a sitting's pitch where the air's temperature is not known."""
    return temperature_shift_cents(*UNKNOWN_AIR_C) / sqrt(12.0)


# --- one pair ----------------------------------------------------------------------------------------


def _weighed(table: Table, flutes: Sequence[Flute], pair: tuple[int, int]) -> _Weighed | None:
    first, second = (table.pitch[:, flute] for flute in pair)
    rows = np.flatnonzero(np.isfinite(first) & np.isfinite(second))
    if not len(rows):
        return None
    apart = (first - second)[rows]
    own = combined(*(table.uncertainty[rows, flute] for flute in pair))
    one, other = (flutes[k] for k in pair)
    widened = _widening(apart, own) if one.kin == other.kin else 1.0
    own = np.maximum(widened * own, 1e-3)
    carried = _carried_uncertainty(one, other)
    offset = common_offset(apart, own) if len(rows) >= FEWEST_FOR_OFFSET else None
    return _Weighed(
        flutes=pair,
        rows=tuple(int(row) for row in rows),
        apart=apart,
        whole_uncertainty=combined(own, carried),
        offset=offset,
        offset_uncertainty=float(combined(offset.uncertainty, carried)) if offset else 1.0,
        alone=apart - offset.value if offset else np.zeros_like(apart),
        alone_uncertainty=_alone_uncertainty(own, offset) if offset else np.ones_like(apart),
        widened=widened,
    )


def _alone_uncertainty(own: Reals, offset: Mean) -> Reals:
    """Return the uncertainty of differences less their offset; those it rests on are correlated with it.

    JCGM 100:2008, eq. 13: the covariance of a value and the weighted mean that it is in is the mean's own
    variance, here before it was widened.
    """
    covariance = np.where(offset.kept, 1.0 / (1.0 / own[offset.kept] ** 2).sum(), 0.0)
    return np.sqrt(np.maximum(own**2 + offset.uncertainty**2 - 2.0 * covariance, 1e-6))


def _widening(apart: Reals, own: Reals) -> float:
    """Return by how much one flute's notes plainly scatter more from sitting to sitting than they tell."""
    if len(apart) < FEWEST_TO_WIDEN:
        return 1.0
    own = np.maximum(own, 1e-3)
    ratio = MAD_TO_SIGMA * float(np.median(np.abs(apart - weighted_median(apart, own)) / own))
    return ratio if ratio > PLAINLY_WIDER else 1.0


def _carried_uncertainty(one: Flute, other: Flute) -> float:
    if one.shift_cents is None or other.shift_cents is None:
        return 0.0
    return CARRIED_SHARE * abs(one.shift_cents - other.shift_cents)


# --- what is real ------------------------------------------------------------------------------------


def _scores(values: Reals, uncertainties: Reals) -> Reals:
    return np.asarray(values / uncertainties)


def _called(scores: Iterable[Reals]) -> list[tuple[Reals, tuple[Verdict | None, ...]]]:
    """Return, for several lists of scores that are judged together, probabilities and verdicts."""
    parts = list(scores)
    together = np.concatenate([np.zeros(0), *parts])
    probabilities = adjusted(chance_of(together))
    cuts = np.cumsum([len(part) for part in parts])[:-1]
    return [
        (part, tuple(_verdict(z, p) for z, p in zip(score, part, strict=True)))
        for score, part in zip(parts, np.split(probabilities, cuts) if parts else [], strict=True)
    ]


def _verdict(score: float, probability: float) -> Verdict | None:
    if not abs(score) > SURE:
        return None
    return "different" if probability <= FALSE_SHARE else "likely"


def _offset_verdict(weighed: _Weighed, flutes: Sequence[Flute], verdict: Verdict | None) -> Verdict | None:
    """Return the verdict of an offset, which unknown air may explain."""
    unknown = sum(flutes[k].shift_cents is None for k in weighed.flutes)
    if verdict is None or weighed.offset is None or not unknown:
        return verdict
    reach = combined(weighed.offset_uncertainty, sqrt(unknown) * unknown_air_cents())
    return verdict if abs(weighed.offset.value) > SURE * reach else "air"


Judged = tuple[Reals, tuple[Verdict | None, ...]]


def _pair(
    weighed: _Weighed, table: Table, whole: Judged, alone: Judged, offset_verdict: Verdict | None
) -> Pair:
    offset = weighed.offset
    differences = _differences(weighed, table, whole, alone)
    if offset_verdict == "air":
        differences = (_perhaps_air(difference) for difference in differences)
    return Pair(
        flutes=weighed.flutes,
        offset_cents=offset.value if offset else None,
        offset_uncertainty_cents=weighed.offset_uncertainty if offset else None,
        offset_verdict=offset_verdict,
        widened=weighed.widened,
        differences=tuple(differences),
    )


def _perhaps_air(difference: Difference) -> Difference:
    """Return a difference of which nothing remains beside an offset that the air may explain, told so."""
    if difference.verdict is None or difference.alone_verdict is not None:
        return difference
    return replace(difference, verdict="air")


def _differences(weighed: _Weighed, table: Table, whole: Judged, alone: Judged) -> Iterator[Difference]:
    known = weighed.offset is not None
    for k, row in enumerate(weighed.rows):
        yield Difference(
            row=row,
            cents=float(weighed.apart[k]),
            uncertainty_cents=float(weighed.whole_uncertainty[k]),
            probability=float(whole[0][k]),
            verdict=whole[1][k],
            alone_cents=float(weighed.alone[k]) if known else None,
            alone_uncertainty_cents=float(weighed.alone_uncertainty[k]) if known else None,
            alone_probability=float(alone[0][k]) if known else None,
            alone_verdict=alone[1][k] if known else None,
            beats=beats_between(table, row, weighed.flutes),
        )
