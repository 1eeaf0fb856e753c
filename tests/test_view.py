"""What a take's page shows, checked against tones whose truth is known by construction."""

from pathlib import Path

import numpy as np
import pytest
import soundfile
from numpy.typing import NDArray
from tones import RATE_HZ, as_recording, cents, make_tone

from fluteprobe.sound.recording import Recording, open_recording
from fluteprobe.sound.tone import Tone, read_tones
from fluteprobe.sound.view import COLUMNS, ToneView, envelope, look

Samples = NDArray[np.float32]
BEFORE_S = 0.5


def tone_of(frequency_hz: float | None, start_s: float, end_s: float) -> Tone:
    """Return a tone as it might have been read; only its span and frequency are asked for."""
    return Tone(
        start_s=start_s, end_s=end_s, kind="tone" if frequency_hz else "breath only",
        frequency_hz=frequency_hz, uncertainty_cents=None, partials=(), harmonic_to_noise_db=None,
        breath_resonances=(), drift_cents=None, vibrato=None, attack_ms=None, cautions=(),
    )  # fmt: skip


def looked_at(folder: Path, samples: Samples, frequency_hz: float, *, second: bool = False) -> ToneView:
    """Return the view of one tone that has half a second of silence before it."""
    quiet = np.zeros(round(BEFORE_S * RATE_HZ), np.float32)
    recording = as_recording(folder, np.concatenate([quiet, 0.2 * samples]).astype(np.float32))
    tone = tone_of(frequency_hz, BEFORE_S, recording.duration_s)
    (view,) = look(recording, [tone], second=second).tones
    return view


