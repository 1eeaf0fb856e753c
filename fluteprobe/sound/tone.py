"""One steady tone of a recording, as physical facts: a span goes in, a Tone comes out.

Conventions: times in seconds from the start of the recording; frequencies in Hz; partial levels in dB
against the strongest partial of the same tone; `uncertainty_cents` is a standard uncertainty (k = 1).
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from fluteprobe.sound.breath import BreathResonance, breath_resonances, noise_spectrum
from fluteprobe.sound.octave import is_one_tone, settle_octave
from fluteprobe.sound.partials import (
    Partial,
    Samples,
    Tracks,
    amplitudes,
    demodulate,
    orders_below_nyquist,
    partials_of,
    without_partials,
)
from fluteprobe.sound.pitch import (
    CENTS,
    GUIDES,
    Pitch,
    Vibrato,
    guide_phase,
    measure_pitch,
    phase_track,
    refined,
)
from fluteprobe.sound.recording import Recording
from fluteprobe.sound.spans import SHORTEST_TONE_S, Span, find_spans

__all__ = ["BreathResonance", "Kind", "Partial", "Tone", "Vibrato", "read_tones"]

Kind = Literal["tone", "edge tone", "breath only", "multiphonic"]
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
_PASSING_DB = 8.0
_EVEN = 0.55
_EVEN_DB = 10.0
_PASSING_S = 0.45
_SHORT_S = 0.4
_NOISY_DB = 12.0
_UNSTEADY_CENTS = 12.0
_DRIFTING_CENTS = 20.0
_GLIDING_CENTS = 80.0
_QUIET_DB = -50.0


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


def read_tones(recording: Recording) -> tuple[Tone, ...]:
    """Find and measure every steady tone of a recording; a recording without one gives the breath alone."""
    spans = find_spans(recording)
    settled = _rejoined(
        recording, [_settled(recording, span) for span in spans if span.frequency_hz is not None]
    )
    earliest = [0, *((span.start + span.stop) // 2 for span in settled)]
    latest = [*(span.start for span in settled[1:]), recording.frames]
    tones = [
        _read_tone(recording, span, bounds) for span, *bounds in zip(settled, earliest, latest, strict=False)
    ]
    found = [tone for tone in tones if tone is not None and tone.kind != "breath only"]
    clear = [tone for tone in found if not _is_passing(tone)]
    return tuple(clear or found) or (_breath_alone(recording, spans),)


def _is_passing(tone: Tone) -> bool:
    """Whether a tone is but a moment on the way to another: short, and hardly over the noise."""
    noisy = tone.harmonic_to_noise_db is not None and tone.harmonic_to_noise_db < _PASSING_DB
    return noisy and tone.end_s - tone.start_s < _PASSING_S


def _settled(recording: Recording, span: Span) -> Span:
    """Settle a span's octave; a long one is cut to what is measured."""
    assert span.frequency_hz is not None  # noqa: S101  (spans without pitch are sorted out before)
    stop = min(span.stop, span.start + int(LONGEST_TONE_S * recording.rate_hz))
    samples = recording.read(span.start, stop)
    return replace(span, stop=stop, frequency_hz=settle_octave(samples, recording.rate_hz, span.frequency_hz))


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
    assert before.frequency_hz is not None and after.frequency_hz is not None  # noqa: S101, PT018
    if after.start - before.stop > _GAP_S * recording.rate_hz:
        return False
    ratio = max(before.frequency_hz, after.frequency_hz) / min(before.frequency_hz, after.frequency_hz)
    off_cents = 1200.0 * abs(np.log2(ratio / round(ratio)))
    if off_cents > _SAME_CENTS or round(ratio) > 3:
        return False
    if round(ratio) == 1:
        return True
    lower_hz = min(before.frequency_hz, after.frequency_hz)
    parts = [recording.read(span.start, span.stop) for span in (before, after)]
    return is_one_tone(parts[0], parts[1], recording.rate_hz, lower_hz)


