"""Registers: right, undecided, wrong over simulated flutes of random build, alone and with the whole flute.

Conventions: the flutes' seeds start at 5000, apart from those (0 to 13) that the constants in
fluteprobe/flute were counted on. A tone counts if it truly sounds for 0.3 s or more with nine tenths of its
power on multiples of its frequency; it is found if the program reports a tone over more than half of it
within 50 cents. Flute facts hold the number of holes alone. The truth is the number of the resonance that
sounds. Simulated flutes are no recorded flutes: see samples/simulation.py.
"""

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from itertools import pairwise
from pathlib import Path
from tempfile import TemporaryDirectory

import numpy as np
import soundfile
from bench.tables import share_text, table
from builds import Plan, play, random_build, usual_takes
from numpy.typing import NDArray
from simulation import FluteBuild, Microphone, Simulated, SimulatedTone
from tones import cents

from fluteprobe.flute.evidence import REGISTERS
from fluteprobe.flute.register import RegisterCall
from fluteprobe.session import FluteFacts, create_session
from fluteprobe.survey import Reading, hear, measure

FIRST_SEED = 5000
QUIET_ROOM_PA = Microphone().room_pa

_SHORTEST_S = 0.3
_PUREST = 0.9
_NEAR_CENTS = 50.0
_LOUDEST = 0.7
_BINS = (1 / 3, 0.5, 0.7, 0.9, 0.99, 0.999, 1.0)


@dataclass(frozen=True, slots=True, kw_only=True)
class Condition:
    """How a flute is recorded: hiss relative to its own, the room, the rate, the file, what is cut out."""

    hiss: float = 1.0
    microphone: Microphone = Microphone()  # noqa: RUF009  (frozen)
    suffix: str = "flac"
    cut_s: float | None = None


CONDITIONS: Mapping[str, Condition] = {
    "as usual": Condition(),
    "breath noise 10 dB weaker": Condition(hiss=10.0**-0.5),
    "room 15 dB noisier": Condition(microphone=Microphone(room_pa=QUIET_ROOM_PA * 10.0**0.75)),
    "8 kHz": Condition(microphone=Microphone(rate_hz=8000)),
    "MP3, 64 kbit/s": Condition(suffix="mp3"),
    "half a second": Condition(cut_s=0.5),
}


@dataclass(frozen=True, slots=True, kw_only=True)
class Outcome:
    """What became of one true tone: its calls, alone and with the flute; None where it was not found."""

    flute: int
    take: str
    truth: SimulatedTone
    modes: str
    alone: RegisterCall | None
    whole: RegisterCall | None


@dataclass(frozen=True, slots=True, kw_only=True)
class Tally:
    """All true tones of some flutes under one condition, and how many tones were heard that nobody played."""

    outcomes: tuple[Outcome, ...]
    surplus: int


def report(*, full: bool, say: Callable[[str], None]) -> None:
    """Print every table on registers."""
    usual = tally(range(24 if full else 2), CONDITIONS["as usual"])
    say(f"### Right, undecided, wrong ({len(usual.outcomes)} true tones)\n\n" + by_register(usual))
    say("### Probability and how often it is right\n\n" + reliability(usual))
    say("### Worse conditions\n\n" + conditions(range(8 if full else 1)))


def tally(flutes: Sequence[int], condition: Condition) -> Tally:
    """Simulate, record and survey some flutes."""
    outcomes: list[Outcome] = []
    surplus = 0
    for flute in flutes:
        with TemporaryDirectory() as folder:
            found, more = _surveyed(FIRST_SEED + flute, condition, Path(folder) / "flute")
        outcomes += found
        surplus += more
    return Tally(outcomes=tuple(outcomes), surplus=surplus)


