"""One steady tone of a recording, as physical facts.

Conventions: times in seconds from the start of the recording; frequencies in Hz; partial levels in dB
against the strongest partial of the same tone; `uncertainty_cents` is a standard uncertainty (k = 1).
"""

from dataclasses import dataclass
from typing import Literal

Kind = Literal["tone", "edge tone", "breath only", "multiphonic"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Partial:
    """One harmonic of a tone: its order (1 is the fundamental), frequency and level."""

    order: int
    frequency_hz: float
    level_db: float


@dataclass(frozen=True, slots=True, kw_only=True)
class BreathResonance:
    """A bump that a resonance of the air column leaves in the breath noise."""

    frequency_hz: float
    width_hz: float
    prominence_db: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Vibrato:
    """A regular swing of pitch: its rate, and its extent from the middle to either side."""

    rate_hz: float
    extent_cents: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Tone:
    """One steady span of a recording and what sounds in it.

    `frequency_hz` and what follows from it are None where `kind` is "breath only".
    """

    start_s: float
    end_s: float
    kind: Kind
    frequency_hz: float | None
    uncertainty_cents: float | None
    partials: tuple[Partial, ...]
    harmonic_to_noise_db: float | None
    breath_resonances: tuple[BreathResonance, ...]
    drift_cents: float | None
    vibrato: Vibrato | None
    attack_ms: float | None
    cautions: tuple[str, ...]
