"""Cautions: how often faults and wrong names are told, and how often one is told where there is none.

Conventions: takes are simulated flutes of random build (seeds 7000 up), with a pause of the room's noise
before and after; faults are added by tests/faults.py, each mild and strong. A take counts as told if any of
its tones carries the caution. Clean takes are at 16 bit, their loudest sample 3 dB under full scale. In ±2u:
the share of tones whose true frequency, known by construction, lies within two standard uncertainties.
"""

from collections import Counter
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from tempfile import TemporaryDirectory

import faults
import numpy as np
import soundfile
from bench.tables import share_text, table
from builds import Plan, play, random_build, usual_takes
from numpy.typing import NDArray
from tones import RATE_HZ, TIMBRES, cents, make_tone

from fluteprobe.flute.fingering import Fingering
from fluteprobe.flute.register import Sounding
from fluteprobe.flute.suspicion import doubted_names
from fluteprobe.sound.recording import open_recording
from fluteprobe.sound.tone import Tone, read_tones

Floats = NDArray[np.float64]
Fault = Callable[[Floats, int, np.random.Generator], Floats]
Spoil = Callable[[Floats], Floats]

FIRST_SEED = 7000

_PAUSE_S = 0.7
_LOUDEST = 0.7
_EVERY = 3
_SWAPS = 6  # of each kind, for every flute
_GROSS_CENTS = 30.0
_DEMO = Path(__file__).resolve().parents[2] / "samples"
_KEPT = Path(__file__).resolve().parents[1] / "recordings"
_OWN_NOISE = (
    "no steady tone was found",
    "noisy",
    "short",
    "unsteady",
    "drifting",
    "uneven",
    "an edge tone",
    "two tones at once",
)


@dataclass(frozen=True, slots=True)
class Case:
    """A fault, the word that its caution begins with, and how it is made mild and strong."""

    words: str
    caution: str
    mild: tuple[str, Fault]
    strong: tuple[str, Fault]


def _hard(share: float) -> Fault:
    return lambda x, _rate, _rng: faults.hard_clipped(x, share)


def _soft(drive: float) -> Fault:
    return lambda x, _rate, _rng: faults.soft_clipped(x, drive)


def _clipped_mp3(share: float) -> Fault:
    return lambda x, rate, _rng: faults.through_mp3(faults.hard_clipped(x, share), rate, 96)


def _quieter(peak_db: float) -> Fault:
    return lambda x, _rate, _rng: x / np.abs(x).max() * 10.0 ** (peak_db / 20.0)


def _hum(mains_hz: float, level_db: float) -> Fault:
    return lambda x, rate, _rng: faults.hummed(x, rate, mains_hz, level_db)


def _noise(level_db: float) -> Fault:
    return lambda x, rate, rng: faults.noisy(x, rate, level_db, rng)


def _wind(level_db: float) -> Fault:
    return lambda x, rate, rng: faults.windy(x, rate, level_db, rng)


def _mp3(kbit_per_s: int) -> Fault:
    return lambda x, rate, _rng: faults.through_mp3(x, rate, kbit_per_s)


def _gain(most_db: float) -> Fault:
    return lambda x, rate, _rng: faults.gained(x, rate, most_db)


def _gate(reduction_db: float) -> Fault:
    return lambda x, rate, _rng: faults.gated(x, rate, reduction_db)


def _swell(swing_db: float) -> Fault:
    return lambda x, rate, rng: faults.swelling(x, rate, swing_db, rng)


def _drone(level_db: float) -> Fault:
    def added(x: Floats, rate: int, rng: np.random.Generator) -> Floats:
        drone = make_tone(float(rng.uniform(150.0, 600.0)), len(x) / rate, "bright", 60.0, rng, rate_hz=rate)
        return faults.mixed(x, drone.samples, rate, level_db)

    return added


def _second_flute(level_db: float) -> Fault:
    def added(x: Floats, rate: int, rng: np.random.Generator) -> Floats:
        seed = FIRST_SEED + 500 + int(rng.integers(8))
        build = random_build(seed)
        plan = usual_takes(build, seed)[int(rng.integers(1, 5))]
        return faults.mixed(x, _padded(play(build, plan, seed).samples, rate, rng), rate, level_db)

    return added


