"""The folder on disk: flute.toml and takes/ become a Session, and back.

Conventions: paths of takes are relative to the session folder, with forward slashes. A take's name is
`FINGERING[-BREATH][-NUMBER].EXT`: `oxxxxx.wav`, `oxxxxx-over.wav`, `oxxxxx-over-2.wav`.
"""

from dataclasses import dataclass, field
from pathlib import Path

from fluteprobe.flute.fingering import Breath, Fingering


@dataclass(frozen=True, slots=True, kw_only=True)
class Problem:
    """Something that could not be used: which take (or file), what is wrong and what to do."""

    take: str
    message: str


@dataclass(frozen=True, slots=True, kw_only=True)
class FluteFacts:
    """The [flute] table of flute.toml. `holes_mm` pairs each hole's distance from the sound hole and diameter."""

    name: str
    holes: int
    maker: str | None = None
    serial: str | None = None
    key: str | None = None
    wood: str | None = None
    bore_mm: float | None = None
    wall_mm: float | None = None
    holes_mm: tuple[tuple[float, float], ...] | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Sitting:
    """The [session] table of flute.toml: the conditions of one sitting."""

    a4_hz: float = 440.0
    air_temperature_c: float | None = None
    reference_temperature_c: float | None = None
    date: str | None = None
    player: str | None = None
    place: str | None = None
    microphone: str | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Take:
    """One recording of one fingering."""

    name: str
    path: Path
    fingering: Fingering
    breath: Breath
    number: int = 1


@dataclass(frozen=True, slots=True, kw_only=True)
class Session:
    """One flute, one sitting: the facts, the conditions, the takes, and what could not be used."""

    folder: Path
    flute: FluteFacts
    sitting: Sitting
    takes: tuple[Take, ...]
    problems: tuple[Problem, ...] = field(default=())
