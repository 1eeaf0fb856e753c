"""How readily a higher register speaks: how well the lower resonances are hindered, how strong its own is.

Conventions: registers are numbered from 1; arrays of resonances have shape (fingerings, count), NaN where
there is none. Ease is the natural logarithm of the odds that a fingering, overblown, speaks in a register.

A register speaks if its resonance is strong beside the strongest one below it, and if it lies near the whole
multiple of the first, so that the low tone's own partials do not hold it back. The weights were counted on
simulated flutes (tests/bench/bench_forecast.py); a flute's own takes, those that spoke and those that did
not, move them (logistic regression with a Gaussian belief, Laplace's approximation: MacKay, Neural
Computation 4, 720 (1992)).
"""

from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from fluteprobe.flute.fingering import Fingering
from fluteprobe.flute.shape import Reals
from fluteprobe.flute.tube import Resonances

_WEIGHTS = (6.7, 4.75, -0.9)  # constant, per e-fold of strength, per 100 cents of mistuning
_SPREADS = (1.2, 1.0, 0.25)
_WORST_CENTS = 700.0
_FAINTEST = -6.0
_ROUNDS = 20
_BELIEF_IN_TAKES = 3.0  # how many takes of a fingering weigh as much as what its resonances say


@dataclass(frozen=True, slots=True, kw_only=True)
class Try:
    """A take in which a higher register was sought, or sounded: what sounded, in `registers`."""

    fingering: Fingering
    registers: frozenset[int]

    def tells_of(self, register: int) -> bool:
        """Whether it was tried for that register: silence, a lower one, or it itself."""
        return register in self.registers or max(self.registers, default=0) < register

    def spoke_in(self, register: int) -> bool:
        """Whether that register sounded."""
        return register in self.registers


@dataclass(frozen=True, slots=True, kw_only=True)
class Habit:
    """How readily this flute's registers speak: weights of `signs` and their covariance."""

    weights: Reals
    covariance: Reals

    def chance(self, signs: Reals) -> Reals:
        """Return the chance to speak, the weights' uncertainty taken in (MacKay 1992, sec. 4)."""
        variance = np.einsum("...i,ij,...j->...", signs, self.covariance, signs)
        return np.asarray(
            1.0 / (1.0 + np.exp(-(signs @ self.weights) / np.sqrt(1.0 + np.pi / 8.0 * variance)))
        )


def chances(
    resonant: Resonances,
    row: Mapping[Fingering, int],
    wanted: Sequence[tuple[Fingering, int]],
    tries: Sequence[Try],
    measured: Collection[tuple[Fingering, int]] = (),
) -> list[float]:
    """Return how likely each wanted fingering and register is to speak when overblown.

    Parameters
    ----------
    resonant
        Resonances of all fingerings, those that were tried among them.
    row
        Where each fingering stands in `resonant`.
    wanted
        Fingerings and registers.
    tries
        What did and did not speak.
    measured
        Of those wanted, the ones that are told without their own takes.
    """
    signs = {register: signs_of(resonant, register) for register in {2, *(r for _, r in wanted)}}
    everyone = _habit(signs[2], row, tries)
    found = []
    for fingering, register in wanted:
        own = [each for each in tries if each.fingering == fingering and each.tells_of(register)]
        others = [each for each in tries if each.fingering != fingering]
        habit = everyone if len(others) == len(tries) else _habit(signs[2], row, others)
        chance = float(habit.chance(signs[register][row[fingering]]))
        if (fingering, register) not in measured:
            chance = with_own_takes(chance, sum(each.spoke_in(register) for each in own), len(own))
        found.append(chance)
    return found


def _habit(signs: Reals, row: Mapping[Fingering, int], tries: Sequence[Try]) -> Habit:
    """Return the habit learnt from what did and did not speak in the second register."""
    told = [each for each in tries if each.tells_of(2)]
    rows = [row[each.fingering] for each in told]
    return learnt(signs[rows], [each.spoke_in(2) for each in told])


def signs_of(resonant: Resonances, register: int) -> Reals:
    """Return what tells how readily a register speaks, shape (fingerings, 3): see `ease`."""
    own, below = resonant.strength[:, register - 1], resonant.strength[:, : register - 1].max(axis=1)
    strength = np.maximum(np.log(own / below), _FAINTEST)
    off = 12.0 * np.log2(resonant.frequency_hz[:, register - 1] / resonant.frequency_hz[:, 0] / register)
    off = np.minimum(np.abs(off), _WORST_CENTS / 100.0)
    signs = np.stack([np.ones_like(own), strength, off], axis=1)
    return np.where(np.isfinite(signs), signs, [0.0, _FAINTEST, _WORST_CENTS / 100.0])


def ease(signs: Reals) -> Reals:
    """Return the logarithm of the odds to speak, as believed beforehand."""
    return np.asarray(signs @ np.array(_WEIGHTS))


def learnt(signs: Reals, spoke: Sequence[bool]) -> Habit:
    """Return the habit of a flute whose takes did or did not speak; `signs` has shape (takes, 3)."""
    weights, believed = np.array(_WEIGHTS), np.array(_WEIGHTS)
    precision = np.diag(np.array(_SPREADS) ** -2.0)
    outcome = np.array(spoke, dtype=np.float64)
    information = precision
    for _ in range(_ROUNDS if len(outcome) else 0):
        chance = 1.0 / (1.0 + np.exp(-signs @ weights))
        information = precision + (signs * (chance * (1.0 - chance))[:, None]).T @ signs
        pull = signs.T @ (outcome - chance) - precision @ (weights - believed)
        weights = weights + 0.7 * np.linalg.solve(information, pull)
    return Habit(weights=weights, covariance=np.asarray(np.linalg.inv(information), dtype=np.float64))


def with_own_takes(chance: float, spoke: int, tried: int) -> float:
    """Return a chance to speak after `tried` takes of that very fingering (a beta belief)."""
    return (_BELIEF_IN_TAKES * chance + spoke) / (_BELIEF_IN_TAKES + tried)