_SECOND = "another sound|more than one|two tones"

CASES = (
    Case("clipped hard, then turned down", "clipped", ("at 0.9", _hard(0.9)), ("at 0.5", _hard(0.5))),
    Case("clipped softly (tanh)", "clipped", ("drive 1.5", _soft(1.5)), ("drive 3", _soft(3.0))),
    Case("clipped, then MP3", "clipped", ("at 0.8", _clipped_mp3(0.8)), ("at 0.4", _clipped_mp3(0.4))),
    Case("too quiet", "very quiet", ("peak -52 dB", _quieter(-52.0)), ("-64 dB", _quieter(-64.0))),
    Case(
        "mains hum, 50 Hz", "mains hum (50 Hz)", ("-28 dB", _hum(50.0, -28.0)), ("-15 dB", _hum(50.0, -15.0))
    ),
    Case(
        "mains hum, 60 Hz", "mains hum (60 Hz)", ("-28 dB", _hum(60.0, -28.0)), ("-15 dB", _hum(60.0, -15.0))
    ),
    Case("a noisy room", "a noisy room", ("-20 dB", _noise(-20.0)), ("-6 dB", _noise(-6.0))),
    Case("wind", "wind on the microphone", ("-20 dB", _wind(-20.0)), ("0 dB", _wind(0.0))),
    Case("a drone", _SECOND, ("-30 dB", _drone(-30.0)), ("-6 dB", _drone(-6.0))),
    Case("a second flute", _SECOND, ("-25 dB", _second_flute(-25.0)), ("-3 dB", _second_flute(-3.0))),
    Case("an uneven breath", "uneven", ("4 dB rms", _swell(4.0)), ("8 dB", _swell(8.0))),
    Case("MP3, mono", "nothing above", ("64 kbit/s", _mp3(64)), ("40 kbit/s", _mp3(40))),
    Case("automatic gain", "automatic gain", ("6 dB", _gain(6.0)), ("20 dB", _gain(20.0))),
    Case("noise reduction", "noise reduction", ("12 dB", _gate(12.0)), ("to silence", _gate(120.0))),
)


def report(*, full: bool, say: Callable[[str], None]) -> None:
    """Print every table on quality and names."""
    takes = list(clean_takes(24 if full else 2))
    say(
        f"### Cautions on {len(takes)} simulated takes without a fault, the demo's and the kept ones\n\n"
        + alarms(takes)
    )
    say("### Faults told\n\n" + told(takes[:: _EVERY if full else 8]))
    say("### Clipped and drowned tones: in ±2u, rms error over u\n\n" + coverage(400 if full else 20))
    say("### Swapped and wrong names\n\n" + names(24 if full else 2))


def clean_takes(flutes: int) -> Iterator[tuple[Floats, int]]:
    """Yield the usual takes of some flutes that spoke, samples with pauses and rate."""
    for seed in range(FIRST_SEED, FIRST_SEED + flutes):
        build = random_build(seed)
        for number, plan in enumerate(usual_takes(build, seed)):
            made = play(build, plan, 100 * seed + number)
            if made.spoke:
                rng = np.random.default_rng([seed, number])
                yield _padded(made.samples, made.rate_hz, rng), made.rate_hz


def alarms(takes: Sequence[tuple[Floats, int]]) -> str:
    """Return how many takes carry each caution; the flute's own (a breathy tone, a short one) apart."""
    files = [*sorted(_DEMO.glob("*/takes/*.flac")), *sorted(_KEPT.glob("*.flac"))]
    with TemporaryDirectory() as name:
        simulated = Counter(word for x, rate in takes for word in _words(_heard(Path(name), x, rate)))
    others = Counter(word for file in files for word in _words(read_tones(open_recording(file))))
    words = sorted({*simulated, *others}, key=lambda word: (word in _OWN_NOISE, word))
    rows = [
        [word, share_text(simulated[word], len(takes)), share_text(others[word], len(files)),
         "the flute's own" if word in _OWN_NOISE else "false"]
        for word in words
    ]  # fmt: skip
    return table(["caution", f"of {len(takes)} simulated", f"of {len(files)} kept", ""], rows)


