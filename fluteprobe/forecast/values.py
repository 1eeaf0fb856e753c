"""What a forecast is: fingerings foretold, how the tube fits, what a maker may learn.

Conventions: frequencies in Hz, deviations in cents from the nearest note of equal temperament at the
session's A4, as played (in the session's air); `uncertainty_cents` is standard (k = 1) and takes in how the
breath bends a tone. Registers are numbers of resonances. None is "not known".
"""

from dataclasses import dataclass
from typing import Literal

from fluteprobe.flute.fingering import Fingering
from fluteprobe.flute.sensitivity import Sensitivity, TubeWords
from fluteprobe.session import FluteFacts, Sitting

Basis = Literal["breath resonance", "fitted tube", "both"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Prediction:
    """One fingering in one higher register, foretold.

    `note` and `cents` are the nearest note and the deviation from it; `likely_to_speak` is the chance that it
    sounds when overblown. `measured_hz` is what the session's own takes gave, which were not used here; None
    where it was not played. `fills` is a note above the first register that nothing played so far gives and
    this would. `rank` says what to try first, from 1; None where it was played or will hardly speak.
    `tried` counts the takes in which the fingering was overblown.
    """

    fingering: Fingering
    register: int
    frequency_hz: float
    uncertainty_cents: float
    note: str
    cents: float
    basis: Basis
    likely_to_speak: float
    tried: int = 0
    measured_hz: float | None = None
    fills: str | None = None
    rank: int | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Disagreement:
    """A tone that lies far from what all others foretell: cents above that, and standard deviations."""

    take: str
    fingering: Fingering
    register: int
    deviation_cents: float
    surprise: float


@dataclass(frozen=True, slots=True, kw_only=True)
class FitWords:
    """How well a tube could be fitted, to how much, and what it says of the flute.

    `misfit_cents` is how far the tones lie from what all others foretell (root mean square).
    """

    misfit_cents: float
    tones: int
    breath_resonances: int
    tube: TubeWords


@dataclass(frozen=True, slots=True, kw_only=True)
class Forecast:
    """What a flute will play that it has not played yet.

    `predictions` come in the order of what to try, then what was measured already, then what will hardly
    speak. Where the model cannot fit the flute, `reason` says why in a line, `disagreements` names the
    tones that lie farthest off, worst first, and there are no predictions. Otherwise `disagreements` are
    tones to record anew.
    """

    flute: FluteFacts
    sitting: Sitting
    predictions: tuple[Prediction, ...]
    fit: FitWords | None
    sensitivities: tuple[Sensitivity, ...] = ()
    disagreements: tuple[Disagreement, ...] = ()
    reason: str | None = None
