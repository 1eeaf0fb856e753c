"""Pitch: error, bound, gross errors, coverage and time, ours beside general-purpose trackers.

Conventions: errors in cents, rms over cases without gross errors; a gross error is over 30 cents, an octave
error one of them within 50 cents of a low multiple or part of the truth; a missed tone is not found at all.
The bound is Cramér and Rao's for the whole tone. "Ours" is the whole way from samples to tone: span, octave,
pitch, partials and breath, so that its time holds more than pitch. The real-time factor is time over the
tone's length: smaller is quicker. Everything is drawn from fixed seeds.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path
from tempfile import TemporaryDirectory
from time import perf_counter

import numpy as np
from bench.referees import TRACKERS, Samples
from bench.tables import cents_text, share_text, table
from numpy.typing import NDArray
from tones import RATE_HZ, TIMBRES, Made, as_recording, bound_cents, cents, make_tone

from fluteprobe.sound.octave import settle_octave
from fluteprobe.sound.partials import demodulate, orders_below_nyquist
from fluteprobe.sound.pitch import Pitch, measure_pitch, phase_track, refine
from fluteprobe.sound.tone import Tone, read_tones

Floats = NDArray[np.float64]

GROSS_CENTS = 30.0
PITCHES_HZ = (110.0, 220.0, 440.0, 880.0, 1320.0, 2600.0)
SNRS_DB = (10.0, 20.0, 30.0, 40.0, 50.0)
_OCTAVE_CENTS = 50.0
_PARTS = (1 / 3, 1 / 2, 2.0, 3.0, 4.0, 1 / 4)


@dataclass(frozen=True, slots=True, kw_only=True)
class Heard:
    """One answer: its error in cents (NaN: nothing heard), the bound, ±2u covering, seconds taken."""

    error_cents: float
    bound_cents: float
    covered: bool
    taken_s: float
    tone_s: float

    @property
    def is_gross(self) -> bool:
        """Whether it is more than 30 cents off, but heard."""
        return abs(self.error_cents) > GROSS_CENTS

    @property
    def is_octave(self) -> bool:
        """Whether it is off by a low multiple or part."""
        return any(abs(self.error_cents - cents(part)) < _OCTAVE_CENTS for part in _PARTS)

    @property
    def is_missed(self) -> bool:
        """Whether nothing was heard."""
        return bool(np.isnan(self.error_cents))


def report(*, full: bool, say: Callable[[str], None]) -> None:
    """Print every table on pitch."""
    say("### Side by side\n\n" + side_by_side(3 if full else 1))
    say("### Error over the bound, by timbre and noise (the estimator on the whole tone)\n\n" + ratios(full))
    say("### Random cases from sound to tone\n\n" + random_cases(10_000 if full else 500))
    say("### Wandering pitch\n\n" + wandering(2000 if full else 100))


# --- side by side ------------------------------------------------------------------------------------


def side_by_side(rounds: int) -> str:
    """Return the table of all trackers over signal-to-noise and pitch, one-second tones of every timbre."""
    for tracker in TRACKERS.values():  # what is compiled on first use is compiled before the clock starts
        tracker(make_tone(440.0, 0.5, "plain", 40.0, np.random.default_rng(0)).samples, RATE_HZ)
    names = ("ours", *TRACKERS)
    rows, everything = [], {name: list[Heard]() for name in names}
    for snr_db in SNRS_DB:
        for base_hz in PITCHES_HZ:
            heard = _all_heard(base_hz, snr_db, rounds)
            bound = _rms([each.bound_cents for each in heard["ours"]])
            rows.append([f"{snr_db:.0f} dB", f"{base_hz:.0f}", cents_text(bound)])
            rows[-1] += [_rms_text(heard[name]) for name in names]
            rows[-1] += [_faults(heard[name]) for name in names]
            for name in names:
                everything[name] += heard[name]
    titles = [
        "noise",
        "Hz",
        "bound",
        *(f"{name} rms" for name in names),
        *(f"{name} faults" for name in names),
    ]
    return "\n\n".join([table(titles, rows), _summary(everything)])


def _all_heard(base_hz: float, snr_db: float, rounds: int) -> dict[str, list[Heard]]:
    rng = np.random.default_rng([50, int(base_hz), int(snr_db)])
    heard = {name: list[Heard]() for name in ("ours", *TRACKERS)}
    with TemporaryDirectory() as folder:
        for timbre in list(TIMBRES) * rounds:
            frequency_hz = base_hz * 2.0 ** (rng.uniform(-50, 50) / 1200.0)
            made = make_tone(frequency_hz, 1.0, timbre, snr_db, rng)
            made = _quieter(made)
            bound = bound_cents(made, frequency_hz)
            heard["ours"].append(_ours(made, frequency_hz, Path(folder), bound))
            for name, tracker in TRACKERS.items():
                start = perf_counter()
                told_hz = tracker(made.samples, RATE_HZ)
                taken_s = perf_counter() - start
                heard[name].append(_heard(told_hz / frequency_hz, None, made, bound, taken_s))
    return heard


def _quieter(made: Made) -> Made:
    """Return the same tone below full scale, as it would be recorded."""
    gain = np.float32(0.5 / np.abs(made.samples).max())
    return Made(samples=made.samples * gain, amplitudes=made.amplitudes, noise=made.noise)


def _ours(made: Made, frequency_hz: float, folder: Path, bound: float) -> Heard:
    recording = as_recording(folder, made.samples)
    start = perf_counter()
    tones = [tone for tone in read_tones(recording) if tone.frequency_hz is not None]
    taken_s = perf_counter() - start
    longest = max(tones, key=lambda tone: tone.end_s - tone.start_s) if tones else None
    told_hz = float("nan") if longest is None or longest.frequency_hz is None else longest.frequency_hz
    return _heard(told_hz / frequency_hz, longest, made, bound, taken_s)


def _heard(ratio: float, tone: Tone | None, made: Made, bound: float, taken_s: float) -> Heard:
    error = cents(ratio)
    return Heard(
        error_cents=error,
        bound_cents=bound,
        covered=tone is not None and abs(error) < 2.0 * (tone.uncertainty_cents or 0.0),
        taken_s=taken_s,
        tone_s=len(made.samples) / RATE_HZ,
    )


def _summary(everything: dict[str, list[Heard]]) -> str:
    rows = []
    for name, heard in everything.items():
        errors = [each.error_cents for each in heard if not each.is_gross and not each.is_missed]
        rows.append(
            [
                name,
                str(len(heard)),
                cents_text(_rms(errors)),
                f"{np.mean(errors):+.4f}",
                f"{np.median(np.abs(errors) / np.array(_bounds(heard))):.2f}",
                str(sum(each.is_gross and not each.is_octave for each in heard)),
                str(sum(each.is_octave for each in heard)),
                str(sum(each.is_missed for each in heard)),
                share_text(sum(each.covered for each in heard), len(heard)) if name == "ours" else "–",
                f"{sum(each.taken_s for each in heard) / sum(each.tone_s for each in heard):.4f}",
            ]
        )
    titles = ["all cases", "tones", "rms", "bias", "median error / bound", "gross", "octave", "missed",
              "in ±2u", "real-time factor"]  # fmt: skip
    return table(titles, rows)


def _bounds(heard: Sequence[Heard]) -> list[float]:
    return [each.bound_cents for each in heard if not each.is_gross and not each.is_missed]


def _rms(values: Sequence[float]) -> float:
    return float(np.sqrt(np.mean(np.square(values)))) if len(values) else float("nan")


def _rms_text(heard: Sequence[Heard]) -> str:
    return cents_text(_rms([each.error_cents for each in heard if not each.is_gross and not each.is_missed]))


def _faults(heard: Sequence[Heard]) -> str:
    """Return gross errors, octaves, missed, in that order; a dot for none."""
    counts = {
        "g": sum(each.is_gross and not each.is_octave for each in heard),
        "o": sum(each.is_octave for each in heard),
        "m": sum(each.is_missed for each in heard),
    }
    return " ".join(f"{count}{letter}" for letter, count in counts.items() if count) or "·"


# --- the estimator against its bound -----------------------------------------------------------------


def ratios(full: bool) -> str:
    """Return rms error over the bound for each timbre and noise, over pitch and length from 0.3 s up."""
    rows = []
    for timbre in TIMBRES:
        for colour in COLOURS:
            cells = [_ratio_cell(timbre, snr_db, colour, 120 if full else 20) for snr_db in SNRS_DB]
            rows.append([f"{timbre}, {colour}", *cells])
    return table(["rms error / bound · bias in cents · in ±2u", *(f"{snr:.0f} dB" for snr in SNRS_DB)], rows)


def _ratio_cell(timbre: str, snr_db: float, colour: str, cases: int) -> str:
    rng = np.random.default_rng([51, len(timbre), int(snr_db), len(colour)])
    over, errors, covered = [], [], 0
    for _ in range(cases):
        case = _random_case(rng, timbre=timbre, snr_db=snr_db, colour=colour)
        pitch = _estimated(case.made.samples, case.frequency_hz * 2.0 ** (rng.uniform(-15, 15) / 1200.0))
        error = cents(pitch.frequency_hz / case.frequency_hz)
        if abs(error) < GROSS_CENTS:
            errors.append(error)
            over.append(error / case.bound_cents)
            covered += abs(error) < 2.0 * pitch.uncertainty_cents
    gross = f" · {cases - len(errors)} gross" if len(errors) < cases else ""
    return f"{_rms(over):.2f} · {np.mean(errors):+.3f} · {100 * covered / len(errors):.0f} %{gross}"


def _estimated(samples: Samples, coarse_hz: float) -> Pitch:
    refined = refine(samples, RATE_HZ, settle_octave(samples, RATE_HZ, coarse_hz))
    tracks = demodulate(samples, RATE_HZ, refined, orders_below_nyquist(RATE_HZ, refined))
    return measure_pitch(phase_track(tracks))


# --- random cases ------------------------------------------------------------------------------------

COLOURS = ("white", "coloured")


@dataclass(frozen=True, slots=True, kw_only=True)
class Case:
    """A random tone and the bound of its frequency in its noise."""

    made: Made
    frequency_hz: float
    bound_cents: float
    colour: str


def _random_case(
    rng: np.random.Generator,
    *,
    timbre: str | None = None,
    snr_db: float | None = None,
    colour: str | None = None,
) -> Case:
    """Draw a tone: 110 to 2600 Hz, 0.3 to 1.5 s, 10 to 50 dB over white or coloured noise."""
    frequency_hz = 110.0 * (2600.0 / 110.0) ** rng.uniform()
    duration_s = rng.uniform(0.3, 1.5)
    timbre = timbre or str(rng.choice(list(TIMBRES)))
    snr_db = rng.uniform(10.0, 50.0) if snr_db is None else snr_db
    colour = colour or str(rng.choice(COLOURS))
    clean = make_tone(frequency_hz, duration_s, timbre, 400.0, rng)
    n, noise = len(clean.samples), 10.0 ** (-snr_db / 20.0)
    hertz = np.asarray(np.fft.rfftfreq(n, 1.0 / RATE_HZ), np.float64)
    shape: Floats = np.ones(len(hertz)) if colour == "white" else _breath_shape(hertz, frequency_hz, rng)
    shape /= np.sqrt(np.mean(shape**2))
    sound = np.fft.irfft(np.fft.rfft(rng.standard_normal(n)) * shape, n)
    made = Made(
        samples=(clean.samples + noise * sound).astype(np.float32), amplitudes=clean.amplitudes, noise=noise
    )
    bound = _coloured_bound_cents(made, frequency_hz, np.asarray(np.interp(
        frequency_hz * np.arange(1, len(made.amplitudes) + 1), hertz, shape)))  # fmt: skip
    return Case(made=_quieter(made), frequency_hz=frequency_hz, bound_cents=bound, colour=colour)


def _breath_shape(hertz: Floats, frequency_hz: float, rng: np.random.Generator) -> Floats:
    """Return the spectrum of breath: falling 3 to 6 dB an octave above 300 Hz, a bump at half the pitch."""
    fall = rng.uniform(0.5, 1.0)
    slope = (np.maximum(hertz, 300.0) / 300.0) ** -fall
    width = rng.uniform(0.01, 0.05) * frequency_hz
    bump = 10.0 ** (rng.uniform(5.0, 20.0) / 20.0) / np.sqrt(
        1.0 + ((hertz - 0.5 * frequency_hz) / width) ** 2
    )
    return np.asarray(slope * np.sqrt(1.0 + bump**2))


def _coloured_bound_cents(made: Made, frequency_hz: float, shape: Floats) -> float:
    """Return the bound with each partial's power over the noise density at its own place."""
    orders = np.arange(1, len(made.amplitudes) + 1)
    told = np.sum((orders * made.amplitudes / shape) ** 2)
    variance = 24.0 * made.noise**2 / (len(made.samples) ** 3 * told)
    return float(np.sqrt(variance) * RATE_HZ / (2 * np.pi) / frequency_hz * 1200.0 / np.log(2.0))


