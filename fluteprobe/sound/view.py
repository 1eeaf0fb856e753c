"""What a take's page shows, as arrays: the waveform, and every tone's pitch track and spectra.

Conventions: times in seconds from the start of the recording; samples with full scale at ±1; pitches in
cents against the tone's own frequency; levels in dB against the tone's strongest partial (breath alone:
against its own strongest line). `None` is "there is none". Nothing is measured anew: the tones' own functions
are asked once more for what they leave out of a `Tone`.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fluteprobe.sound.breath import NoiseSpectrum, noise_spectrum, segment_length
from fluteprobe.sound.measured import Measured, take_apart
from fluteprobe.sound.partials import Samples, demodulate, orders_below_nyquist
from fluteprobe.sound.picture import Picture, constant_q
from fluteprobe.sound.pitch import CENTS, PhaseTrack, Pitch, phase_track
from fluteprobe.sound.recording import Recording
from fluteprobe.sound.second import SecondOpinion, second_opinion
from fluteprobe.sound.tone import Tone

Floats = NDArray[np.float64]

COLUMNS = 720  # of the waveform's envelope: more than a page can show apart
POINT_S = 0.025  # one point of the pitch track spans about so long
BREATH_HZ = 500.0  # breath alone has no pitch; its spectrum gets lines as fine as this pitch's
BREATH_S = 30.0  # of longer breath alone, the start

SECOND_LOOK_S = 10.0  # of a longer tone librosa is asked about the start

_AROUND_S = 0.25
_SILENT = 1e-20


@dataclass(frozen=True, slots=True, kw_only=True)
class Waveform:
    """A recording's envelope: the lowest and highest sample in each column, both (columns,)."""

    column_s: float
    low: Floats
    high: Floats


@dataclass(frozen=True, slots=True, kw_only=True)
class PitchView:
    """A tone's pitch along its span, in cents against the tone's frequency.

    Attributes
    ----------
    time_s, cents
        Points of about 25 ms (points,), each from the phase at its two ends; `noise_cents` is what noise
        alone does to one of them (standard deviation).
    smooth_time_s, smooth_cents
        The smooth curve whose mean is the tone's pitch (smooth points,).
    """

    time_s: Floats
    cents: Floats
    noise_cents: float
    smooth_time_s: Floats
    smooth_cents: Floats


@dataclass(frozen=True, slots=True, kw_only=True)
class SpectrumView:
    """A tone's averaged spectrum, and that of what is left without its partials, all (lines,)."""

    line_hz: float
    frequency_hz: Floats
    level_db: Floats
    noise_db: Floats


@dataclass(frozen=True, slots=True, kw_only=True)
class SecondLook:
    """What librosa makes of a tone: its picture from `start_s` to `end_s`, and pYIN's reading."""

    start_s: float
    end_s: float
    picture: Picture
    opinion: SecondOpinion


@dataclass(frozen=True, slots=True, kw_only=True)
class ToneView:
    """One tone, or the breath alone, with its arrays."""

    tone: Tone
    pitch: PitchView | None
    spectrum: SpectrumView | None
    second: SecondLook | None


@dataclass(frozen=True, slots=True, kw_only=True)
class TakeView:
    """One recording: its facts, its envelope and its tones. `channel` counts from 0."""

    duration_s: float
    rate_hz: int
    channels: int
    channel: int
    waveform: Waveform
    tones: tuple[ToneView, ...]


def look(recording: Recording, tones: Sequence[Tone], *, second: bool = False) -> TakeView:
    """Return what a take's page shows of a recording and the tones that were read from it.

    Parameters
    ----------
    second
        Ask librosa too: its constant-Q picture and pYIN's reading of every tone. Its first use after
        installation compiles for some 15 s.

    Raises
    ------
    RecordingError
        If the recording cannot be read any more.
    SecondOpinionError
        If librosa is asked and cannot answer.
    """
    return TakeView(
        duration_s=recording.duration_s,
        rate_hz=recording.rate_hz,
        channels=recording.channels,
        channel=recording.channel,
        waveform=envelope(recording),
        tones=tuple(_tone_view(recording, tone, second) for tone in tones),
    )


