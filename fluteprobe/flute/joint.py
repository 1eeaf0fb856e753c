"""Everything heard of a flute as one Gaussian about a tube: what it foretells of every other tone.

Conventions: pitches in cents above 1 Hz; resonances are numbered from 1, the lowest; arrays of pitches have
shape (fingerings, COUNT), NaN where a fingering has fewer resonances.

A tone does not stand on its resonance: the breath bends it. How far, in the mean, is a property of flute and
player for each `Kind` of what is heard, believed beforehand with a spread (`BENDS`) and learnt from the
flute itself. The rest is scatter from take to take. What the tube leaves out is an error that is alike for
fingerings that differ in few holes (Gaussian processes: Rasmussen & Williams, Gaussian Processes for
Machine Learning, 2006, ch. 2; with a fitted model beneath: Kennedy & O'Hagan, J. R. Statist. Soc. B 63, 425
(2001)). "First, before" is a low tone in an overblown take, before it broke. The numbers of `BENDS` were
counted on simulated flutes (tests/bench/bench_forecast.py), their spreads widened for real ones.
"""

from collections.abc import Iterable, Mapping, Sequence
from copy import copy
from dataclasses import dataclass
from types import MappingProxyType
from typing import Literal, get_args

import numpy as np
import numpy.typing as npt

from fluteprobe.flute.fingering import Fingering
from fluteprobe.flute.shape import Reals, Shape, opening_slopes, slopes
from fluteprobe.flute.speak import ease, signs_of
from fluteprobe.flute.tube import Resonances, openness_of, resonances

Kind = Literal[
    "first",
    "first, soft",
    "first, overblown",
    "first, before",
    "second",
    "third",
    "bump above",
    "bump below",
    "bump alone",
]
Integers = npt.NDArray[np.intp]
Flags = npt.NDArray[np.bool_]

KINDS: tuple[Kind, ...] = get_args(Kind)
COUNT = 4


@dataclass(frozen=True, slots=True, kw_only=True)
class Bend:
    """How far something heard stands above the tube's resonance, in cents.

    `spread` is between flutes, `scatter` between takes of one.
    """

    mean: float
    spread: float
    scatter: float


BENDS: Mapping[Kind, Bend] = MappingProxyType(
    {
        "first": Bend(mean=-10.0, spread=6.0, scatter=8.0),
        "first, soft": Bend(mean=-25.0, spread=12.0, scatter=12.0),
        "first, overblown": Bend(mean=32.0, spread=12.0, scatter=14.0),
        "first, before": Bend(mean=0.0, spread=10.0, scatter=18.0),
        "second": Bend(mean=8.5, spread=7.0, scatter=8.0),
        "third": Bend(mean=4.0, spread=9.0, scatter=10.0),
        "bump above": Bend(mean=-7.0, spread=8.0, scatter=8.0),
        "bump below": Bend(mean=33.0, spread=14.0, scatter=22.0),
        "bump alone": Bend(mean=0.0, spread=6.0, scatter=8.0),
    }
)

# A second register that speaks less readily is blown harder: cents per unit of ease, and the spread of that.
_EASE_CENTS, _EASE_SPREAD = -3.2, 1.2
_EASE_RANGE = (-2.0, 6.0)

_LEFT_OUT_CENTS = np.array([4.0, 7.0, 10.0, 14.0])  # by resonance
_LEFT_OUT_SIZES = (0.35, 0.5, 0.7, 1.0, 1.4, 2.0, 2.8, 4.0)
_SIZE_SPREAD = 0.7  # of the logarithm
_LEAST_CERTAINTY = 1e-9  # per cents²; where dimensions are absurd, rounding gives less
_ALIKE_RESONANCES = 0.5
_ALIKE_HOLES = 2.0  # holes that differ, over which fingerings cease to be alike
_ALONE = 0.4  # what is left out of each fingering by itself, beside what is shared
_OPENING_SPREAD = {"x": 0.0, "o": 0.0, "h": 0.12, "v": 0.05}


@dataclass(frozen=True, slots=True, kw_only=True)
class Heard:
    """A tone or a breath resonance: how high, how surely, with which fingering, in which take.

    `resonance` is the number of the one it belongs to: the register of a tone; 0 is not known. `sounding`
    is the register that sounded meanwhile, 0 where only breath was heard.
    """

    take: str
    fingering: Fingering
    kind: Kind
    resonance: int
    cents: float
    uncertainty_cents: float
    sounding: int = 0

    @property
    def is_tone(self) -> bool:
        """Whether it sounded, rather than being a bump in the breath noise."""
        return not self.kind.startswith("bump")

    @property
    def variance(self) -> float:
        """How far it scatters from take to take, in cents²."""
        return BENDS[self.kind].scatter ** 2 + self.uncertainty_cents**2