def told(takes: Sequence[tuple[Floats, int]]) -> str:
    """Return the share of takes on which each fault was told, mild and strong, and what else was told."""
    rows = []
    for case in CASES:
        row = [case.words]
        for words, fault in (case.mild, case.strong):
            found, others = _told(takes, fault, case.caution)
            extra = ", ".join(f"{word} {n}" for word, n in others.most_common(3))
            row += [words, share_text(found, len(takes)), extra or "–"]
        rows.append(row)
    return table(["fault", "mild", "told", "also", "strong", "told", "also"], rows)


def _told(takes: Sequence[tuple[Floats, int]], fault: Fault, caution: str) -> tuple[int, Counter[str]]:
    found, others = 0, Counter[str]()
    starts = tuple(caution.split("|"))
    with TemporaryDirectory() as name:
        for number, (samples, rate) in enumerate(takes):
            faulty = fault(samples, rate, np.random.default_rng([number, 9]))
            words = _words(_heard(Path(name), faulty, rate, as_it_is=True))
            found += any(word.startswith(starts) for word in words)
            others.update(w for w in words if not w.startswith(starts) and w not in _OWN_NOISE)
    return found, others


def coverage(tones: int) -> str:
    """Return coverage and error over uncertainty for made tones of every timbre, still and wandering."""
    rows = [_covered(words, spoil, snr_db, tones) for words, (spoil, snr_db) in SPOILT.items()]
    return table(["tones", "heard", "gross", "in ±2u", "rms error / u", "median u, cents"], rows)


def _as_it_is(samples: Floats) -> Floats:
    return samples


def _cut(share: float) -> Spoil:
    return lambda samples: faults.hard_clipped(samples, share)


def _squeezed(drive: float) -> Spoil:
    return lambda samples: faults.soft_clipped(samples, drive)


SPOILT: Mapping[str, tuple[Spoil, float]] = {
    "as they are, 30 dB": (_as_it_is, 30.0),
    **{f"clipped at {share}, 30 dB": (_cut(share), 30.0) for share in (0.9, 0.7, 0.5, 0.3, 0.1)},
    **{f"squeezed, drive {drive}, 30 dB": (_squeezed(drive), 30.0) for drive in (1.5, 3.0)},
    "clipped at 0.3, 10 dB": (_cut(0.3), 10.0),
    **{f"in noise, {snr:+.0f} dB": (_as_it_is, snr) for snr in (10.0, 5.0, 0.0, -3.0)},
}


def _covered(words: str, spoil: Spoil, snr_db: float, tones: int) -> list[str]:
    rng = np.random.default_rng([len(words), int(snr_db) + 50])
    ratios, sizes, gross = [], [], 0
    with TemporaryDirectory() as name:
        for _ in range(tones):
            frequency_hz = 150.0 * 2.0 ** rng.uniform(0.0, 3.5)
            made = make_tone(frequency_hz, rng.uniform(0.7, 2.5), list(TIMBRES)[rng.integers(5)], snr_db, rng)
            samples = 0.1 * spoil(made.samples.astype(np.float64))
            heard = [
                tone for tone in _heard(Path(name), samples, RATE_HZ, as_it_is=True) if tone.frequency_hz
            ]
            if not heard:
                continue
            tone = max(heard, key=lambda each: each.end_s - each.start_s)
            error, size = cents((tone.frequency_hz or 1.0) / frequency_hz), tone.uncertainty_cents or 0.0
            gross += abs(error) > _GROSS_CENTS
            if abs(error) <= _GROSS_CENTS:
                ratios.append(error / size)
                sizes.append(size)
    z = np.array(ratios)
    return [words, str(len(z) + gross), str(gross), share_text(int(np.sum(np.abs(z) < 2.0)), len(z)),
            f"{np.sqrt(np.mean(z**2)):.2f}", f"{np.median(sizes):.3f}"]  # fmt: skip