def _read_tone(recording: Recording, span: Span, bounds: Sequence[int]) -> Tone | None:
    """Measure one span within bounds that its neighbours set; None if it is too short or glides."""
    assert span.frequency_hz is not None  # noqa: S101  (spans without pitch are sorted out before)
    steady = _steady_part(recording, span, span.frequency_hz, bounds)
    if steady.stop - steady.start < SHORTEST_TONE_S * recording.rate_hz:
        return None
    samples = recording.read(steady.start, steady.stop)
    measured = _measured(samples, recording.rate_hz, steady.frequency_hz)
    if abs(measured.pitch.drift_cents) > _GLIDING_CENTS:
        return None
    cycles = _whole_cycles(measured.pitch.vibrato, len(samples), recording.rate_hz)
    if cycles < len(samples):
        steady = replace(steady, start=steady.start + (len(samples) - cycles) // 2)
        steady = replace(steady, stop=steady.start + cycles)
        samples = recording.read(steady.start, steady.stop)
        measured = _measured(samples, recording.rate_hz, steady.frequency_hz)
    return _tone(recording, steady, samples, measured)


@dataclass(frozen=True, slots=True, kw_only=True)
class _Steady:
    """The part of a span that is measured, its refined pitch, and how long the attack took."""

    start: int
    stop: int
    frequency_hz: float
    attack_ms: float | None


def _steady_part(recording: Recording, span: Span, frequency_hz: float, bounds: Sequence[int]) -> _Steady:
    """Trim a span to where the partials have risen and have not yet fallen, and the pitch has settled."""
    rate, margin = recording.rate_hz, int(_MARGIN_S * recording.rate_hz)
    stop = span.stop
    first = min(max(span.start - margin, bounds[0]), span.start)
    around = recording.read(first, max(min(stop + margin, bounds[1]), stop))
    guide = demodulate(around, rate, frequency_hz, orders_below_nyquist(rate, frequency_hz, GUIDES))
    inside = slice((span.start - first) // guide.hop, max((stop - first) // guide.hop, 1))
    low, high, attack = _edges(guide, inside)
    return _Steady(
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
    low = _last_below(level[: inside.start + near], float(np.median(risen)) - _EDGE_DB)
    fallen = level[max(inside.stop - near, 0) :][::-1]
    end = core[-near:] if len(core) < 2 * near else core[-near - near // 4 : -(near // 4) or None]
    high = len(level) - 1 - _last_below(fallen, float(np.median(end)) - _EDGE_DB)
    quiet = _last_below(level[:low], float(np.median(risen)) - _ATTACK_DB)
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
        away = np.abs(cents - np.median(cents[first:last]))
        limit = max(_GLIDE_CENTS, _GLIDE_RATIO * float(np.median(away[first:last])))
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


@dataclass(frozen=True, slots=True, kw_only=True)
class _Measured:
    """Pitch, partial amplitudes (orders,), what is left without the partials (samples,), and evenness.

    `evenness` is the strongest partial's level that nine tenths of its frames exceed, over its median: near 1
    for a tone, 0.39 for a resonance that only noise stirs (its level is Rayleigh distributed).
    """

    pitch: Pitch
    orders: Floats
    amplitude: Floats
    residual: Samples
    evenness: float

    @property
    def sounds(self) -> bool:
        """Whether there is a tone: a partial that noise alone would not make."""
        uneven = self.evenness < _EVEN and self.harmonic_to_noise_db < _EVEN_DB
        return bool(np.any(self.amplitude > 0.0)) and not uneven

    @property
    def harmonic_to_noise_db(self) -> float:
        """Power of all partials over the power of the rest, in dB."""
        noise = float(np.mean(self.residual.astype(np.float64) ** 2)) + 1e-20
        return float(10.0 * np.log10((0.5 * np.sum(self.amplitude**2) + 1e-20) / noise))


def _measured(samples: Samples, rate_hz: int, frequency_hz: float) -> _Measured:
    tracks = demodulate(samples, rate_hz, frequency_hz, orders_below_nyquist(rate_hz, frequency_hz))
    pitch = measure_pitch(phase_track(tracks))
    amplitude = amplitudes(tracks, pitch.curve.phase(tracks.time_s))
    residual = without_partials(samples, tracks, pitch.curve.phase, amplitude > 0.0)
    level = np.abs(tracks.phasors[:, int(np.argmax(amplitude))])
    return _Measured(
        pitch=pitch,
        orders=tracks.orders,
        amplitude=amplitude,
        residual=residual,
        evenness=float(np.percentile(level, 10.0) / (np.median(level) + 1e-20)),
    )


def _whole_cycles(vibrato: Vibrato | None, length: int, rate_hz: int) -> int:
    """Return how many samples hold whole cycles of the vibrato, so that its mean is its middle."""
    if vibrato is None:
        return length
    cycles = int(length / rate_hz * vibrato.rate_hz)
    return min(int(cycles / vibrato.rate_hz * rate_hz), length) if cycles >= 2 else length


def _tone(recording: Recording, steady: _Steady, samples: Samples, measured: _Measured) -> Tone:
    pitch, rate = measured.pitch, recording.rate_hz
    sounds = measured.sounds
    hnr = measured.harmonic_to_noise_db
    return Tone(
        start_s=steady.start / rate,
        end_s=steady.stop / rate,
        kind="tone" if sounds else "breath only",
        frequency_hz=pitch.frequency_hz if sounds else None,
        uncertainty_cents=pitch.uncertainty_cents if sounds else None,
        partials=partials_of(pitch.frequency_hz, measured.orders, measured.amplitude),
        harmonic_to_noise_db=hnr if sounds else None,
        breath_resonances=_resonances(measured, rate) if sounds else (),
        drift_cents=pitch.drift_cents if sounds else None,
        vibrato=pitch.vibrato if sounds else None,
        attack_ms=steady.attack_ms,
        cautions=tuple(_cautions(samples, rate, pitch, hnr)) if sounds else (),
    )


def _resonances(measured: _Measured, rate_hz: int) -> tuple[BreathResonance, ...]:
    spectrum = noise_spectrum(measured.residual, rate_hz, measured.pitch.frequency_hz)
    return () if spectrum is None else breath_resonances(spectrum, measured.pitch.frequency_hz)


def _cautions(samples: Samples, rate_hz: int, pitch: Pitch, harmonic_to_noise_db: float) -> list[str]:
    """Say in plain words what makes this tone's numbers less sure."""
    cautions = []
    level_db = 20.0 * np.log10(float(np.sqrt(np.mean(samples.astype(np.float64) ** 2))) + 1e-20)
    if level_db < _QUIET_DB:
        cautions.append(f"very quiet ({level_db:.0f} dB under full scale): record closer")
    if harmonic_to_noise_db < _NOISY_DB:
        cautions.append(f"noisy: the tone stands only {harmonic_to_noise_db:.0f} dB over the noise")
    if len(samples) < _SHORT_S * rate_hz:
        cautions.append(f"short: {len(samples) / rate_hz:.2f} s steady; hold the tone for two seconds")
    if pitch.wander_cents > _UNSTEADY_CENTS:
        cautions.append(f"unsteady: the pitch wanders by {pitch.wander_cents:.0f} cents")
    if abs(pitch.drift_cents) > _DRIFTING_CENTS:
        cautions.append(f"drifting: the pitch moves by {pitch.drift_cents:+.0f} cents from start to end")
    return cautions


def _breath_alone(recording: Recording, spans: tuple[Span, ...]) -> Tone:
    """Return the breath of a recording in which no tone speaks."""
    start = min(span.start for span in spans)
    stop = max(span.stop for span in spans)
    return Tone(
        start_s=start / recording.rate_hz,
        end_s=stop / recording.rate_hz,
        kind="breath only",
        frequency_hz=None,
        uncertainty_cents=None,
        partials=(),
        harmonic_to_noise_db=None,
        breath_resonances=(),
        drift_cents=None,
        vibrato=None,
        attack_ms=None,
        cautions=("no steady tone was found: breath only",),
    )