@dataclass(frozen=True, slots=True, kw_only=True)
class Asked:
    """Tones to be foretold: fingerings by their row, registers by their number less 1."""

    rows: Integers
    numbers: Integers
    kinds: tuple[Kind, ...]


class Joint:
    """What was heard, and what may be asked of fingerings, linear about a shape.

    `surprise` is what was heard less what was believed of it before anything was; `covariance` is that of
    what was heard, scatter and all. `left_out` is how large the tube's error is, of what is usual.
    """

    def __init__(
        self,
        believed: Shape,
        shape: Shape,
        heard: Sequence[Heard],
        variance: Reals,
        more: Iterable[Fingering] = (),
    ) -> None:
        self.believed_shape, self.shape, self.heard = believed, shape, tuple(heard)
        self.fingerings = list(dict.fromkeys([*(each.fingering for each in heard), *more]))
        self.row = {fingering: i for i, fingering in enumerate(self.fingerings)}
        openness = openness_of(self.fingerings)
        self.resonances: Resonances = resonances(shape.tube, openness, COUNT)
        self.pitch = np.asarray(1200.0 * np.log2(self.resonances.frequency_hz))
        self._moved = slopes(shape.values, shape.setting, openness, self.pitch)
        self._opening = _opening(self.fingerings, opening_slopes(shape.tube, openness, self.pitch))
        self._ease = np.clip(ease(signs_of(self.resonances, 2)), *_EASE_RANGE)
        self._alike = _alike(openness)
        self.here = Asked(
            rows=np.array([self.row[each.fingering] for each in heard], dtype=np.intp),
            numbers=np.array([each.resonance - 1 for each in heard], dtype=np.intp),
            kinds=tuple(each.kind for each in heard),
        )
        self.surprise = np.array([each.cents for each in heard]) - self.believed(self.here)
        shared = self._shared(self.here, self.here) + np.diag(variance)
        rest = self._left_out(self.here, self.here)
        self.left_out = _likeliest_size(shared, rest, self.surprise)
        self.covariance = shared + self.left_out**2 * rest
        self.variance = variance

    def with_variance(self, variance: Reals) -> "Joint":
        """Return the same with another scatter, in cents², of what was heard."""
        other = copy(self)
        other.covariance = self.covariance + np.diag(variance - self.variance)
        other.variance = variance
        return other

    def asked(self, wanted: Sequence[tuple[Fingering, int]]) -> Asked:
        """Return tones to foretell, from fingerings and registers (2 or 3)."""
        return Asked(
            rows=np.array([self.row[fingering] for fingering, _ in wanted], dtype=np.intp),
            numbers=np.array([register - 1 for _, register in wanted], dtype=np.intp),
            kinds=tuple("second" if register == 2 else "third" for _, register in wanted),
        )

    def believed(self, asked: Asked) -> Reals:
        """Return pitches as believed before anything was heard, by the line about the shape."""
        bend = np.array([BENDS[kind].mean for kind in asked.kinds])
        back = self._slopes(asked) @ (self.believed_shape.values - self.shape.values)
        return np.asarray(
            self.pitch[asked.rows, asked.numbers] + back + bend + _EASE_CENTS * self._effort(asked)
        )

    def foretold(self, asked: Asked, keep: Flags | None = None) -> tuple[Reals, Reals]:
        """Return pitches as they will sound, and their standard uncertainty, from what is kept."""
        keep = np.ones(len(self.heard), dtype=bool) if keep is None else keep
        cross = self._between(asked, self.here)[:, keep]
        gain = np.linalg.solve(self.covariance[np.ix_(keep, keep)], cross.T).T
        own = np.array([self._between(each, each)[0, 0] for each in _singly(asked)])
        scatter = np.array([BENDS[kind].scatter ** 2 for kind in asked.kinds])
        variance = np.maximum(own - np.einsum("ij,ij->i", gain, cross), 0.0) + scatter
        return np.asarray(self.believed(asked) + gain @ self.surprise[keep]), np.sqrt(variance)

    def refined(self) -> Shape:
        """Return the likeliest shape after what was heard, and its covariance."""
        before = self.believed_shape
        gain = np.linalg.solve(self.covariance, self._slopes(self.here) @ before.covariance).T
        covariance = before.covariance - gain @ self._slopes(self.here) @ before.covariance
        return Shape(
            values=before.values + gain @ self.surprise,
            covariance=0.5 * (covariance + covariance.T),
            setting=before.setting,
        )

    def one_left_out(self) -> tuple[Reals, Reals]:
        """Return how far each thing heard lies from what all the others foretell, and the variance of that.

        Both follow from the inverse of the covariance alone (Rasmussen & Williams 2006, eq. 5.12).
        """
        inverse = np.linalg.inv(self.covariance)
        certainty = np.maximum(np.diag(inverse), _LEAST_CERTAINTY)
        return (inverse @ self.surprise) / certainty, 1.0 / certainty

    def strangeness(self, chosen: Flags) -> float:
        """Return how improbable the chosen among what was heard are: near 1 where all is as believed.

        It is their chi square over their number, dimensions, usual proportions and bends all counted.
        """
        surprise = self.surprise[chosen]
        covariance = self.covariance[np.ix_(chosen, chosen)]
        return float(surprise @ np.linalg.solve(covariance, surprise)) / len(surprise)

    # --- covariances -----------------------------------------------------------------------------

    def _between(self, one: Asked, other: Asked) -> Reals:
        return np.asarray(self._shared(one, other) + self.left_out**2 * self._left_out(one, other))

    def _shared(self, one: Asked, other: Asked) -> Reals:
        """Return the covariance through the shape, the bends and how far half-holed holes are open."""
        total = self._slopes(one) @ self.believed_shape.covariance @ self._slopes(other).T
        spread = np.array([BENDS[kind].spread ** 2 for kind in one.kinds])
        same_kind = np.array(one.kinds)[:, None] == np.array(other.kinds)[None, :]
        total += np.where(same_kind, spread[:, None], 0.0)
        total += _EASE_SPREAD**2 * np.outer(self._effort(one), self._effort(other))
        opening = self._opening[one.rows, one.numbers] @ self._opening[other.rows, other.numbers].T
        return np.asarray(total + np.where(one.rows[:, None] == other.rows[None, :], opening, 0.0))

    def _left_out(self, one: Asked, other: Asked) -> Reals:
        """Return the covariance of the tube's usual error."""
        alike = np.where(one.numbers[:, None] == other.numbers[None, :], 1.0, _ALIKE_RESONANCES)
        size = np.outer(_LEFT_OUT_CENTS[one.numbers], _LEFT_OUT_CENTS[other.numbers])
        return np.asarray(size * alike * self._alike[np.ix_(one.rows, other.rows)])

    def _slopes(self, asked: Asked) -> Reals:
        return np.asarray(np.nan_to_num(self._moved[asked.rows, asked.numbers]))

    def _effort(self, asked: Asked) -> Reals:
        """Return how readily each second-register tone speaks; nothing for other kinds."""
        return np.where(np.array(asked.kinds) == "second", self._ease[asked.rows], 0.0)