def names(flutes: int) -> str:
    """Return how often two takes whose names were swapped are told, and one that was named wrongly."""
    told = Counter[tuple[str, str]]()
    tried = Counter[str]()
    for seed in range(FIRST_SEED, FIRST_SEED + flutes):
        soundings, holes = _soundings(seed)
        tried["takes with right names"] += len({sounding.take for sounding in soundings})
        told["takes with right names", "both"] += len(doubted_names(holes, soundings))
        rng = np.random.default_rng([seed, 8])
        for kind, renamed in _misnamed(soundings, rng):
            doubted = doubted_names(
                holes, [replace(s, fingering=renamed.get(s.take, s.fingering)) for s in soundings]
            )
            tried[kind] += 1
            told[kind, "both"] += set(renamed) <= set(doubted)
            told[kind, "some"] += bool(set(renamed) & set(doubted))
            told[kind, "others"] += bool(set(doubted) - set(renamed))
    rows = [[kind, str(n), *(share_text(told[kind, what], n) for what in ("some", "both", "others"))]
            for kind, n in tried.items()]  # fmt: skip
    rows[0][2:] = [
        "–",
        share_text(told["takes with right names", "both"], tried["takes with right names"]),
        "–",
    ]
    return table(["", "tried", "one of them told", "all told", "another accused"], rows)


def _misnamed(
    soundings: Sequence[Sounding], rng: np.random.Generator
) -> Iterator[tuple[str, Mapping[str, Fingering]]]:
    """Yield swaps of two takes' fingerings and single wrong fingerings, at random."""
    named = {sounding.take: sounding.fingering for sounding in soundings}
    rungs = [take for take, fingering in named.items() if fingering.is_ladder and str(fingering) == take]
    for _ in range(_SWAPS):
        for kind, takes in (("swapped, any two takes", list(named)), ("swapped, two of the ladder", rungs)):
            one, other = (takes[int(k)] for k in rng.choice(len(takes), 2, replace=False))
            if named[one] != named[other]:
                yield kind, {one: named[other], other: named[one]}
        one, other = (list(named)[int(k)] for k in rng.choice(len(named), 2, replace=False))
        if named[one] != named[other]:
            yield "one named as another", {one: named[other]}


def _soundings(seed: int) -> tuple[list[Sounding], int]:
    """Return the clean tones of a flute's usual takes, and how many holes it has."""
    build = random_build(seed)
    soundings = []
    with TemporaryDirectory() as name:
        for number, plan in enumerate(usual_takes(build, seed)):
            made = play(build, plan, 100 * seed + number)
            tones = _heard(Path(name), made.samples.astype(np.float64), made.rate_hz)
            soundings += [
                _sounding(plan, t, t.frequency_hz) for t in tones if t.kind == "tone" and t.frequency_hz
            ]
    return soundings, len(build.tube.holes_mm)


def _sounding(plan: Plan, tone: Tone, own_hz: float) -> Sounding:
    bumps = tuple((bump.frequency_hz / own_hz, bump.prominence_db) for bump in tone.breath_resonances)
    return Sounding(
        take=plan.name,
        fingering=plan.fingering,
        breath=plan.breath,
        pitch_cents=cents(own_hz),
        bumps=bumps,
    )


def _padded(samples: NDArray[np.float32], rate_hz: int, rng: np.random.Generator) -> Floats:
    return faults.with_pauses(samples, rate_hz, _PAUSE_S, rng)


def _heard(folder: Path, samples: Floats, rate_hz: int, *, as_it_is: bool = False) -> tuple[Tone, ...]:
    path = folder / "take.wav"
    gain = 1.0 if as_it_is else _LOUDEST / float(np.abs(samples).max())
    soundfile.write(path, np.clip(gain * samples, -1.0, 1.0), rate_hz, subtype="PCM_16")
    return read_tones(open_recording(path))


def _words(tones: Sequence[Tone]) -> set[str]:
    """Return the cautions of a take by their words before the colon."""
    return {caution.split(":")[0] for tone in tones for caution in tone.cautions}
