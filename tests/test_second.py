"""The second opinion: pYIN against tones of known pitch, octaves named, the option from door to file.

librosa's pYIN (Mauch & Dixon, ICASSP 2014) is the outside authority here, and Praat beside it on the demo
flutes; pYIN's grid is 10 cents.
"""

import json
import shutil
import sys
from collections.abc import Iterator
from pathlib import Path
from types import ModuleType

import numpy as np
import parselmouth
import pytest
from click.testing import CliRunner, Result
from tones import RATE_HZ, cents, make_tone

from fluteprobe.cli.main import main
from fluteprobe.cli.second import SLOW
from fluteprobe.sound.partials import Samples
from fluteprobe.sound.pitch import CENTS
from fluteprobe.sound.recording import open_recording
from fluteprobe.sound.second import (
    STEP_CENTS,
    SecondOpinion,
    SecondOpinionError,
    second_opinion,
    standard_error,
)
from fluteprobe.sound.tone import Tone, read_tones

SAMPLES = Path(__file__).parent.parent / "samples"
DEMO = SAMPLES / "heron"


class _BrokenLibrosa(ModuleType):
    """Stands for librosa in an installation where numba cannot keep what it compiles."""

    def __getattr__(self, name: str) -> object:
        raise RuntimeError("cannot cache function '__shear_dense': no locator available\nmore")


@pytest.mark.parametrize("rate_hz", [8000, 44100])
@pytest.mark.parametrize("frequency_hz", [196.0, 450.0, 1046.5])
def test_it_reads_a_steady_tone_within_its_grid(frequency_hz: float, rate_hz: int) -> None:
    made = make_tone(frequency_hz, 1.0, "plain", 30.0, np.random.default_rng(70), rate_hz=rate_hz)
    opinion = second_opinion(made.samples, rate_hz, frequency_hz)
    assert opinion.frequency_hz is not None
    # The nearest step of a 10-cent grid is 5 cents away at most; noise may take it to the next one.
    assert abs(cents(opinion.frequency_hz / frequency_hz)) < STEP_CENTS
    assert opinion.share > 0.9
    assert not opinion.differs
    assert opinion.interval is None


@pytest.mark.parametrize(
    ("ratio", "words"),
    [(2.0, "an octave below"), (0.5, "an octave above"), (1 / 3, "a twelfth above")],
)
def test_an_interval_is_named(ratio: float, words: str) -> None:
    """Our reading is said to be off by that ratio; pYIN is free to find the tone that is there."""
    made = make_tone(523.25, 1.0, "plain", 30.0, np.random.default_rng(71))
    opinion = second_opinion(made.samples, RATE_HZ, 523.25 * ratio)
    assert opinion.differs
    assert opinion.interval == words


def test_half_a_semitone_differs_and_is_no_interval() -> None:
    made = make_tone(440.0, 1.0, "plain", 30.0, np.random.default_rng(72))
    opinion = second_opinion(made.samples, RATE_HZ, 440.0 * 2.0 ** (50.0 / 1200.0))
    assert opinion.differs
    assert opinion.interval is None
    assert opinion.difference_cents == pytest.approx(-50.0, abs=STEP_CENTS)


def test_a_vibrato_widens_the_scatter_and_its_mean_agrees() -> None:
    time_s = np.arange(2 * RATE_HZ) / RATE_HZ
    movement = 30.0 * np.sin(2 * np.pi * 5.0 * time_s)
    made = make_tone(440.0, 2.0, "plain", 30.0, np.random.default_rng(73), movement_cents=movement)
    opinion = second_opinion(made.samples, RATE_HZ, 440.0)
    assert opinion.scatter_cents is not None
    assert opinion.scatter_cents > STEP_CENTS + 2.0
    assert not opinion.differs


def test_noise_alone_has_no_pitch_and_that_differs() -> None:
    noise = np.random.default_rng(74).standard_normal(RATE_HZ).astype(np.float32) * np.float32(0.1)
    opinion = second_opinion(noise, RATE_HZ, 440.0)
    assert opinion.differs
    assert opinion.share < 0.5


def test_neighbours_that_resemble_each_other_count_as_fewer() -> None:
    """For a first-order process of correlation 0.8, the variance of a mean is 9 times that of white noise."""
    rng = np.random.default_rng(75)
    errors = []
    for _ in range(100):
        values = np.zeros(2000)
        for k in range(1, 2000):
            values[k] = 0.8 * values[k - 1] + 0.6 * rng.standard_normal()
        errors.append(standard_error(values) * np.sqrt(2000.0))
    assert np.mean(errors) == pytest.approx(3.0, rel=0.05)
    assert standard_error(np.zeros(10)) == 0.0


# Two outside readers on the demo flutes -----------------------------------------------------------------


def spans(flute: str) -> Iterator[tuple[str, Samples, int, Tone]]:
    """Yield every tone of a demo flute: its take, its samples, their rate, and what we make of it."""
    for path in sorted((SAMPLES / flute / "takes").iterdir()):
        recording = open_recording(path)
        for tone in read_tones(recording):
            if tone.frequency_hz is not None:
                stop = min(round(tone.end_s * recording.rate_hz), recording.frames)
                samples = recording.read(round(tone.start_s * recording.rate_hz), stop)
                yield path.name, samples, recording.rate_hz, tone


