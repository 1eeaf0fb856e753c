"""The tones of a recording, as physical facts: spans go in, one Tone for each comes out.

Conventions: times in seconds from the start of the recording; frequencies in Hz; partial levels in dB
against the strongest partial of the same tone; `uncertainty_cents` is a standard uncertainty (k = 1).

Kinds: a "tone" is held by a resonance of the air column. An "edge tone" is the jet's own whistle before the
column speaks: its pitch follows the breath and no resonance stands at it. A "multiphonic" holds two tones
whose ratio is no whole number, or warbles between two registers. "Breath only" has no tone at all.
"""

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from fluteprobe.sound.breath import (
    HIGHEST_LINE,
    BreathResonance,
    NoiseSpectrum,
    breath_resonances,
    noise_spectrum,
    segment_length,
)
from fluteprobe.sound.measured import Measured, take_apart
from fluteprobe.sound.partials import Partial, Samples, partials_of
from fluteprobe.sound.pitch import Vibrato
from fluteprobe.sound.quality import LONGEST_S, Part, take_cautions
from fluteprobe.sound.recording import Recording
from fluteprobe.sound.spans import SHORTEST_TONE_S, Span, find_spans
from fluteprobe.sound.steady import LONGEST_TONE_S, Steady, steady_parts
from fluteprobe.sound.tone_quality import (
    SECOND_TONE_DB,
    beside,
    other_tones,
    room_cautions,
    tone_cautions,
    two_tones,
)

__all__ = ["LONGEST_TONE_S", "BreathResonance", "Kind", "Partial", "Tone", "Vibrato", "read_tones"]

Kind = Literal["tone", "edge tone", "breath only", "multiphonic"]

_PASSING_DB = 8.0
_PASSING_S = 0.45
_GLIDING_CENTS = 80.0
_PAUSE_S = 0.3
_PAUSE_MARGIN_S = 0.15
_MOST_PAUSES = 20
_EDGE_TONE_CENTS = 12.0
_EDGE_TONE_DB = 18.0
_EDGE_TONE_PARTIALS_DB = -26.0
_WARBLE_S = 0.6
_WARBLE_TURNS = 4
_LEAD_S = 2.0
_CREST_TONES = 8
# Noise is judged by what it does to loudness and phase alike. Clipping takes the former away, and noise near
# the tone's own level turns the phase by more than its share. Counted on made tones: see DEVELOPERS.md.
_LESS_SURE = ("clipped", "noisy")
_LESS_SURE_RATIO = 1.15


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


@dataclass(frozen=True, slots=True, kw_only=True)
class _Around:
    """What a tone is held against: the take's quietest pause, if it has one, and its highest crest."""

    pause: Samples | None
    crest: float


def read_tones(recording: Recording) -> tuple[Tone, ...]:
    """Find and measure every steady tone of a recording; a recording without one gives the breath alone."""
    spans = find_spans(recording)
    parts = steady_parts(recording, spans)
    around = _Around(pause=_pause(recording, spans), crest=_crest(recording, parts))
    tones = [_read_tone(recording, steady, around) for steady in parts]
    found = [tone for tone in tones if tone is not None and tone.kind != "breath only"]
    clear = [tone for tone in found if not _is_passing(tone)]
    kept = _without_warble(clear or found) or (_breath_alone(recording, spans),)
    told = _take_cautions(recording, found)
    already = {caution.split(":")[0] for caution in recording.cautions}
    return tuple(replace(tone, cautions=_once((*tone.cautions, *told), already)) for tone in kept)


def _once(cautions: tuple[str, ...], already: set[str]) -> tuple[str, ...]:
    """Leave out what the recording says itself, by the word before the colon."""
    return tuple(caution for caution in cautions if caution.split(":")[0] not in already)