def random_cases(count: int) -> str:
    """Return faults and coverage of ours over random cases, white and coloured noise apart."""
    rows: dict[str, list[Heard]] = {colour: [] for colour in COLOURS}
    worst: list[str] = []
    with TemporaryDirectory() as name:
        for k in range(count):
            case = _random_case(np.random.default_rng([52, k]))  # so that each can be made again alone
            heard = _ours(case.made, case.frequency_hz, Path(name), case.bound_cents)
            rows[case.colour].append(heard)
            if heard.is_gross or heard.is_missed:
                length = len(case.made.samples) / RATE_HZ
                snr = -20 * np.log10(case.made.noise)
                worst.append(
                    f"- case {k}: {case.frequency_hz:.1f} Hz, {length:.2f} s, {snr:.0f} dB, {case.colour}, "
                    f"amplitudes {np.round(case.made.amplitudes, 2).tolist()}: {heard.error_cents:+.0f} cents"
                )
            for path in Path(name).iterdir():
                path.unlink()
    cells = [[colour, *_fault_cells(heard)] for colour, heard in rows.items()]
    titles = ["noise", "tones", "gross", "octave", "missed", "in ±2u", "bias in cents", "rms error / bound"]
    return "\n".join([table(titles, cells), "", *worst]).rstrip()