def praat_cents(samples: Samples, rate_hz: int, ours_hz: float) -> tuple[float, float]:
    """Return how far above us Praat reads a tone, and its standard error, both in cents.

    Boersma's autocorrelation (IFA Proc. 17, 97 (1993)), its octave cost raised from 0.01 to 0.03 against
    subharmonics: or else it takes the breath resonance at a third of heron's xxvxxx-over for the tone.
    """
    sound = parselmouth.Sound(samples.astype(np.float64), sampling_frequency=rate_hz)
    track = sound.to_pitch_ac(pitch_floor=90.0, pitch_ceiling=3400.0, octave_cost=0.03)
    heard = track.selected_array["frequency"]
    off = CENTS * np.log(heard[heard > 0.0] / ours_hz)
    return float(np.mean(off)), standard_error(off)


@pytest.mark.parametrize("flute", ["heron", "bittern"])
def test_pyin_and_praat_agree_with_us_on_every_demo_take(flute: str) -> None:
    heard = list(spans(flute))
    assert len(heard) >= 14
    for take, samples, rate_hz, tone in heard:
        assert tone.frequency_hz is not None
        opinion = second_opinion(samples, rate_hz, tone.frequency_hz)
        assert opinion.interval is None, take
        assert not opinion.differs, take
        off, scatter = praat_cents(samples, rate_hz, tone.frequency_hz)
        # Twice its standard error, and 0.3 cents for what its parabola through three lags may be off.
        assert abs(off) < 2.0 * scatter + 0.3, take


# The option -------------------------------------------------------------------------------------------


@pytest.fixture
def session(tmp_path: Path) -> Path:
    """Return a session folder with two of the demo flute's takes."""
    folder = tmp_path / "heron"
    (folder / "takes").mkdir(parents=True)
    shutil.copy(DEMO / "flute.toml", folder)
    for take in ("xxxxxx", "oxxxxx-over"):
        shutil.copy(DEMO / "takes" / f"{take}.flac", folder / "takes")
    return folder


def measure(session: Path, *options: str) -> Result:
    out = session.parent / "out"
    return CliRunner().invoke(main, ["measure", str(session), "--out", str(out), *options])


def test_every_tone_gets_an_opinion_on_screen_and_in_both_json(session: Path) -> None:
    told = measure(session, "--second-opinion")
    assert told.exit_code == 0, told.output
    assert SLOW in told.stderr
    file = json.loads((session.parent / "out" / "measurements.json").read_text("utf-8"))
    opinions = [tone["second_opinion"] for tone in file["tones"] if tone["frequency_hz"] is not None]
    assert f"Second opinion: pYIN agrees on {len(opinions)} of {len(opinions)} tones" in told.stdout
    assert [opinion["differs"] for opinion in opinions] == [False] * len(opinions)
    printed = json.loads(measure(session, "--second-opinion", "--json").stdout)
    assert printed["tones"] == file["tones"]


def test_without_the_option_nothing_is_asked(session: Path) -> None:
    told = measure(session, "--json")
    assert "second" not in told.output
    assert all("second_opinion" not in tone for tone in json.loads(told.stdout)["tones"])


def test_an_octave_is_named_on_screen(session: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    octave = SecondOpinion(frequency_hz=200.0, scatter_cents=10.0, share=1.0, difference_cents=-1200.0)
    monkeypatch.setattr("fluteprobe.sound.second.second_opinion", lambda *_: octave)
    told = measure(session, "--second-opinion").stdout
    assert "Second opinion: pYIN agrees on 0 of " in told
    assert "s: pYIN hears 200.00 Hz, an octave below our " in told


def test_where_librosa_does_not_run_measuring_goes_on(session: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(sys.modules, "librosa", _BrokenLibrosa("librosa"))
    told = measure(session, "--second-opinion")
    assert told.exit_code == 0, told.output
    assert (
        "No second opinion: librosa cannot be asked here (cannot cache function '__shear_dense': no locator "
        "available)\n"
    ) in told.stderr
    assert "xxxxxx" in told.stdout
    with pytest.raises(SecondOpinionError, match=r"^librosa cannot be asked here \("):
        second_opinion(np.zeros(44100, np.float32), RATE_HZ, 440.0)


def test_hear_says_it_too(session: Path, tmp_path: Path) -> None:
    take = str(session / "takes" / "xxxxxx.flac")
    told = CliRunner().invoke(main, ["hear", take, "--second-opinion", "--out", str(tmp_path / "pages")])
    assert told.exit_code == 0, told.output
    assert "Second opinion: pYIN agrees on 1 of 1 tones" in told.stdout
    told = CliRunner().invoke(
        main, ["hear", take, "--second-opinion", "--json", "--out", str(tmp_path / "pages")]
    )
    (tone,) = json.loads(told.stdout)["tones"]
    assert tone["second_opinion"]["differs"] is False