def _take_cautions(recording: Recording, tones: list[Tone]) -> tuple[str, ...]:
    """Say what is wrong with the take as a whole, by its first tones and the pauses about them."""
    rate = recording.rate_hz
    lead = round((min((tone.start_s for tone in tones), default=0.0) - _LEAD_S) * rate)
    first = max(lead, 0) if recording.frames > LONGEST_S * rate else 0
    samples = recording.read(first, min(first + int(LONGEST_S * rate), recording.frames))
    parts = [
        Part(
            start=round(tone.start_s * rate) - first,
            stop=round(tone.end_s * rate) - first,
            frequency_hz=tone.frequency_hz or 0.0,
            harmonic_to_noise_db=tone.harmonic_to_noise_db or 0.0,
        )
        for tone in tones
    ]
    return take_cautions(samples, rate, parts)


def _is_passing(tone: Tone) -> bool:
    """Whether a tone is but a moment on the way to another: short, and hardly over the noise."""
    noisy = tone.harmonic_to_noise_db is not None and tone.harmonic_to_noise_db < _PASSING_DB
    return noisy and tone.end_s - tone.start_s < _PASSING_S


def _pause(recording: Recording, spans: tuple[Span, ...]) -> Samples | None:
    """Return the quietest pause of the recording, where it has one: what the room does when nobody plays."""
    rate = recording.rate_hz
    length, margin = int(_PAUSE_S * rate), int(_PAUSE_MARGIN_S * rate)
    edges = [
        -margin,
        *(edge for span in spans for edge in (span.start, span.stop)),
        recording.frames + margin,
    ]
    gaps = [(edges[i] + margin, edges[i + 1] - margin) for i in range(0, len(edges), 2)]
    pauses = (  # one at a time: an hour has thousands
        recording.read(start, start + length)
        for first, last in gaps
        for start in range(first, last - length + 1, length)[:_MOST_PAUSES]
    )
    return min(pauses, key=lambda pause: float(np.mean(pause**2)), default=None)


def _crest(recording: Recording, parts: list[Steady]) -> float:
    """Return the highest crest of the first tones, looking at each one's first second."""
    ends = [(part.start, min(part.stop, part.start + recording.rate_hz)) for part in parts[:_CREST_TONES]]
    heads = [recording.read(start, stop) for start, stop in ends if start < stop]
    return max((float(np.abs(head).max(initial=0.0)) for head in heads), default=0.0)


def _read_tone(recording: Recording, steady: Steady, around: _Around) -> Tone | None:
    """Measure one steady part; None if it is too short or glides."""
    rate = recording.rate_hz
    if steady.stop - steady.start < SHORTEST_TONE_S * rate:
        return None
    samples = recording.read(steady.start, steady.stop)
    measured = take_apart(samples, rate, steady.frequency_hz)
    if abs(measured.pitch.drift_cents) > _GLIDING_CENTS:
        return None
    cycles = _whole_cycles(measured.pitch.vibrato, len(samples), rate)
    if cycles < len(samples):
        start = steady.start + (len(samples) - cycles) // 2
        steady = replace(steady, start=start, stop=start + cycles)
        samples = recording.read(steady.start, steady.stop)
        measured = take_apart(samples, rate, steady.frequency_hz)
    return _tone(samples, rate, steady, measured, around)


def _whole_cycles(vibrato: Vibrato | None, length: int, rate_hz: int) -> int:
    """Return how many samples hold whole cycles of the vibrato, so that its mean is its middle."""
    if vibrato is None:
        return length
    cycles = int(length / rate_hz * vibrato.rate_hz)
    return min(int(cycles / vibrato.rate_hz * rate_hz), length) if cycles >= 2 else length