def _fault_cells(heard: Sequence[Heard]) -> list[str]:
    fine = [each for each in heard if not each.is_gross and not each.is_missed]
    return [
        str(len(heard)),
        str(sum(each.is_gross and not each.is_octave for each in heard)),
        str(sum(each.is_octave for each in heard)),
        str(sum(each.is_missed for each in heard)),
        share_text(sum(each.covered for each in fine), len(fine)),
        f"{np.mean([each.error_cents for each in fine]):+.4f}",
        f"{_rms([each.error_cents / each.bound_cents for each in fine]):.2f}",
    ]


# --- wandering pitch ---------------------------------------------------------------------------------

_STEP_S = 0.005


def wandering(count: int) -> str:
    """Return how often ±2u covers the middle of a pitch that wanders with memory, by memory and length."""
    rows = []
    for memory_s in (0.05, 0.15, 0.4):
        cells = [_wander_cell(memory_s, length_s, count // 9) for length_s in (1.0, 2.0, 4.0)]
        rows.append([f"{memory_s:g} s", *cells])
    titles = ["memory of the wander", "1 s: in ±2u · rms cents · mean u", "2 s", "4 s"]
    return table(titles, rows)


def _wander_cell(memory_s: float, length_s: float, cases: int) -> str:
    rng = np.random.default_rng([53, round(100 * memory_s), round(length_s)])
    covered, errors, stated = 0, [], []
    time_s = np.arange(round(length_s * RATE_HZ)) / RATE_HZ
    for _ in range(cases):
        spread = rng.uniform(1.0, 8.0)
        frequency_hz = rng.uniform(200.0, 1500.0)
        knots = _wander(rng, memory_s, spread, round(length_s / _STEP_S) + 1)
        movement = np.interp(time_s, _STEP_S * np.arange(len(knots)), knots)
        made = make_tone(
            frequency_hz, length_s, "plain", rng.uniform(20.0, 40.0), rng, movement_cents=movement
        )
        pitch = _estimated(made.samples, frequency_hz)
        errors.append(cents(pitch.frequency_hz / frequency_hz))
        stated.append(pitch.uncertainty_cents)
        covered += abs(errors[-1]) < 2.0 * stated[-1]
    return f"{100 * covered / cases:.1f} % · {_rms(errors):.2f} · {np.mean(stated):.2f}"


def _wander(rng: np.random.Generator, memory_s: float, spread_cents: float, count: int) -> Floats:
    """Return a first-order wander (count,) in steps of 5 ms, its middle at zero."""
    keep = float(np.exp(-_STEP_S / memory_s))
    pushes = rng.standard_normal(count) * spread_cents * np.sqrt(1.0 - keep**2)
    wander = np.empty(count)
    wander[0] = rng.standard_normal() * spread_cents
    for i in range(1, count):
        wander[i] = keep * wander[i - 1] + pushes[i]
    return wander
