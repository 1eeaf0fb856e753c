"""The quality of whole takes: every fault is made by construction (tests/faults.py), mild and strong.

The take is a made tone with breath noise of its own in a room's noise; on it, nothing must be told. Shares
over many simulated takes are in tests/bench/bench_quality.py.
"""

import re
from collections.abc import Callable
from pathlib import Path

import faults
import numpy as np
import pytest
from numpy.typing import NDArray
from tones import RATE_HZ, as_recording, make_tone

from fluteprobe.sound.quality import LONGEST_S, Part, take_cautions
from fluteprobe.sound.tone import Tone, read_tones

Floats = NDArray[np.float64]


def take(
    seed: int = 0, *, frequency_hz: float = 523.0, pause_s: float = 0.8, breath_db: float = -28.0
) -> Floats:
    """Return a take: a tone of 1.6 s with its breath noise, 14 dB under full scale, between pauses."""
    rng = np.random.default_rng(seed)
    tone = make_tone(frequency_hz, 1.6, "plain", 90.0, rng).samples
    breath = 10.0 ** (breath_db / 20.0) * faults.coloured(len(tone), RATE_HZ, 1.0, rng, low_hz=300.0)
    time_s = np.arange(len(tone)) / RATE_HZ
    envelope = np.minimum(1.0, time_s / 0.05) * np.minimum(1.0, (1.6 - time_s) / 0.06)
    played = np.pad(0.2 * envelope * (tone + breath), round(pause_s * RATE_HZ))
    return np.asarray(played + 5e-4 * faults.coloured(len(played), RATE_HZ, 1.0, rng))


def heard(folder: Path, samples: Floats) -> tuple[Tone, ...]:
    return read_tones(as_recording(folder, samples.astype(np.float32)))


def told(folder: Path, samples: Floats) -> tuple[str, ...]:
    return tuple(caution for tone in heard(folder, samples) for caution in tone.cautions)


@pytest.mark.parametrize(
    ("frequency_hz", "pause_s"), [(196.0, 0.2), (392.0, 1.0), (523.0, 0.2), (1047.0, 1.0)]
)
def test_a_good_take_has_no_cautions(tmp_path: Path, frequency_hz: float, pause_s: float) -> None:
    assert told(tmp_path, take(frequency_hz=frequency_hz, pause_s=pause_s)) == ()


@pytest.mark.parametrize("mains_hz", [50.0, 60.0])
@pytest.mark.parametrize("level_db", [-29.0, -20.0])
def test_mains_hum(tmp_path: Path, mains_hz: float, level_db: float) -> None:
    cautions = told(tmp_path, faults.hummed(take(), RATE_HZ, mains_hz, level_db))
    (caution,) = {text for text in cautions if text.startswith("mains hum")}
    pattern = (
        r"mains hum \((\d+) Hz\): (\d+) dB under the tone; "
        "move away from lamps and chargers, or unplug the recorder"
    )
    match = re.fullmatch(pattern, caution)
    assert match is not None
    assert float(match[1]) == mains_hz
    assert float(match[2]) == pytest.approx(-level_db, abs=1.0)


@pytest.mark.parametrize(("made", "read", "off"), [(44100, 48000, "+147"), (48000, 44100, "-147")])
@pytest.mark.parametrize("mains_hz", [50.0, 60.0])
def test_a_wrong_sampling_rate_shows_by_the_hum(made: int, read: int, off: str, mains_hz: float) -> None:
    """A hum that was 50 or 60 Hz when it was recorded stands elsewhere when it is read at another rate."""
    samples = faults.hummed(take(), made, mains_hz, -25.0).astype(np.float32)
    part = Part(start=read, stop=2 * read, frequency_hz=523.0 * read / RATE_HZ, harmonic_to_noise_db=28.0)
    (caution,) = take_cautions(samples, read, [part])
    rates = f"{made / 1000:g} kHz were read as {read / 1000:g} kHz"
    assert caution == (
        f"wrong sampling rate: the mains hum at {mains_hz * read / made:.1f} Hz, as if {rates}, "
        f"so that all is {off} cents off; record anew"
    )


def test_hum_that_does_no_harm_is_not_told(tmp_path: Path) -> None:
    assert told(tmp_path, faults.hummed(take(), RATE_HZ, 50.0, -48.0)) == ()