def _tone(samples: Samples, rate_hz: int, steady: Steady, measured: Measured, around: _Around) -> Tone:
    """Put the facts of one tone together."""
    start_s, end_s = steady.start / rate_hz, steady.stop / rate_hz
    if not measured.sounds:
        return _breath_between(start_s, end_s)
    pitch = measured.pitch
    spectrum, pause = _noise(measured.residual, around.pause, rate_hz, pitch.frequency_hz)
    resonances = () if spectrum is None else breath_resonances(spectrum, pitch.frequency_hz, pause)
    partials = partials_of(pitch.frequency_hz, measured.orders, measured.amplitude)
    hnr = measured.harmonic_to_noise_db
    kind, words = _kind(measured, partials, spectrum, resonances)
    told = tone_cautions(samples, rate_hz, measured, around.crest)
    more = _LESS_SURE_RATIO if any(text.startswith(_LESS_SURE) for text in told) else 1.0
    return Tone(
        start_s=start_s,
        end_s=end_s,
        kind=kind,
        frequency_hz=pitch.frequency_hz,
        uncertainty_cents=more * pitch.uncertainty_cents,
        partials=partials,
        harmonic_to_noise_db=hnr,
        breath_resonances=resonances,
        drift_cents=pitch.drift_cents,
        vibrato=pitch.vibrato,
        attack_ms=steady.attack_ms,
        cautions=(
            *words,
            *told,
            *room_cautions(spectrum, pause, pitch.frequency_hz),
        ),
    )


def _noise(
    residual: Samples, room: Samples | None, rate_hz: int, frequency_hz: float
) -> tuple[NoiseSpectrum | None, NoiseSpectrum | None]:
    """Return the spectra of what a tone leaves and of the room in a pause, on the same lines."""
    length = segment_length(len(residual), rate_hz, frequency_hz)
    highest_hz = HIGHEST_LINE * frequency_hz
    pause = None if room is None else noise_spectrum(room, rate_hz, length, highest_hz)
    return noise_spectrum(residual, rate_hz, length, highest_hz), pause


def _kind(
    measured: Measured,
    partials: tuple[Partial, ...],
    spectrum: NoiseSpectrum | None,
    resonances: tuple[BreathResonance, ...],
) -> tuple[Kind, tuple[str, ...]]:
    """Tell a clean tone from a multiphonic and an edge tone, with the reason in words."""
    own = measured.pitch.frequency_hz
    others = other_tones(spectrum, own, float(measured.amplitude.max()))
    if others and others[0][1] > SECOND_TONE_DB:
        return "multiphonic", (two_tones(own, [hz for hz, _ in others]),)
    moves = float(np.hypot(measured.pitch.wander_cents, measured.pitch.drift_cents / 3.5))
    bare = all(partial.level_db < _EDGE_TONE_PARTIALS_DB for partial in partials if partial.order > 1)
    held = any(abs(resonance.frequency_hz / own - 1.0) < 0.02 for resonance in resonances)
    faint = measured.harmonic_to_noise_db < _EDGE_TONE_DB
    if moves > _EDGE_TONE_CENTS and bare and faint and not held:
        return "edge tone", ("an edge tone: its pitch follows the breath; blow until the flute speaks",)
    return "tone", tuple(beside(*line) for line in others[:1])


def _without_warble(tones: list[Tone]) -> tuple[Tone, ...]:
    """Put tones that turn back and forth between two pitches, each for a moment, together as a warble."""
    moments = [tone for tone in tones if tone.end_s - tone.start_s < _WARBLE_S]
    if len(moments) < _WARBLE_TURNS or len(moments) < len(tones):
        return tuple(tones)
    pitches = [tone.frequency_hz or 1.0 for tone in tones]
    back = all(abs(np.log2(a / b)) < 0.05 for a, b in zip(pitches, pitches[2:], strict=False))
    if not back or abs(np.log2(pitches[0] / pitches[1])) < 0.05:
        return tuple(tones)
    longest = max(tones, key=lambda tone: tone.end_s - tone.start_s)
    words = f"warbles between {min(pitches):.0f} and {max(pitches):.0f} Hz: steady the breath"
    return (
        replace(
            longest, start_s=tones[0].start_s, end_s=tones[-1].end_s, kind="multiphonic", cautions=(words,)
        ),
    )


def _breath_alone(recording: Recording, spans: tuple[Span, ...]) -> Tone:
    """Return the breath of a recording in which no tone speaks."""
    start = min(span.start for span in spans)
    stop = max(span.stop for span in spans)
    return _breath_between(start / recording.rate_hz, stop / recording.rate_hz)


def _breath_between(start_s: float, end_s: float) -> Tone:
    return Tone(
        start_s=start_s,
        end_s=end_s,
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
