"""The steady part of each tone: spans joined where one tone goes on, and trimmed to where it is at rest.

Conventions: `start` and `stop` are sample numbers at the recording's `rate_hz`, stop excluded; levels in dB;
pitch in cents against the guide's frequency. A guide is the phasors of the lowest partials.

Excluded are the attack and the release (the partials' level is 3 dB under that of the tone next to it), and
glides into and out of a tone (its pitch leaves the tone's middle by far more than it usually does).
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from fluteprobe.sound.octave import is_one_tone, settle_octave
from fluteprobe.sound.partials import Tracks, demodulate, orders_below_nyquist
from fluteprobe.sound.pitch import CENTS, GUIDES, guide_phase, refined
from fluteprobe.sound.quantile import median
from fluteprobe.sound.recording import Recording
from fluteprobe.sound.spans import Span

Floats = NDArray[np.float64]

LONGEST_TONE_S = 30.0

_MARGIN_S = 0.15
_GAP_S = 0.08
_SAME_CENTS = 40.0
_EDGE_DB = 3.0
_ATTACK_DB = 20.0
_EDGE_REFERENCE_S = 0.2
_STEP_S = 0.025
_NARROWINGS = 3
_FEWEST_STEPS = 6
_GLIDE_CENTS = 10.0
_GLIDE_RATIO = 4.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Steady:
    """The part of a span that is measured, its refined pitch, and how long the attack took."""

    start: int
    stop: int
    frequency_hz: float
    attack_ms: float | None


def steady_parts(recording: Recording, spans: Sequence[Span]) -> list[Steady]:
    """Return the steady part of every pitched span, in order; it may be empty where nothing is at rest."""
    joined = _rejoined(
        recording, [_settled(recording, span) for span in spans if span.frequency_hz is not None]
    )
    earliest = [0, *((span.start + span.stop) // 2 for span in joined)]
    latest = [*(span.start for span in joined[1:]), recording.frames]
    return [
        _steady_part(recording, span, bounds) for span, *bounds in zip(joined, earliest, latest, strict=False)
    ]


def _settled(recording: Recording, span: Span) -> Span:
    """Settle a span's octave; a long one is cut to what is measured."""
    stop = min(span.stop, span.start + int(LONGEST_TONE_S * recording.rate_hz))
    samples = recording.read(span.start, stop)
    return replace(span, stop=stop, frequency_hz=settle_octave(samples, recording.rate_hz, _pitch_of(span)))


def _rejoined(recording: Recording, spans: list[Span]) -> list[Span]:
    """Join neighbours that are one tone: cut apart by a doubt about the octave, or by a moment's noise."""
    joined: list[Span] = []
    for span in spans:
        if joined and _is_continued(recording, joined[-1], span):
            before = joined.pop()
            longer = max(before, span, key=lambda part: part.stop - part.start)
            joined.append(_settled(recording, replace(longer, start=before.start, stop=span.stop)))
        else:
            joined.append(span)
    return joined


def _is_continued(recording: Recording, before: Span, after: Span) -> bool:
    """Whether the sound goes on without a break from one span into the next."""
    if after.start - before.stop > _GAP_S * recording.rate_hz:
        return False
    lower_hz, higher_hz = sorted((_pitch_of(before), _pitch_of(after)))
    ratio = higher_hz / lower_hz
    off_cents = 1200.0 * abs(np.log2(ratio / round(ratio)))
    if off_cents > _SAME_CENTS or round(ratio) > 3:
        return False
    if round(ratio) == 1:
        return True
    parts = [recording.read(span.start, span.stop) for span in (before, after)]
    return is_one_tone(parts[0], parts[1], recording.rate_hz, lower_hz)


def _pitch_of(span: Span) -> float:
    assert span.frequency_hz is not None  # noqa: S101  (spans without pitch are sorted out at the door)
    return span.frequency_hz