def by_register(told: Tally) -> str:
    """Return calls by true register, alone and with the flute, and every wrong call."""
    rows = []
    for words, pick in (("alone", _alone), ("whole flute", _whole)):
        for register in REGISTERS:
            calls = [o for o in told.outcomes if o.truth.register == register]
            rows.append([f"{words}, register {register}", *_shares(calls, pick)])
        rows.append([f"{words}, all", *_shares([o for o in told.outcomes if o.truth.register <= 3], pick)])
    titles = ["", "tones", "right", "undecided", "wrong", "not found"]
    extra = [f"Tones heard that nobody played: {told.surplus}. True registers above 3: "
             f"{sum(o.truth.register > 3 for o in told.outcomes)}."]  # fmt: skip
    return "\n".join([table(titles, rows), "", *extra, "", *_wrong_lines(told)]).rstrip()


def reliability(told: Tally) -> str:
    """Return, for ranges of the highest probability, how many tones there are and the share that is right."""
    rows = []
    for low, high in pairwise(_BINS):
        row = [f"{low:.3g} to {high:.3g}"]
        for pick in (_alone, _whole):
            inside = [
                (call, o.truth.register)
                for o in told.outcomes
                if (call := pick(o)) is not None
                and low <= max(call.probability.values()) < (high if high < 1.0 else 1.1)
            ]
            right = sum(max(call.probability, key=call.probability.__getitem__) == r for call, r in inside)
            mean = np.mean([max(call.probability.values()) for call, _ in inside]) if inside else float("nan")
            row += [
                str(len(inside)),
                f"{100.0 * mean:.1f} %" if inside else "–",
                share_text(right, len(inside)),
            ]
        rows.append(row)
    titles = [
        "highest probability",
        "alone: tones",
        "mean told",
        "right",
        "whole: tones",
        "mean told",
        "right",
    ]
    return table(titles, rows)


def conditions(flutes: Sequence[int]) -> str:
    """Return the shares under every condition, alone and with the flute."""
    rows = []
    for words, condition in CONDITIONS.items():
        told = [o for o in tally(flutes, condition).outcomes if o.truth.register <= 3]
        rows.append([words, *_shares(told, _alone), *_shares(told, _whole)[1:4]])
    titles = [
        "",
        "tones",
        "alone: right",
        "undecided",
        "wrong",
        "not found",
        "whole: right",
        "undecided",
        "wrong",
    ]
    return table(titles, rows)


# --- one flute ---------------------------------------------------------------------------------------


def _surveyed(seed: int, condition: Condition, folder: Path) -> tuple[list[Outcome], int]:
    build = random_build(seed)
    create_session(folder, FluteFacts(name=f"Flute {seed}", holes=len(build.tube.holes_mm)))
    (folder / "takes").mkdir(exist_ok=True)
    truths, modes = {}, {}
    for k, plan in enumerate(usual_takes(build, seed)):
        name = f"takes/{plan.name}.{condition.suffix}"
        blown = _played(build, plan, 100 * seed + k, condition)
        truths[name], modes[name] = _record(blown, folder / name, condition), _modes_text(blown)
    survey = measure(folder)
    outcomes: list[Outcome] = []
    surplus = 0
    for take, truth in truths.items():
        whole = [r for r in survey.readings if r.take == take and r.tone.frequency_hz is not None]
        alone = {r.tone.start_s: r.call for r in hear(folder / take)}
        pairs = [(true, _match(true, whole)) for true in truth if _counts(true)]
        outcomes += [
            Outcome(
                flute=seed,
                take=take,
                truth=true,
                modes=modes[take],
                alone=alone.get(reading.tone.start_s) if reading else None,
                whole=reading.call if reading else None,
            )
            for true, reading in pairs
        ]
        surplus += sum(not any(_overlap_s(true, reading) > 0.0 for true in truth) for reading in whole)
    return outcomes, surplus


def _played(build: FluteBuild, plan: Plan, seed: int, condition: Condition) -> Simulated:
    weaker = replace(build, hiss=build.hiss * condition.hiss)
    return play(weaker, plan, seed, condition.microphone)


