"""The simulated flute: its modes, registers and noise, its truth, and the demo recordings made with it.

The simulation is ours, so these are checks of its physics and of its own words; nothing here is a reference
for a real flute.
"""

import json
from dataclasses import replace
from functools import cache
from pathlib import Path

import make_demo
import numpy as np
import numpy.typing as npt
import pytest
import simulation
import soundfile
from builds import lay_out, play, random_build, usual_takes
from simulation import FluteBuild, Microphone, Simulated, blow, speaking_pressure_pa, steady, steps

from fluteprobe.flute.fingering import Fingering, ladder
from fluteprobe.flute.tube import resonances
from fluteprobe.flute.tuning import cents_between, nearest_note
from fluteprobe.session import read_session

SAMPLES = Path(make_demo.__file__).parent
DEMOS = ("heron", "bittern")
CLOSED = Fingering("xxxxxx")
LARGEST_BYTES = 8_000_000

Reals = npt.NDArray[np.float64]


@cache
def build() -> FluteBuild:
    return make_demo.heron().build


@cache
def blown(word: str, share: float, seconds: float = 1.5, seed: int = 1) -> Simulated:
    """Blow the Heron at a share of the pressure at which the first register speaks most readily."""
    fingering = Fingering(word)
    return blow(
        build(), fingering, steady(share * speaking_pressure_pa(build(), fingering), seconds), seed=seed
    )


def mean_frequency(samples: Reals, rate_hz: int, near_hz: float) -> float:
    """Return the mean frequency near one frequency: turns of the phase of a narrow band, over time.

    The band is a Hann window's of 40 periods, moved along; so neither partials nor slow loudness matter.
    """
    width = round(40.0 * rate_hz / near_hz)
    window = np.hanning(width + 2)[1:-1]
    turning = samples * np.exp(-2j * np.pi * near_hz / rate_hz * np.arange(len(samples)))
    size = 1 << (len(samples) + width).bit_length()
    slow = np.fft.ifft(np.fft.fft(turning, size) * np.fft.fft(window, size))[width - 1 : len(samples)]
    phase = np.unwrap(np.angle(slow))
    return float(near_hz + (phase[-1] - phase[0]) / (2.0 * np.pi * (len(phase) - 1)) * rate_hz)


