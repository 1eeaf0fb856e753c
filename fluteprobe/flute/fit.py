"""A tube fitted to what was heard of a flute: its tones and its breath resonances.

Conventions: as in `joint`: pitches in cents above 1 Hz, resonances numbered from 1.

The shape is found by least squares (scipy's trust-region solver, with a loss that forgives a false breath
resonance): to first-register tones first, then also to the breath resonances, each by the resonance that it
lies next to. Then all is taken once more as one Gaussian about that shape, everything correlated: that
gives the covariance.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any, cast

import numpy as np
from scipy.optimize import least_squares

from fluteprobe.flute.fingering import Fingering
from fluteprobe.flute.joint import BENDS, COUNT, Heard, Joint
from fluteprobe.flute.shape import Reals, Shape, followed, pitches, slopes, tube_of
from fluteprobe.flute.tube import openness_of

_GATES_CENTS = (130.0, 70.0)
_WRONG_NUMBER_CENTS, _RIGHT_NUMBER_CENTS = 150.0, 60.0
_SOFT = 2.0  # standard deviations beyond which a breath resonance counts less
_LEFT_OUT_CENTS = 6.0
_ENOUGH = 1e-3  # of the sum of squares, of a standard deviation
_MOST_STEPS = 20
_FOLLOWING_STEPS = 2
_REFINED = 2


@dataclass(frozen=True, slots=True, kw_only=True)
class Fit:
    """A fitted tube: the shape before and after what was heard.

    `strangeness` is how improbable the tones are, near 1 where all is as believed. `heard` are the tones
    and those breath resonances that lie by a resonance, with its number; `variance` is each one's scatter
    in cents²; `deviation_cents` and `surprise` say how far each lies from what all others foretell, in
    cents and in standard deviations of that.
    """

    believed: Shape
    shape: Shape
    heard: tuple[Heard, ...]
    variance: Reals
    deviation_cents: Reals
    surprise: Reals
    strangeness: float

    @property
    def misfit_cents(self) -> float:
        """Root mean square of how far the tones lie from what all others foretell."""
        tones = np.array([each.is_tone for each in self.heard])
        return float(np.sqrt(np.mean(self.deviation_cents[tones] ** 2)))

    def joint(self, more: Sequence[Fingering]) -> Joint:
        """Return all that was heard as one Gaussian, of which `more` fingerings may be asked."""
        return Joint(self.believed, self.shape, self.heard, self.variance, more)


def fitted(believed: Shape, heard: Sequence[Heard]) -> Fit:
    """Fit a shape to tones and breath resonances; these come without a number.

    Raises
    ------
    ValueError
        If there is no tone among them.
    """
    tones = [each for each in heard if each.is_tone]
    if not tones:
        raise ValueError("there is no tone to fit a tube to")
    surest = [each for each in tones if each.resonance == 1] or tones
    shape = _least_squares(believed, believed.values, surest)
    used = tones
    for gate_cents in _GATES_CENTS:
        used = _numbered(heard, shape, gate_cents)
        shape = _least_squares(believed, shape.values, used)
    return _refined(believed, shape, heard)


def _numbered(heard: Sequence[Heard], shape: Shape, gate_cents: float) -> list[Heard]:
    """Return tones and breath resonances with the number of the resonance that they belong to.

    A breath resonance that lies by none is left out. A tone has its register's number, but where another
    resonance is there and its own is far: the register was counted past one.
    """
    fingerings = list(dict.fromkeys(each.fingering for each in heard))
    resonant = dict(zip(fingerings, pitches(shape.tube, openness_of(fingerings), COUNT), strict=True))
    found = []
    for each in heard:
        away = np.abs(resonant[each.fingering] + BENDS[each.kind].mean - each.cents)
        nearest = int(np.nanargmin(away))
        if not each.is_tone and away[nearest] < gate_cents:
            found.append(replace(each, resonance=nearest + 1))
        elif each.is_tone:
            own = np.nan_to_num(away, nan=np.inf)[each.resonance - 1]
            wrong = own > _WRONG_NUMBER_CENTS and away[nearest] < _RIGHT_NUMBER_CENTS
            found.append(replace(each, resonance=nearest + 1) if wrong else each)
    return found


# --- least squares -----------------------------------------------------------------------------------


class _Misses:
    """How far a shape is from what was heard, in standard deviations, and from what was believed of it.

    The shape is told in standard deviations from what was believed, which scales all numbers alike.
    """

    def __init__(self, believed: Shape, start: Reals, heard: Sequence[Heard]) -> None:
        fingerings = list(dict.fromkeys(each.fingering for each in heard))
        row = {fingering: i for i, fingering in enumerate(fingerings)}
        self.believed = believed
        self.openness = openness_of(fingerings)
        self.pick = [row[each.fingering] for each in heard], [each.resonance - 1 for each in heard]
        self.wanted = np.array([each.cents - BENDS[each.kind].mean for each in heard])
        self.spread = np.array([_spread(each) for each in heard])
        self.root = np.linalg.cholesky(believed.covariance)
        self.start = np.linalg.solve(self.root, start - believed.values)
        self.is_bump = np.array([not each.is_tone for each in heard] + [False] * len(start))
        self._at = pitches(tube_of(start, believed.setting), self.openness, max(self.pick[1]) + 1)
        self._steps = self.start

    def values(self, steps: Reals) -> Reals:
        return np.asarray(self.believed.values + self.root @ steps)

    def __call__(self, steps: Reals) -> Reals:
        return np.append(np.nan_to_num((self._pitch(steps)[self.pick] - self.wanted) / self.spread), steps)

    def jacobian(self, steps: Reals) -> Reals:
        moved = slopes(self.values(steps), self.believed.setting, self.openness, self._pitch(steps))
        return np.vstack([
            np.nan_to_num(moved[self.pick] @ self.root / self.spread[:, None]), np.eye(len(steps))
        ])  # fmt: skip

    def loss(self, squares: Reals) -> Reals:
        """Return the loss of squared misses and its derivatives: Huber's for breath resonances."""
        plain = [squares, np.ones_like(squares), np.zeros_like(squares)]
        return np.where(self.is_bump, _soft(squares), plain)

    def _pitch(self, steps: Reals) -> Reals:
        """Return the resonances, followed from the shape before; the solver asks twice for the same one."""
        if not np.array_equal(steps, self._steps):
            tube = tube_of(self.values(steps), self.believed.setting)
            self._at = followed(tube, self.openness, self._at, _FOLLOWING_STEPS)
            self._steps = steps.copy()
        return self._at