def _record(take: Simulated, path: Path, condition: Condition) -> tuple[SimulatedTone, ...]:
    """Write a take as a file and return what truly sounds in it."""
    truth, samples = take.truth, take.samples
    if condition.cut_s is not None and truth:
        middle = 0.5 * (truth[-1].start_s + truth[-1].end_s)
        first = round((middle - 0.5 * condition.cut_s) * take.rate_hz)
        samples = samples[first : first + round(condition.cut_s * take.rate_hz)]
        truth = (replace(truth[-1], start_s=0.0, end_s=condition.cut_s),)
    scaled = samples * np.float32(_LOUDEST / max(float(np.abs(samples).max()), 1e-9))
    _write(path, scaled, take.rate_hz)
    return truth


def _write(path: Path, samples: NDArray[np.float32], rate_hz: int) -> None:
    if path.suffix == ".mp3":  # of a range from 320 to 32 kbit/s, this level is 64
        soundfile.write(path, samples, rate_hz, bitrate_mode="CONSTANT", compression_level=256 / 288)
    else:
        soundfile.write(path, samples, rate_hz, subtype="PCM_16")


def _modes_text(take: Simulated) -> str:
    """Return the lowest resonances of a take's air column, with their heights in dB re the highest."""
    height = 10.0 * np.log10(take.modes.strength / take.modes.strength.max())
    pairs = list(zip(take.modes.frequency_hz, height, strict=True))[:4]
    return "resonances " + ", ".join(f"{hz:.0f} ({db:.0f} dB)" for hz, db in pairs)


def _counts(true: SimulatedTone) -> bool:
    return true.end_s - true.start_s >= _SHORTEST_S and true.purity >= _PUREST


def _match(true: SimulatedTone, readings: Sequence[Reading]) -> Reading | None:
    """Return the reading that is this tone, if there is one."""
    for reading in readings:
        near = abs(cents((reading.tone.frequency_hz or 1.0) / true.frequency_hz)) < _NEAR_CENTS
        if near and _overlap_s(true, reading) > 0.5 * (true.end_s - true.start_s):
            return reading
    return None


def _overlap_s(true: SimulatedTone, reading: Reading) -> float:
    return min(true.end_s, reading.tone.end_s) - max(true.start_s, reading.tone.start_s)


# --- counting ----------------------------------------------------------------------------------------

Pick = Callable[[Outcome], RegisterCall | None]


def _alone(outcome: Outcome) -> RegisterCall | None:
    return outcome.alone


def _whole(outcome: Outcome) -> RegisterCall | None:
    return outcome.whole


def _shares(outcomes: Sequence[Outcome], pick: Pick) -> list[str]:
    calls = [(call, o.truth.register) for o in outcomes if (call := pick(o)) is not None]
    right = sum(call.register == register for call, register in calls)
    undecided = sum(call.register is None for call, _ in calls)
    wrong = len(calls) - right - undecided
    parts = [share_text(part, len(calls)) for part in (right, undecided, wrong)]
    return [str(len(calls)), *parts, str(len(outcomes) - len(calls))]


def _wrong_lines(told: Tally) -> Iterator[str]:
    """Yield a line for every wrong call and every tone not found."""
    for o in told.outcomes:
        where = f"flute {o.flute}, {o.take}, {o.truth.frequency_hz:.0f} Hz at {o.truth.start_s:.2f} s"
        if o.whole is None:
            yield f"- {where}: not found"
        for words, call in (("alone", o.alone), ("whole", o.whole)):
            if call is not None and call.register not in (None, o.truth.register):
                yield (
                    f"- {where}: register {o.truth.register} of {o.modes}, "
                    f"read as {call.register} {words}; {_odds(call)}"
                )


def _odds(call: RegisterCall) -> str:
    return "; ".join(f"{e.source}: {e.favours} ({e.log_odds:.1f}), {e.detail}" for e in call.evidence)