def noise_db(take: Simulated) -> tuple[Reals, Reals]:
    """Return frequencies and the averaged spectrum in dB of a take's steady part."""
    tone = take.truth[0]
    part = take.samples[round(tone.start_s * take.rate_hz) : round(tone.end_s * take.rate_hz)].astype(float)
    size = 8192
    frames = np.lib.stride_tricks.sliding_window_view(part, size)[:: size // 4] * np.blackman(size)
    power = np.mean(np.abs(np.fft.rfft(frames, axis=1)) ** 2, axis=0)
    return np.asarray(np.fft.rfftfreq(size, 1.0 / take.rate_hz), np.float64), np.asarray(
        10.0 * np.log10(power)
    )


# --- the modes ---------------------------------------------------------------------------------------


def test_a_mode_left_alone_loses_its_energy_at_its_own_width() -> None:
    """Amplitude falls as exp(−π width t). 1 %: where the flow separates, the first mode loses a little more.

    Two modes: the third is soon so faint that what the first one stirs by that separation hides it.
    """
    openness = np.zeros(6)
    modes = simulation._modes(build().tube, openness)
    pressure = np.zeros(simulation.INNER_RATE_HZ // 2)
    pressure[: len(pressure) // 10] = 300.0
    states = simulation._blown(build(), openness, modes, pressure, np.random.default_rng(1)).states
    rate = simulation.INNER_RATE_HZ / simulation.KEEP_EVERY
    late = np.log(np.abs(states[:2, round(0.25 * rate) : round(0.4 * rate)]))
    slopes = np.polyfit(np.arange(late.shape[1]) / rate, late.T, 1)[0]
    np.testing.assert_allclose(-slopes / np.pi, modes.width_hz[:2], rtol=0.01)


def test_a_mode_pushed_at_its_frequency_swings_as_strongly_as_the_tube_model_says() -> None:
    """The admittance of the sampled mode at resonance is the tube's, within 0.5 %."""
    modes = simulation._modes(build().tube, np.zeros(6))
    poles = simulation.mode_poles(modes)
    pushes = simulation._pushes(modes, poles, 1.0)
    turn = np.exp(2j * np.pi * modes.frequency_hz / simulation.INNER_RATE_HZ)
    swing = pushes * turn / (turn - np.exp(poles / simulation.INNER_RATE_HZ))
    np.testing.assert_allclose(np.abs(swing[:3]), modes.strength[:3], rtol=0.005)


# --- sounding ----------------------------------------------------------------------------------------


@pytest.mark.parametrize("word", ["xxxxxx", "xxxxoo", "oooooo", "xoxxxx"])
def test_a_tone_lies_close_to_the_mode_that_carries_it(word: str) -> None:
    """The jet pulls a tone some cents off its mode; 40 cents is the most a usual breath does."""
    take = blown(word, 1.0)
    assert [tone.register for tone in take.truth] == [1]
    assert abs(cents_between(float(take.modes.frequency_hz[0]), take.truth[0].frequency_hz)) < 40.0


def test_blowing_harder_sharpens_then_jumps_to_the_next_registers() -> None:
    soft, usual, hard = (blown("xxxxxx", share) for share in (0.7, 1.0, 1.6))
    pitches = [take.truth[0].frequency_hz for take in (soft, usual, hard)]
    assert [take.truth[0].register for take in (soft, usual, hard)] == [1, 1, 1]
    assert pitches == sorted(pitches)
    assert [tone.register for tone in blown("xxxxxx", 5.0).truth] == [2]
    assert [tone.register for tone in blown("xxxxxx", 18.0).truth] == [3]


def test_too_little_breath_and_none_do_not_speak() -> None:
    assert not blown("xxxxxx", 0.01).spoke
    assert not blow(build(), CLOSED, [(0.0, 0.0), (0.5, 0.0)], seed=1).spoke


def test_the_noise_of_a_second_register_tone_shows_the_mode_that_does_not_sound() -> None:
    """Nothing is drawn there: turbulence pushes all modes. 6 dB over the floor beside it."""
    take = blown("xxxxxx", 5.0, seconds=3.0)
    frequency, level = noise_db(take)
    silent = float(take.modes.frequency_hz[0])
    bump = level[np.abs(frequency - silent) < 12.0].max()
    floor = np.median(level[(frequency > 0.4 * silent) & (frequency < 0.8 * silent)])
    assert bump - floor > 6.0


def test_partials_fall_and_stand_over_the_noise_as_a_flutes_do() -> None:
    """Second partial 3 to 40 dB under the first; partials together 20 to 45 dB over the noise."""
    take = blown("xxxxoo", 1.0, seconds=2.5)
    frequency, level = noise_db(take)
    tone_hz = take.truth[0].frequency_hz
    partials = [float(level[np.abs(frequency - k * tone_hz) < 12.0].max()) for k in (1, 2, 3, 4, 5)]
    assert -40.0 < partials[1] - partials[0] < -3.0
    assert max(partials[2:]) < partials[0]
    near = np.abs(frequency - tone_hz * np.maximum(np.round(frequency / tone_hz), 1.0)) < 18.0
    power = 10.0 ** (level / 10.0)
    over_noise = 10.0 * np.log10(power[near].sum() / power[~near & (frequency > 60.0)].sum())
    assert 20.0 < over_noise < 45.0


# --- truth and repetition ----------------------------------------------------------------------------


@pytest.mark.parametrize(("word", "share"), [("xxxxxx", 1.0), ("xxxxoo", 1.2), ("xxxxxx", 5.0)])
def test_the_true_frequency_is_that_of_the_samples(word: str, share: float) -> None:
    """0.15 cent: the sound is late by its way to the microphone, and its breath wanders meanwhile."""
    take = blown(word, share, seconds=3.0)
    tone = take.truth[0]
    part = take.samples[round(tone.start_s * take.rate_hz) : round(tone.end_s * take.rate_hz)].astype(float)
    heard = mean_frequency(part, take.rate_hz, tone.frequency_hz)
    assert cents_between(tone.frequency_hz, heard) == pytest.approx(0.0, abs=0.15)
    assert tone.purity > 0.97


def test_two_pressures_in_one_breath_are_two_tones() -> None:
    low = speaking_pressure_pa(build(), CLOSED)
    take = blow(build(), CLOSED, steps([(low, 0.8), (5.0 * low, 0.8)]), seed=2)
    assert [tone.register for tone in take.truth] == [1, 2]
    assert take.truth[0].end_s <= 1.0 + 0.011
    assert take.truth[1].start_s > take.truth[0].end_s


def test_the_same_seed_gives_the_same_samples_and_another_does_not() -> None:
    curve = steady(300.0, 0.8)
    one, same, other = (blow(build(), CLOSED, curve, seed=seed) for seed in (7, 7, 8))
    np.testing.assert_array_equal(one.samples, same.samples)
    assert one.truth == same.truth
    assert not np.array_equal(one.samples, other.samples)


@pytest.mark.parametrize("rate_hz", [8_000, 48_000, 96_000])
def test_any_rate_records_the_same_sound(rate_hz: int) -> None:
    take = blow(build(), CLOSED, steady(300.0, 1.5), seed=3, microphone=Microphone(rate_hz=rate_hz))
    assert len(take.samples) == 1.5 * rate_hz
    tone = take.truth[0]
    part = take.samples[round(tone.start_s * rate_hz) : round(tone.end_s * rate_hz)].astype(float)
    heard = mean_frequency(part, rate_hz, tone.frequency_hz)
    assert cents_between(tone.frequency_hz, heard) == pytest.approx(0.0, abs=0.15)


# --- builds ------------------------------------------------------------------------------------------


@pytest.mark.parametrize("seed", [1, 2, 3, 4])
def test_random_flutes_are_plausible(seed: int) -> None:
    drawn = random_build(seed)
    assert drawn == random_build(seed)
    assert 14.0 <= drawn.tube.bore_mm <= 28.0
    assert len(drawn.tube.holes_mm) in {5, 6}
    notes = resonances(drawn.tube, ladder(len(drawn.tube.holes_mm)), 1).frequency_hz[:, 0]
    assert 170.0 < notes[0] < 720.0
    assert np.all(np.diff(1200.0 * np.log2(notes)) > 30.0)


def test_a_flute_is_laid_out_for_its_scale_within_a_cent() -> None:
    scale = (0, 3, 5, 7, 8, 10, 12)
    tube = lay_out(build().tube, 400.0, scale)
    played = resonances(tube, ladder(6), 1).frequency_hz[:, 0]
    np.testing.assert_allclose(1200.0 * np.log2(played / 400.0), 100.0 * np.array(scale), atol=1.0)


def test_a_flute_without_room_for_its_holes_is_refused() -> None:
    with pytest.raises(ValueError, match=r"^no room between \d+ and \d+ mm$"):
        lay_out(build().tube, 1500.0, (0, 1, 2, 3, 4, 5, 6))


def test_the_usual_takes_aim_at_three_registers_and_have_names_of_their_own() -> None:
    plans = usual_takes(build(), 1)
    assert {aim for plan in plans for aim in plan.aims} == {1, 2, 3}
    assert len({plan.name for plan in plans}) == len(plans)
    assert {state for plan in plans for state in plan.fingering.states} == set("xohv")


# --- the demo ----------------------------------------------------------------------------------------


def truth_of(demo: str) -> dict[str, list[dict[str, float]]]:
    return dict(json.loads((SAMPLES / demo / "truth.json").read_text(encoding="utf-8")))


def test_the_demo_is_at_most_8_mb() -> None:
    assert sum(path.stat().st_size for path in SAMPLES.rglob("*") if path.is_file()) <= LARGEST_BYTES


@pytest.mark.parametrize("demo", DEMOS)
def test_demo_sessions_are_read_without_a_problem(demo: str) -> None:
    session = read_session(SAMPLES / demo)
    assert session.problems == ()
    assert 12 <= len(session.takes) <= 18
    assert {f"takes/{path.name}" for path in (SAMPLES / demo / "takes").iterdir()} == set(truth_of(demo))
    assert session.sitting.air_temperature_c is not None
    assert session.sitting.reference_temperature_c is not None


@pytest.mark.parametrize("demo", DEMOS)
def test_demo_truth_is_what_the_files_hold(demo: str) -> None:
    """0.15 cent, as above; and where nothing spoke, no tone is claimed."""
    silent = 0
    for name, tones in truth_of(demo).items():
        info = soundfile.info(SAMPLES / demo / name)
        assert (info.samplerate, info.channels, info.subtype) == (44_100, 1, "PCM_16")
        samples, rate = soundfile.read(SAMPLES / demo / name)
        assert np.abs(samples).max() < 0.75
        silent += not tones
        for tone in tones:
            part = samples[round(tone["start_s"] * rate) : round(tone["end_s"] * rate)]
            heard = mean_frequency(part, rate, tone["frequency_hz"])
            assert cents_between(tone["frequency_hz"], heard) == pytest.approx(0.0, abs=0.15), name
    assert silent == 1


@pytest.mark.parametrize("demo", DEMOS)
def test_demo_ladders_are_near_equal_temperament_and_all_registers_are_there(demo: str) -> None:
    """Believable: the ladder within 25 cents of its notes, octaves stretched, but by less than 40 cents."""
    truth = truth_of(demo)
    holes = read_session(SAMPLES / demo).flute.holes
    for fingering in ladder(holes):
        (tone,) = truth[f"takes/{fingering}.flac"]
        assert tone["register"] == 1
        assert abs(nearest_note(tone["frequency_hz"])[1]) < 25.0
    assert {tone["register"] for tones in truth.values() for tone in tones} == {1, 2, 3}
    low, high = truth[f"takes/{'x' * holes}-over.flac"]
    assert (low["register"], high["register"]) == (1, 2)
    assert 5.0 < cents_between(2.0 * low["frequency_hz"], high["frequency_hz"]) < 40.0


def test_a_demo_take_can_be_made_anew() -> None:
    """Regression: the same sound comes from the same plan and seed, up to the loudness of the whole set."""
    demo = make_demo.heron()
    plan = demo.plans[2]
    made = play(demo.build, plan, 1000 * demo.seed + 2).samples.astype(float)
    kept, _ = soundfile.read(SAMPLES / "heron" / "takes" / f"{plan.name}.flac")
    assert len(made) == len(kept)
    assert np.corrcoef(made, kept)[0, 1] > 0.9999


def test_a_wet_flue_keeps_the_flute_from_speaking() -> None:
    demo = make_demo.heron()
    wet = replace(demo.plans[2], wet_flue=True)
    assert not play(demo.build, wet, 5).spoke