def _least_squares(believed: Shape, start: Reals, heard: Sequence[Heard]) -> Shape:
    """Return the likeliest shape, each thing heard by itself."""
    misses = _Misses(believed, start, heard)
    found = least_squares(
        misses, misses.start, jac=misses.jacobian, loss=cast(Any, misses.loss),
        ftol=_ENOUGH, xtol=_ENOUGH, max_nfev=_MOST_STEPS,
    )  # fmt: skip
    return replace(believed, values=misses.values(found.x))


def _soft(squares: Reals) -> Reals:
    """Return Huber's loss and its two derivatives by the square (Ann. Math. Statist. 35, 73 (1964))."""
    size = np.sqrt(np.maximum(squares, 1e-12))
    far = size > _SOFT
    value = np.where(far, 2.0 * _SOFT * size - _SOFT**2, squares)
    first = np.where(far, _SOFT / size, 1.0)
    return np.array([value, first, np.where(far, -0.5 * _SOFT / size**3, 0.0)])


def _spread(heard: Heard) -> float:
    """Return how far a thing heard lies from its resonance, believed beforehand, in cents."""
    return float(np.sqrt(BENDS[heard.kind].spread ** 2 + heard.variance + _LEFT_OUT_CENTS**2))


# --- one Gaussian ------------------------------------------------------------------------------------


def _refined(believed: Shape, shape: Shape, heard: Sequence[Heard]) -> Fit:
    """Refine the shape with everything correlated; forgive breath resonances that nothing else foretells.

    Numbers are told anew for each shape: a faint resonance more or less below shifts them.
    """
    for _ in range(_REFINED):
        joint = _forgiving(believed, shape, heard)
        shape = joint.refined()
    joint = _forgiving(believed, shape, heard)
    deviation, spread = joint.one_left_out()
    return Fit(
        believed=believed,
        shape=replace(joint.refined(), values=shape.values),
        heard=joint.heard,
        variance=joint.variance,
        deviation_cents=deviation,
        surprise=deviation / np.sqrt(spread),
        strangeness=joint.strangeness(np.array([each.is_tone for each in joint.heard])),
    )


def _forgiving(believed: Shape, shape: Shape, heard: Sequence[Heard]) -> Joint:
    numbered = _numbered(heard, shape, _GATES_CENTS[-1])
    plain = np.array([each.variance for each in numbered])
    strict = Joint(believed, shape, numbered, plain)
    return strict.with_variance(_forgiven(strict, plain))


def _forgiven(joint: Joint, plain: Reals) -> Reals:
    """Return the scatter, larger for breath resonances that all the rest does not foretell."""
    deviation, variance = joint.one_left_out()
    excess = np.abs(deviation) / np.sqrt(variance) / _SOFT
    is_bump = np.array([not each.is_tone for each in joint.heard])
    return np.where(is_bump, plain * np.maximum(excess, 1.0) ** 2, plain)
