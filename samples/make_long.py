"""Makes one long recording out of takes: `python samples/make_long.py [FILE]` writes a demo flute's.

It holds what such a recording holds beside takes: pauses, words, coughs. Times in seconds, levels in dB
against full scale. The words are made up: syllables of a buzzing voice with two formants each, and hiss
between them. Random choices come from the seeds alone; the demo's takes are those of the simulated flute.
"""

import sys
from collections.abc import Iterable
from pathlib import Path

import numpy as np
import numpy.typing as npt
import soundfile

Samples = npt.NDArray[np.float64]

HERE = Path(__file__).parent

_SYLLABLE_S = (0.12, 0.22)
_VOICE_HZ = (95.0, 210.0)
_FORMANTS_HZ = ((300.0, 800.0), (900.0, 2300.0))
_FORMANT_WIDTH_HZ = 120.0
_PAUSES_S = (1.0, 3.0)
_DEMO_S = 1.2
_DEMO_PAUSES_S = (0.8, 1.2)
_DEMO_ROOM_DB = -78.0
_DEMO = (
    "word", "xxxxxx", "xxxxxo", "xxxxoo", "word", "xxxxoo", "xxxooo", "xxoooo", "cough", "xooooo", "oooooo",
    "xxxxxx-over", "xxxxxo-over", "xxxxoo-over",
)  # fmt: skip

_TWO_TONES = {"xxxxxx-over"}


def spoken(seconds: float, rate_hz: int, random: np.random.Generator, level_db: float = -30.0) -> Samples:
    """Return something like speech: syllables whose pitch and vowel move, with hiss between some."""
    parts: list[Samples] = []
    while sum(map(len, parts)) < seconds * rate_hz:
        parts.append(_syllable(random.uniform(*_SYLLABLE_S), rate_hz, random))
        hiss = random.standard_normal(int(random.uniform(0.0, 0.07) * rate_hz))
        parts.append(0.15 * np.diff(hiss, prepend=0.0))
    return _at_level(np.concatenate(parts), level_db)


def _syllable(seconds: float, rate_hz: int, random: np.random.Generator) -> Samples:
    time_s = np.arange(int(seconds * rate_hz)) / rate_hz
    from_hz = random.uniform(*_VOICE_HZ)
    pitch_hz = from_hz * 2.0 ** (random.uniform(-0.3, 0.3) * time_s / seconds)
    phase = 2.0 * np.pi * np.cumsum(pitch_hz) / rate_hz
    formants = [random.uniform(*limits) for limits in _FORMANTS_HZ]
    voice = np.zeros(len(time_s))
    for order in range(1, int(3500.0 / from_hz)):
        away = np.array([(order * from_hz - formant) / _FORMANT_WIDTH_HZ for formant in formants])
        voice += np.sum(1.0 / (1.0 + away**2)) * np.cos(order * phase)
    return np.asarray(voice * np.sin(np.pi * time_s / seconds) ** 2)


def coughed(rate_hz: int, random: np.random.Generator, level_db: float = -25.0) -> Samples:
    """Return two bursts of noise that die away."""
    time_s = np.arange(int(0.25 * rate_hz)) / rate_hz
    bursts = [random.standard_normal(len(time_s)) * np.exp(-time_s / 0.05) for _ in range(2)]
    return _at_level(np.concatenate(bursts), level_db)


def in_one_go(
    sounds: Iterable[Samples],
    rate_hz: int,
    random: np.random.Generator,
    *,
    room_db: float = -66.0,
    pauses_s: tuple[float, float] = _PAUSES_S,
) -> Samples:
    """Return sounds one after the other, with pauses between them, over the noise of a room."""
    parts = [np.zeros(rate_hz)]
    for sound in sounds:
        parts += [sound, np.zeros(int(random.uniform(*pauses_s) * rate_hz))]
    whole = np.concatenate(parts)
    return np.asarray(whole + 10.0 ** (room_db / 20.0) * random.standard_normal(len(whole)))


def _at_level(samples: Samples, level_db: float) -> Samples:
    return np.asarray(samples * (10.0 ** (level_db / 20.0) / np.sqrt(np.mean(samples**2))))


def main() -> None:
    """Write the demo flute's evening."""
    target = Path(sys.argv[1]) if len(sys.argv) > 1 else HERE / "evening.flac"
    random = np.random.default_rng(8)
    rate_hz = soundfile.info(HERE / "heron" / "takes" / "xxxxxx.flac").samplerate
    sounds = []
    for name in _DEMO:
        if name == "word":
            sounds.append(spoken(0.7, rate_hz, random))
        elif name == "cough":
            sounds.append(coughed(rate_hz, random))
        else:
            samples, _ = soundfile.read(HERE / "heron" / "takes" / f"{name}.flac")
            length = int((2.0 if name in _TWO_TONES else 1.0) * _DEMO_S * rate_hz)
            sounds.append(samples[:length] * _release(len(samples[:length]), rate_hz))
    whole = in_one_go(sounds, rate_hz, random, room_db=_DEMO_ROOM_DB, pauses_s=_DEMO_PAUSES_S)
    soundfile.write(target, whole, rate_hz, subtype="PCM_16")


def _release(length: int, rate_hz: int) -> Samples:
    """Return a curve that ends a tone within a twentieth of a second."""
    return np.minimum(1.0, np.arange(length, 0, -1) / (0.05 * rate_hz))


if __name__ == "__main__":
    main()