def _steady_part(recording: Recording, span: Span, bounds: Sequence[int]) -> Steady:
    """Trim a span to where the partials have risen and have not yet fallen, and the pitch has settled.

    It may reach past the span's coarse edges, but not before the middle of the span before (`bounds[0]`) nor
    into the next (`bounds[1]`).
    """
    frequency_hz, stop = _pitch_of(span), span.stop
    rate, margin = recording.rate_hz, int(_MARGIN_S * recording.rate_hz)
    first = min(max(span.start - margin, bounds[0]), span.start)
    around = recording.read(first, max(min(stop + margin, bounds[1]), stop))
    guide = demodulate(around, rate, frequency_hz, orders_below_nyquist(rate, frequency_hz, GUIDES))
    inside = slice((span.start - first) // guide.hop, max((stop - first) // guide.hop, 1))
    low, high, attack = _edges(guide, inside)
    return Steady(
        start=first + low * guide.hop,
        stop=min(first + (high + 2) * guide.hop, recording.frames),
        frequency_hz=refined(replace(guide, phasors=guide.phasors[low : high + 1]))
        if high > low
        else frequency_hz,
        attack_ms=attack,
    )


def _edges(guide: Tracks, inside: slice) -> tuple[int, int, float | None]:
    """Return the first and last steady frame, and the attack in ms (None where it starts in mid-sound)."""
    level = 10.0 * np.log10(np.sum(np.abs(guide.phasors) ** 2, axis=1) + 1e-20)
    near = max(round(_EDGE_REFERENCE_S / guide.hop_s), 1)
    core = level[inside] if len(level[inside]) else level
    risen = core[:near] if len(core) < 2 * near else core[near // 4 : near + near // 4]
    low = _last_below(level[: inside.start + near], median(risen) - _EDGE_DB)
    fallen = level[max(inside.stop - near, 0) :][::-1]
    end = core[-near:] if len(core) < 2 * near else core[-near - near // 4 : -(near // 4) or None]
    high = len(level) - 1 - _last_below(fallen, median(end) - _EDGE_DB)
    quiet = _last_below(level[:low], median(risen) - _ATTACK_DB)
    attack = (low - quiet) * guide.hop_s * 1000.0 if quiet else None
    low, high = _at_rest(guide, low, high)
    return low, high, attack


def _last_below(level: Floats, threshold: float) -> int:
    """Return the index after the last value under the threshold, 0 where there is none."""
    below = np.flatnonzero(level < threshold)
    return int(below[-1]) + 1 if len(below) else 0


def _at_rest(guide: Tracks, low: int, high: int) -> tuple[int, int]:
    """Narrow frames low to high to where the pitch has settled: without the glides into and out of a tone.

    A glide leaves the tone's middle by more than four times the usual distance from it, so that vibrato and a
    slow drift, whose usual distance is large, stay.
    """
    step = _step_frames(guide)
    if high - low < 2 * step:
        return low, high
    cents = _pitch_steps(guide, low, high)
    first, last = 0, len(cents)
    for _ in range(_NARROWINGS):
        if last - first < _FEWEST_STEPS:
            break
        away = np.abs(cents - median(cents[first:last]))
        limit = max(_GLIDE_CENTS, _GLIDE_RATIO * median(away[first:last]))
        at_rest = first + np.flatnonzero(away[first:last] < limit)
        first, last = int(at_rest[0]), int(at_rest[-1]) + 1
    return (low + first * step if first else low), (low + last * step if last < len(cents) else high)


def _step_frames(guide: Tracks) -> int:
    return max(round(_STEP_S / guide.hop_s), 1)


def _pitch_steps(guide: Tracks, low: int, high: int) -> Floats:
    """Return the pitch of frames low to high against the guide's, in cents, in steps of about 25 ms."""
    step = _step_frames(guide)
    phase = guide_phase(replace(guide, phasors=guide.phasors[low : high + 1]))[::step]
    return np.asarray(CENTS * np.diff(phase) / (2.0 * np.pi * guide.hop_s * step * guide.frequency_hz))
