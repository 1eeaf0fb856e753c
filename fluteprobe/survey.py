"""The measured flute: hears every take, decides every register, sums up every fingering."""

from dataclasses import dataclass

from fluteprobe.flute.fingering import Breath, Fingering
from fluteprobe.flute.register import Register, RegisterCall
from fluteprobe.session import FluteFacts, Problem, Sitting
from fluteprobe.sound.tone import Tone


@dataclass(frozen=True, slots=True, kw_only=True)
class Reading:
    """One tone, read against the tuning and the flute.

    `note` is spelt in ASCII with a sharp where one is needed ("C#5"); `cents` is the deviation from it as
    played, `cents_at_reference` the same carried to the reference temperature (an estimate).
    """

    take: str
    fingering: Fingering | None
    breath: Breath | None
    tone: Tone
    note: str | None
    cents: float | None
    cents_at_reference: float | None
    call: RegisterCall


@dataclass(frozen=True, slots=True, kw_only=True)
class Entry:
    """What one fingering gives in one register, over all its takes."""

    fingering: Fingering
    register: Register
    frequency_hz: float
    uncertainty_cents: float
    note: str
    cents: float
    cents_at_reference: float | None
    stretch_cents: float | None
    takes: tuple[str, ...]
    tones: int
    reliability: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Survey:
    """The measured flute."""

    flute: FluteFacts
    sitting: Sitting
    readings: tuple[Reading, ...]
    entries: tuple[Entry, ...]
    problems: tuple[Problem, ...]