def _singly(asked: Asked) -> list[Asked]:
    return [
        Asked(rows=asked.rows[i : i + 1], numbers=asked.numbers[i : i + 1], kinds=(kind,))
        for i, kind in enumerate(asked.kinds)
    ]


def _opening(fingerings: Sequence[Fingering], moved: Reals) -> Reals:
    """Return how far resonances move with a usual error in how far half-holed and vented holes are open."""
    spread = np.array([[_OPENING_SPREAD[state] for state in each.states] for each in fingerings])
    return np.asarray(np.nan_to_num(moved * spread[:, None, :]))


def _alike(openness: Reals) -> Reals:
    """Return how alike the tube's errors of two fingerings are: 1 and a share of its own for the same."""
    apart = np.abs(openness[:, None, :] - openness[None, :, :]).sum(axis=2)
    return np.asarray(np.exp(-apart / _ALIKE_HOLES) + _ALONE * np.eye(len(openness)))


def _likeliest_size(shared: Reals, rest: Reals, surprise: Reals) -> float:
    """Return how large the tube's error is: the likeliest by what was heard (type II maximum likelihood)."""

    def log_odds(size: float) -> float:
        covariance = shared + size**2 * rest
        _, volume = np.linalg.slogdet(covariance)
        fit = surprise @ np.linalg.solve(covariance, surprise)
        return float(-0.5 * (volume + fit + (np.log(size) / _SIZE_SPREAD) ** 2))

    return max(_LEFT_OUT_SIZES, key=log_odds) if len(surprise) else 1.0