def test_a_partial_that_folds_down_is_no_hum() -> None:
    """852 Hz thinned to 1002 samples a second stands at 150 Hz."""
    rng = np.random.default_rng(12)
    tone = np.pad(make_tone(852.3, 1.6, "plain", 60.0, rng).samples, RATE_HZ // 2)
    part = Part(start=RATE_HZ // 2, stop=2 * RATE_HZ, frequency_hz=852.3, harmonic_to_noise_db=30.0)
    samples = 0.2 * tone + 5e-4 * faults.coloured(len(tone), RATE_HZ, 1.0, rng)
    assert not any("hum" in text for text in take_cautions(samples.astype(np.float32), RATE_HZ, [part]))


def test_a_low_tone_at_a_multiple_of_the_mains_is_no_hum(tmp_path: Path) -> None:
    assert told(tmp_path, take(frequency_hz=150.0)) == ()


@pytest.mark.parametrize("level_db", [-20.0, -6.0])
def test_wind(tmp_path: Path, level_db: float) -> None:
    cautions = told(tmp_path, faults.windy(take(), RATE_HZ, level_db, np.random.default_rng(2)))
    (caution,) = (text for text in cautions if text.startswith("wind"))
    assert caution.startswith("wind on the microphone: gusts ")
    assert caution.endswith(" the tone; shield it, and turn it out of the breath")


def test_steady_rumble_is_no_wind(tmp_path: Path) -> None:
    """Traffic, a fan: as low as wind, but it does not come and go."""
    rumble = faults.coloured(len(take()), RATE_HZ, 3.5, np.random.default_rng(3), low_hz=20.0)
    assert not any(text.startswith("wind") for text in told(tmp_path, take() + 0.01 * rumble))


def test_a_wave_cut_on_one_side_is_no_wind(tmp_path: Path) -> None:
    """Cutting one side shifts the wave's middle for as long as the tone lasts."""
    assert not any(text.startswith("wind") for text in told(tmp_path, np.minimum(take(), 0.1)))


@pytest.mark.parametrize("kbit_per_s", [64, 48])
def test_a_wav_that_was_an_mp3(tmp_path: Path, kbit_per_s: int) -> None:
    (caution,) = told(tmp_path, faults.through_mp3(take(), RATE_HZ, kbit_per_s))
    assert caution.startswith("nothing above 1")
    assert caution.endswith(
        "kHz: cut off as by a lossy format (MP3, AAC) or a voice filter; record as WAV or FLAC"
    )


def test_noise_that_falls_gently_is_no_wall(tmp_path: Path) -> None:
    """A dark room: noise falling by 12 dB an octave reaches the 16-bit floor without a wall."""
    dark = 2e-3 * faults.coloured(len(take()), RATE_HZ, 4.0, np.random.default_rng(4))
    quantised = np.round((take() + dark) * 2.0**15) / 2.0**15
    assert told(tmp_path, quantised) == ()


@pytest.mark.parametrize(("most_db", "pause_s"), [(6.0, 0.8), (20.0, 0.8), (15.0, 0.3)])
def test_automatic_gain(tmp_path: Path, most_db: float, pause_s: float) -> None:
    cautions = told(tmp_path, faults.gained(take(pause_s=pause_s), RATE_HZ, most_db))
    (caution,) = (text for text in cautions if text.startswith("automatic gain"))
    assert caution.startswith("automatic gain: the noise in the pauses moves by ")
    assert caution.endswith(" dB with the tones; switch the recorder's automatic level off")


def test_a_noise_that_begins_in_a_pause_is_no_automatic_gain(tmp_path: Path) -> None:
    samples = take(pause_s=1.0)
    begins = round(3.2 * RATE_HZ)
    samples[begins:] += 3e-3 * np.random.default_rng(5).standard_normal(len(samples) - begins)
    assert not any(text.startswith("automatic gain") for text in told(tmp_path, samples))


@pytest.mark.parametrize("reduction_db", [15.0, 120.0])
def test_noise_reduction(tmp_path: Path, reduction_db: float) -> None:
    assert told(tmp_path, faults.gated(take(), RATE_HZ, reduction_db)) == (
        "noise reduction: the pauses are more silent than the tone's own noise allows; "
        "switch it off, the register is read from the breath's noise",
    )


def test_a_made_tone_without_noise_is_no_noise_reduction(tmp_path: Path) -> None:
    """Silence beside a tone that has no noise either proves nothing."""
    tone = 0.2 * make_tone(440.0, 1.5, "plain", 120.0, np.random.default_rng(6)).samples
    faded = (
        tone
        * np.minimum(1.0, np.linspace(0.0, 20.0, len(tone)))
        * np.minimum(1.0, np.linspace(20.0, 0.0, len(tone)))
    )
    assert told(tmp_path, np.pad(faded, RATE_HZ // 2)) == ()


def test_a_noisy_room(tmp_path: Path) -> None:
    cautions = told(tmp_path, faults.noisy(take(), RATE_HZ, -18.0, np.random.default_rng(7)))
    assert cautions == (
        "a noisy room: it drowns the breath, which tells the register; come closer, in a quieter room",
    )


def test_too_quiet(tmp_path: Path) -> None:
    (caution,) = told(tmp_path, 0.005 * take())
    assert caution == "very quiet (-60 dB under full scale): record closer"


Fault = Callable[[Floats], Floats]


FAULTS: dict[str, Fault] = {
    "at 0.7": lambda x: faults.hard_clipped(x, 0.7),
    "at 0.4": lambda x: faults.hard_clipped(x, 0.4),
    "softly": lambda x: faults.soft_clipped(x, 3.0),
}


@pytest.mark.parametrize("fault", FAULTS.values(), ids=FAULTS.keys())
def test_clipping_at_any_level(tmp_path: Path, fault: Fault) -> None:
    """Cut, and then turned down to half of full scale: no sample is at full scale any more."""
    (caution,) = told(tmp_path, fault(take()))
    assert caution == "clipped: the crests are cut or squeezed; record with less gain, or from further away"


def test_clipping_at_full_scale_is_told_once(tmp_path: Path) -> None:
    recording = as_recording(tmp_path, np.clip(10.0 * take(), -1.0, 1.0).astype(np.float32))
    assert [text.split(":")[0] for text in recording.cautions] == ["clipped"]
    assert not any(text.startswith("clipped") for tone in read_tones(recording) for text in tone.cautions)


@pytest.mark.parametrize("level_db", [-30.0, -10.0])
def test_another_instrument(tmp_path: Path, level_db: float) -> None:
    other = make_tone(700.0, 3.2, "bright", 60.0, np.random.default_rng(8)).samples
    cautions = told(tmp_path, faults.mixed(take(frequency_hz=523.0), other, RATE_HZ, level_db))
    words = "more than one instrument: 523 and 700 Hz; record one flute alone"
    faint = "another sound: 700 Hz, "
    assert any(text == words or text.startswith(faint) for text in cautions)


def test_an_uneven_breath(tmp_path: Path) -> None:
    cautions = told(tmp_path, faults.swelling(take(), RATE_HZ, 5.0, np.random.default_rng(9)))
    assert "uneven" in [text.split(":")[0] for text in cautions]


def test_all_faults_at_once_are_all_told(tmp_path: Path) -> None:
    rng = np.random.default_rng(10)
    samples = faults.windy(faults.hummed(take(pause_s=1.0), RATE_HZ, 50.0, -20.0), RATE_HZ, -10.0, rng)
    words = {text.split(":")[0].split(" (")[0] for text in told(tmp_path, faults.soft_clipped(samples, 4.0))}
    assert {"mains hum", "wind on the microphone"} <= words


def test_a_take_of_nothing_tells_nothing() -> None:
    silence = np.zeros(RATE_HZ, np.float32)
    part = Part(start=100, stop=RATE_HZ // 2, frequency_hz=440.0, harmonic_to_noise_db=30.0)
    assert take_cautions(silence, RATE_HZ, []) == ()
    assert take_cautions(silence, RATE_HZ, [part]) == ()
    assert take_cautions(silence[:100], RATE_HZ, [part]) == ()


@pytest.mark.parametrize("rate_hz", [8000, 11025, 16000, 48000])
def test_any_rate(rate_hz: int) -> None:
    """Shorter blocks and fewer lines: nothing is told of a clean take, and hum is."""
    rng = np.random.default_rng(11)
    made = np.pad(0.1 * make_tone(440.0, 1.5, "plain", 30.0, rng, rate_hz=rate_hz).samples, rate_hz // 2)
    samples = made + 2e-4 * faults.coloured(len(made), rate_hz, 1.0, rng)
    part = Part(start=rate_hz // 2, stop=2 * rate_hz, frequency_hz=440.0, harmonic_to_noise_db=30.0)
    assert take_cautions(samples.astype(np.float32), rate_hz, [part]) == ()
    (caution,) = take_cautions(
        faults.hummed(samples, rate_hz, 60.0, -25.0).astype(np.float32), rate_hz, [part]
    )
    assert caution.startswith(("mains hum (60 Hz): 25 dB under", "mains hum (60 Hz): 26 dB under"))


def test_only_the_beginning_of_a_long_take_is_looked_at(tmp_path: Path) -> None:
    """Over a minute with hum all along: it is told, from the file's first tones."""
    samples = np.tile(faults.hummed(take(), RATE_HZ, 50.0, -25.0), 20)
    assert len(samples) > 3 * LONGEST_S * RATE_HZ
    cautions = {text for tone in heard(tmp_path, samples)[:1] for text in tone.cautions}
    assert any(text.startswith("mains hum (50 Hz)") for text in cautions)