def envelope(recording: Recording, columns: int = COLUMNS) -> Waveform:
    """Return a recording's lowest and highest sample in each of up to `columns` columns of equal length.

    The recording is passed over block by block, so an hour takes no more memory than a minute.
    """
    length = max(-(-recording.frames // columns), 1)
    extremes = [(float(block.min()), float(block.max())) for _, block in recording.blocks(length)]
    low, high = np.array(extremes, dtype=np.float64).reshape(-1, 2).T
    return Waveform(column_s=length / recording.rate_hz, low=low, high=high)


def _tone_view(recording: Recording, tone: Tone, second: bool) -> ToneView:
    rate = recording.rate_hz
    start, stop = round(tone.start_s * rate), min(round(tone.end_s * rate), recording.frames)
    if tone.frequency_hz is None:
        samples = recording.read(start, min(stop, start + int(BREATH_S * rate)))
        return ToneView(tone=tone, pitch=None, spectrum=_breath_view(samples, rate), second=None)
    samples = recording.read(start, stop)
    tracks = demodulate(samples, rate, tone.frequency_hz, orders_below_nyquist(rate, tone.frequency_hz))
    apart = take_apart(samples, rate, tone.frequency_hz)
    return ToneView(
        tone=tone,
        pitch=_pitch_view(phase_track(tracks), apart.pitch, tone.frequency_hz, start / rate),
        spectrum=_spectrum_view(samples, rate, apart),
        second=_second_look(recording, tone.frequency_hz, start, stop) if second else None,
    )


def _pitch_view(phases: PhaseTrack, pitch: Pitch, frequency_hz: float, start_s: float) -> PitchView:
    """Return the slope of the phase between points some 25 ms apart, and the smooth curve's."""
    step = min(max(round(POINT_S / phases.hop_s), 1), len(phases.phase_rad) - 1)
    phase, time = phases.phase_rad[::step], phases.time_s[::step]
    turns_per_s = 1.0 / (2.0 * np.pi * step * phases.hop_s)
    hz = phases.frequency_hz + np.diff(phase) * turns_per_s
    noise_hz = np.sqrt(2.0) * phases.noise_rad * turns_per_s
    return PitchView(
        time_s=start_s + 0.5 * (time[1:] + time[:-1]),
        cents=CENTS * np.log(np.maximum(hz, 1.0) / frequency_hz),
        noise_cents=float(CENTS * noise_hz / frequency_hz),
        smooth_time_s=start_s + pitch.time_s,
        smooth_cents=pitch.deviation_cents + CENTS * np.log(pitch.frequency_hz / frequency_hz),
    )


def _spectrum_view(samples: Samples, rate_hz: int, apart: Measured) -> SpectrumView | None:
    """Return the spectrum of a tone and of what is left of it, on the lines of the breath's own search."""
    length = segment_length(len(samples), rate_hz, apart.pitch.frequency_hz)
    whole = noise_spectrum(samples, rate_hz, length)
    noise = noise_spectrum(apart.residual, rate_hz, length)
    if whole is None or noise is None:
        return None
    strongest = (float(apart.amplitude.max(initial=0.0)) * whole.length / 4.0) ** 2
    return _against(whole, noise, strongest or float(whole.power.max()))


def _breath_view(samples: Samples, rate_hz: int) -> SpectrumView | None:
    spectrum = noise_spectrum(samples, rate_hz, segment_length(len(samples), rate_hz, BREATH_HZ))
    return None if spectrum is None else _against(spectrum, spectrum, float(spectrum.power.max()))


def _against(whole: NoiseSpectrum, noise: NoiseSpectrum, reference: float) -> SpectrumView:
    def in_db(power: Floats) -> Floats:
        return np.asarray(10.0 * np.log10((power + _SILENT) / (reference + _SILENT)))

    return SpectrumView(
        line_hz=whole.line_hz,
        frequency_hz=np.arange(len(whole.power), dtype=np.float64) * whole.line_hz,
        level_db=in_db(whole.power),
        noise_db=in_db(noise.power),
    )


def _second_look(recording: Recording, frequency_hz: float, start: int, stop: int) -> SecondLook:
    rate = recording.rate_hz
    stop = min(stop, start + int(SECOND_LOOK_S * rate))
    first = max(start - int(_AROUND_S * rate), 0)
    last = min(stop + int(_AROUND_S * rate), recording.frames)
    return SecondLook(
        start_s=first / rate,
        end_s=last / rate,
        picture=constant_q(recording.read(first, last), rate, frequency_hz),
        opinion=second_opinion(recording.read(start, stop), rate, frequency_hz),
    )