def test_the_envelope_holds_the_extremes_of_every_column(tmp_path: Path) -> None:
    samples = np.random.default_rng(1).uniform(-0.5, 0.5, 100_001).astype(np.float32)
    wave = envelope(as_recording(tmp_path, samples))
    length = round(wave.column_s * RATE_HZ)
    assert len(wave.low) == len(wave.high) == -(-len(samples) // length) <= COLUMNS
    columns = [samples[k : k + length] for k in range(0, len(samples), length)]
    assert wave.low == pytest.approx([column.min() for column in columns])
    assert wave.high == pytest.approx([column.max() for column in columns])


def test_a_long_recording_has_no_longer_envelope(tmp_path: Path) -> None:
    """Over a minute, recordings are read from the file piece by piece."""
    path = tmp_path / "long.wav"
    samples = np.full(8000 * 75, 0.1, np.float32)
    samples[8000 * 70] = 0.9
    soundfile.write(path, samples, 8000)
    wave = envelope(open_recording(path))
    assert len(wave.high) <= COLUMNS
    assert np.argmax(wave.high) == int(70.0 / wave.column_s)


def test_the_shortest_recording_has_a_column_for_every_sample_at_most(tmp_path: Path) -> None:
    hiss = np.random.default_rng(11).uniform(-0.1, 0.1, 810).astype(np.float32)
    wave = envelope(as_recording(tmp_path, hiss, 8000))
    assert len(wave.low) == 405  # two samples each: 810 do not fit in 720 columns


def test_the_pitch_track_follows_a_vibrato(tmp_path: Path) -> None:
    """5 Hz and 20 cents: 25 ms of it read 0.97 of a swing, sin(x) / x at half the angle; 1 cent is free."""
    n = round(2.0 * RATE_HZ)
    swing = 20.0 * np.sin(2.0 * np.pi * 5.0 * np.arange(n) / RATE_HZ)
    made = make_tone(600.0, 2.0, "plain", 50.0, np.random.default_rng(2), movement_cents=swing)
    pitch = looked_at(tmp_path, made.samples, 600.0).pitch
    assert pitch is not None
    for time_s, track in ((pitch.time_s, pitch.cents), (pitch.smooth_time_s, pitch.smooth_cents)):
        assert time_s[0] >= BEFORE_S
        assert time_s[-1] <= BEFORE_S + 2.0
        truth = 20.0 * np.sin(2.0 * np.pi * 5.0 * (time_s - BEFORE_S))
        inner = slice(4, -4)
        assert track[inner] == pytest.approx(truth[inner], abs=1.5)


def test_points_scatter_as_much_as_their_noise_says(tmp_path: Path) -> None:
    """Within a quarter: 120 points know their own scatter to 7 %, the noise is read from 10 partials."""
    made = make_tone(500.0, 3.0, "bright", 15.0, np.random.default_rng(3))
    pitch = looked_at(tmp_path, made.samples, 500.0).pitch
    assert pitch is not None
    assert float(np.std(pitch.cents)) == pytest.approx(pitch.noise_cents, rel=0.25)


def test_the_view_is_of_the_pitch_that_was_measured(tmp_path: Path) -> None:
    """The same functions on the same samples: the mean of the curve is the tone's pitch within 0.02 cent."""
    made = make_tone(733.0, 1.5, "plain", 30.0, np.random.default_rng(4))
    recording = as_recording(tmp_path, (0.2 * made.samples).astype(np.float32))
    tones = read_tones(recording)
    (view,) = look(recording, tones).tones
    assert view.tone == tones[0]
    assert view.pitch is not None
    assert float(np.mean(view.pitch.smooth_cents)) == pytest.approx(0.0, abs=0.02)


def level_at(view: ToneView, frequency_hz: float, curve: str) -> float:
    assert view.spectrum is not None
    line = round(frequency_hz / view.spectrum.line_hz)
    return float(getattr(view.spectrum, curve)[line - 1 : line + 2].max())


def test_levels_are_those_of_the_partials(tmp_path: Path) -> None:
    """A Hann window reads a line between two bins up to 1.42 dB low (Harris, Proc. IEEE 66, 51 (1978))."""
    made = make_tone(440.0, 2.0, "bright", 40.0, np.random.default_rng(5))
    view = looked_at(tmp_path, made.samples, 440.0)
    strongest = made.amplitudes.max()
    for order, amplitude in enumerate(made.amplitudes, start=1):
        truth = 20.0 * np.log10(amplitude / strongest)
        assert truth - 1.6 < level_at(view, order * 440.0, "level_db") < truth + 0.3


def test_the_noise_is_that_of_the_window_and_the_partials_are_gone_from_it(tmp_path: Path) -> None:
    """White noise σ under a Hann window of N samples: 1.5 × 4 σ² / (A² N) (Harris 1978: 1.5 bins wide)."""
    made = make_tone(440.0, 3.0, "plain", 25.0, np.random.default_rng(6))
    view = looked_at(tmp_path, made.samples, 440.0)
    assert view.spectrum is not None
    length = round(RATE_HZ / view.spectrum.line_hz)
    floor = 10.0 * np.log10(6.0 * made.noise**2 / (made.amplitudes.max() ** 2 * length))
    assert float(np.median(view.spectrum.noise_db)) == pytest.approx(floor, abs=0.5)
    assert all(level_at(view, order * 440.0, "noise_db") < floor + 6.0 for order in (1, 2, 3, 4))


def test_breath_alone_has_a_spectrum_and_no_pitch(tmp_path: Path) -> None:
    hiss = (0.05 * np.random.default_rng(7).standard_normal(RATE_HZ)).astype(np.float32)
    recording = as_recording(tmp_path, hiss)
    (view,) = look(recording, [tone_of(None, 0.0, recording.duration_s)]).tones
    assert view.pitch is None
    assert view.spectrum is not None
    assert view.spectrum.level_db.max() == 0.0
    assert np.array_equal(view.spectrum.level_db, view.spectrum.noise_db)


@pytest.mark.parametrize(("frequency_hz", "duration_s"), [(95.0, 0.25), (3000.0, 0.15), (440.0, 0.5)])
def test_short_tones_low_and_high_have_a_view(tmp_path: Path, frequency_hz: float, duration_s: float) -> None:
    made = make_tone(frequency_hz, duration_s, "plain", 30.0, np.random.default_rng(8))
    view = looked_at(tmp_path, made.samples, frequency_hz)
    assert view.pitch is not None
    assert np.all(np.isfinite(view.pitch.cents))
    assert np.all(np.isfinite(view.pitch.smooth_cents))


def test_the_facts_of_a_recording_with_two_channels(tmp_path: Path) -> None:
    path = tmp_path / "stereo.wav"
    made = make_tone(600.0, 0.5, "plain", 30.0, np.random.default_rng(9))
    right = 0.2 * made.samples
    soundfile.write(path, np.stack([np.zeros_like(right), right], axis=1), RATE_HZ)
    recording: Recording = open_recording(path)
    view = look(recording, read_tones(recording))
    assert (view.channels, view.channel, view.rate_hz) == (2, 1, RATE_HZ)
    assert view.duration_s == pytest.approx(0.5)


def test_librosa_sees_the_tone_where_it_is(tmp_path: Path) -> None:
    """The picture's loudest bin is the tone's, which is half a quarter-tone wide to either side."""
    made = make_tone(600.0, 0.8, "plain", 40.0, np.random.default_rng(10))
    second = looked_at(tmp_path, made.samples, 600.0, second=True).second
    assert second is not None
    assert (second.start_s, second.end_s) == pytest.approx((0.25, 1.3))
    picture = second.picture
    loudest = int(np.argmax(picture.level_db.max(axis=1)))
    middle_hz = picture.lowest_hz * 2.0 ** ((loudest + 0.5) / 24.0)
    assert cents(middle_hz / 600.0) == pytest.approx(0.0, abs=26.0)
    assert picture.level_db.max() == pytest.approx(0.0, abs=1e-6)
    assert second.opinion.difference_cents == pytest.approx(0.0, abs=10.0)
