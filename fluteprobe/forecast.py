"""The upper notes before they are played: a Survey becomes a Forecast.

Conventions: frequencies in Hz, deviations in cents from the nearest note of equal temperament at the
session's A4, as played (in the session's air); `uncertainty_cents` is standard (k = 1) and takes in how the
breath bends a tone. Registers are numbers of resonances. None is "not known".

A tube is fitted to everything heard, tones and breath resonances, and foretells every fingering that can
matter (flute/fit.py, flute/joint.py). What was measured in a higher register is foretold too, without the
tones that gave it, so that forecast and measurement can be compared. A flute that the model cannot fit gets
no forecast.
"""

from collections.abc import Collection, Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from math import exp, log2
from typing import Literal

import numpy as np

from fluteprobe.flute.fingering import Breath, Fingering, ladder
from fluteprobe.flute.fit import Fit, fitted
from fluteprobe.flute.joint import Flags, Heard, Joint, Kind
from fluteprobe.flute.plan import take_plan
from fluteprobe.flute.proportions import Known, believed_shape
from fluteprobe.flute.sensitivity import Sensitivity, TubeWords, sensitivities, tube_words
from fluteprobe.flute.speak import Try, chances
from fluteprobe.flute.tuning import nearest_note
from fluteprobe.session import FluteFacts, Sitting
from fluteprobe.sound.tone import BreathResonance
from fluteprobe.survey import Reading, Survey

Basis = Literal["breath resonance", "fitted tube", "both"]
Wanted = tuple[Fingering, int]

UPPER_REGISTERS = (2, 3)
LIKELY_ENOUGH = 0.2  # to be worth a try

_TOLERANCE_MM = 0.3
_WIDEST_CENTS = 75.0  # a forecast less sure than this names no note
_OWN_BUMP_CENTS = 70.0  # so near the tone itself, a bump in the breath is the tone's own
_PARTIAL_CENTS = 12.0
_BUMP_LEAST_CENTS, _BUMP_FAINT_CENTS = (
    3.0,
    25.0,
)  # how far off a bump is read: at best, and per dB of prominence
_FAR_CENTS, _FAR_SURPRISE = 60.0, 5.0
_MOST_MISFIT_CENTS = 45.0
_MENTIONED_SURPRISE, _MENTIONED = 3.0, 5
_NEARLY_ALL, _HARDLY_ANY = 0.8, 0.05  # of what is known of a pitch
_OFF_CENTS = 25.0  # how far off a note may be before it is a poor one
_FIRST: Mapping[Breath, Kind] = {
    "soft": "first, soft",
    "normal": "first",
    "over": "first, overblown",
}


@dataclass(frozen=True, slots=True, kw_only=True)
class Prediction:
    """One fingering in one higher register, foretold.

    `note` and `cents` are the nearest note and the deviation from it; `likely_to_speak` is the chance that it
    sounds when overblown. `measured_hz` is what the session's own takes gave, which were not used here; None
    where it was not played. `fills` is a note above the first register that nothing played so far gives and
    this would. `rank` says what to try first, from 1; None where it was played or will hardly speak.
    `tried` counts the takes in which the fingering was overblown.
    """

    fingering: Fingering
    register: int
    frequency_hz: float
    uncertainty_cents: float
    note: str
    cents: float
    basis: Basis
    likely_to_speak: float
    tried: int = 0
    measured_hz: float | None = None
    fills: str | None = None
    rank: int | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Disagreement:
    """A tone that lies far from what all others foretell: cents above that, and standard deviations."""

    take: str
    fingering: Fingering
    register: int
    deviation_cents: float
    surprise: float


@dataclass(frozen=True, slots=True, kw_only=True)
class FitWords:
    """How well a tube could be fitted, to how much, and what it says of the flute.

    `misfit_cents` is how far the tones lie from what all others foretell (root mean square).
    """

    misfit_cents: float
    tones: int
    breath_resonances: int
    tube: TubeWords


@dataclass(frozen=True, slots=True, kw_only=True)
class Forecast:
    """What a flute will play that it has not played yet.

    `predictions` come in the order of what to try, then what was measured already, then what will hardly
    speak. Where the model cannot fit the flute, `reason` says why in a line, `disagreements` names the
    tones that lie farthest off, worst first, and there are no predictions. Otherwise `disagreements` are
    tones to record anew.
    """

    flute: FluteFacts
    sitting: Sitting
    predictions: tuple[Prediction, ...]
    fit: FitWords | None
    sensitivities: tuple[Sensitivity, ...] = ()
    disagreements: tuple[Disagreement, ...] = ()
    reason: str | None = None


def forecast(survey: Survey) -> Forecast:
    """Foretell the second and third registers of a measured flute."""
    heard = heard_of(survey)
    rungs = _rungs(survey.flute.holes, heard)
    if not rungs:
        return _none(survey, "no tone whose register is known: record the ladder first, from all closed up")
    fit = fitted(believed_shape(survey.flute.holes, rungs, _known(survey)), heard)
    disagreements = _disagreements(fit)
    if fault := _fault(fit, disagreements):
        return _none(survey, fault, disagreements)
    return Forecast(
        flute=survey.flute,
        sitting=survey.sitting,
        predictions=_sorted(_with_ranks(_predictions(survey, fit), survey)),
        fit=FitWords(
            misfit_cents=fit.misfit_cents,
            tones=sum(each.is_tone for each in fit.heard),
            breath_resonances=sum(not each.is_tone for each in fit.heard),
            tube=tube_words(fit.shape),
        ),
        sensitivities=sensitivities(fit.shape, _played(survey)),
        disagreements=disagreements,
    )


def _none(survey: Survey, reason: str, disagreements: Sequence[Disagreement] = ()) -> Forecast:
    return Forecast(
        flute=survey.flute,
        sitting=survey.sitting,
        predictions=(),
        fit=None,
        disagreements=tuple(disagreements),
        reason=reason,
    )


# --- what was heard ----------------------------------------------------------------------------------


def heard_of(survey: Survey) -> list[Heard]:
    """Return the tones of known register and the breath resonances of a survey, by fingering."""
    found: list[Heard] = []
    for reading in survey.readings:
        if reading.fingering is None:
            continue
        if reading.tone.kind == "breath only":
            found += [_bump(reading, bump, "bump alone") for bump in reading.tone.breath_resonances]
        elif reading.tone.kind == "tone" and reading.call.register is not None:
            found += [_tone(reading), *_bumps(reading)]
    return found


def _tone(reading: Reading) -> Heard:
    register = reading.call.register or 0
    assert reading.fingering is not None  # noqa: S101  (the caller asked)
    upper: Kind = "second" if register == 2 else "third"
    return Heard(
        take=reading.take,
        fingering=reading.fingering,
        kind=_FIRST[reading.breath or "normal"] if register == 1 else upper,
        resonance=register,
        cents=_cents(reading.tone.frequency_hz or 1.0),
        uncertainty_cents=reading.tone.uncertainty_cents or 0.0,
        sounding=register,
    )


def _bumps(reading: Reading) -> Iterable[Heard]:
    """Yield the bumps that are neither the tone's own nor one of its partials'."""
    own = reading.tone.frequency_hz or 1.0
    for bump in reading.tone.breath_resonances:
        away, order = _cents(bump.frequency_hz / own), max(round(bump.frequency_hz / own), 1)
        beside = abs(away) > _OWN_BUMP_CENTS and abs(away - _cents(order)) > _PARTIAL_CENTS
        if beside and (away > 0.0 or reading.call.register != 1):
            yield _bump(reading, bump, "bump above" if away > 0.0 else "bump below")


def _bump(reading: Reading, bump: BreathResonance, kind: Kind) -> Heard:
    assert reading.fingering is not None  # noqa: S101  (the caller asked)
    return Heard(
        take=reading.take,
        fingering=reading.fingering,
        kind=kind,
        resonance=0,
        cents=_cents(bump.frequency_hz),
        uncertainty_cents=_BUMP_LEAST_CENTS + _BUMP_FAINT_CENTS / max(bump.prominence_db, 1.0),
        sounding=reading.call.register or 0,
    )


def _cents(ratio: float) -> float:
    return 1200.0 * log2(ratio)


def _rungs(holes: int, heard: Iterable[Heard]) -> dict[int, float]:
    """Return the ladder's first register in cents, by open holes; a guess at one rung if none was heard."""
    steps = {fingering: k for k, fingering in enumerate(ladder(holes))}
    tones = [each for each in heard if each.is_tone]
    first = {
        steps[each.fingering]: each.cents for each in tones if each.resonance == 1 and each.fingering in steps
    }
    if first or not tones:
        return first
    lowest = min(tones, key=lambda each: each.cents - _cents(each.resonance))
    return {holes - lowest.fingering.closed_from_top: lowest.cents - _cents(lowest.resonance)}


def _known(survey: Survey) -> Known:
    flute = survey.flute
    return Known(
        bore_mm=flute.bore_mm,
        wall_mm=flute.wall_mm,
        length_mm=flute.length_mm,
        holes_mm=flute.holes_mm,
        tolerance_mm=flute.tolerance_mm or _TOLERANCE_MM,
        air_c=survey.sitting.air_temperature_c,
    )


# --- whether the model fits --------------------------------------------------------------------------


def _disagreements(fit: Fit) -> tuple[Disagreement, ...]:
    """Return the tones that all others do not foretell, worst first."""
    told = [
        Disagreement(
            take=each.take,
            fingering=each.fingering,
            register=each.sounding,
            deviation_cents=float(deviation),
            surprise=float(surprise),
        )
        for each, deviation, surprise in zip(fit.heard, fit.deviation_cents, fit.surprise, strict=True)
        if each.is_tone and abs(surprise) > _MENTIONED_SURPRISE
    ]
    return tuple(sorted(told, key=lambda each: -abs(each.surprise))[:_MENTIONED])


def _fault(fit: Fit, disagreements: Sequence[Disagreement]) -> str | None:
    """Return why the flute cannot be foretold, or None."""
    far = [
        each
        for each in disagreements
        if abs(each.deviation_cents) > _FAR_CENTS and abs(each.surprise) > _FAR_SURPRISE
    ]
    if not far and fit.misfit_cents < _MOST_MISFIT_CENTS:
        return None
    return (
        f"no tube fits what was heard ({fit.misfit_cents:.0f} cents off in the mean): "
        "check the file names of the takes below, and the dimensions in flute.toml"
    )


# --- predictions -------------------------------------------------------------------------------------


def _predictions(survey: Survey, fit: Fit) -> list[Prediction]:
    """Return every fingering that can matter in both upper registers, without a rank."""
    planned = [take.fingering for take in take_plan(survey.flute.holes, "full")]
    tries = tries_of(survey.readings)
    joint = fit.joint([*planned, *(each.fingering for each in tries)])
    wanted = [
        (fingering, register)
        for fingering in joint.fingerings
        for register in UPPER_REGISTERS
        if np.isfinite(joint.pitch[joint.row[fingering], register - 1])
    ]
    measured = {(entry.fingering, int(entry.register)): entry.frequency_hz for entry in survey.entries}
    speaks = chances(joint.resonances, joint.row, wanted, tries, measured)
    told = _told(joint, wanted, measured)
    return [
        _prediction(
            each, survey.sitting.a4_hz, *words, speaks=chance, tries=tries, measured_hz=measured.get(each)
        )
        for each, words, chance in zip(wanted, told, speaks, strict=True)
        if words[1] < _WIDEST_CENTS
    ]


def _prediction(  # noqa: PLR0913  (one for each part of it)
    wanted: Wanted,
    a4_hz: float,
    pitch_cents: float,
    uncertainty_cents: float,
    basis: Basis,
    *,
    speaks: float,
    tries: Sequence[Try],
    measured_hz: float | None,
) -> Prediction:
    frequency_hz = float(2.0 ** (pitch_cents / 1200.0))
    note, cents = nearest_note(frequency_hz, a4_hz)
    return Prediction(
        fingering=wanted[0],
        register=wanted[1],
        frequency_hz=frequency_hz,
        uncertainty_cents=uncertainty_cents,
        note=str(note),
        cents=cents,
        basis=basis,
        likely_to_speak=speaks,
        tried=sum(each.fingering == wanted[0] for each in tries),
        measured_hz=measured_hz,
    )


def _told(
    joint: Joint, wanted: Sequence[Wanted], measured: Collection[Wanted]
) -> list[tuple[float, float, Basis]]:
    """Return pitch in cents, its uncertainty, what it rests on; what was measured is told without itself."""
    everything = np.ones(len(joint.heard), dtype=bool)
    pitch, spread = joint.foretold(joint.asked(wanted))
    found = []
    for i, each in enumerate(wanted):
        keep = everything
        if each in measured:
            keep = np.array([(heard.fingering, heard.sounding) != each for heard in joint.heard])
            pitch[i : i + 1], spread[i : i + 1] = joint.foretold(joint.asked([each]), keep)
        found.append((float(pitch[i]), float(spread[i]), _basis(joint, each, float(spread[i]), keep)))
    return found


def _basis(joint: Joint, wanted: Wanted, spread: float, keep: Flags) -> Basis:
    """Return what a forecast rests on: how much less sure it were without that resonance's own bumps."""
    bumps = np.array([
        not heard.is_tone and (heard.fingering, heard.resonance) == wanted for heard in joint.heard
    ])  # fmt: skip
    if not (bumps & keep).any():
        return "fitted tube"
    _, without = joint.foretold(joint.asked([wanted]), keep & ~bumps)
    share = 1.0 - (spread / float(without[0])) ** 2
    return "breath resonance" if share > _NEARLY_ALL else "both" if share > _HARDLY_ANY else "fitted tube"


def tries_of(readings: Sequence[Reading]) -> tuple[Try, ...]:
    """Return the takes in which a higher register was sought or sounded; those undecided tell nothing."""
    takes: dict[str, list[Reading]] = {}
    for reading in readings:
        if reading.fingering is not None:
            takes.setdefault(reading.take, []).append(reading)
    found = []
    for tones in takes.values():
        sounded = [each.call.register for each in tones if each.tone.kind == "tone"]
        registers = frozenset(register for register in sounded if register is not None)
        if None not in sounded and (tones[0].breath == "over" or max(registers, default=0) > 1):
            assert tones[0].fingering is not None  # noqa: S101  (asked above)
            found.append(Try(fingering=tones[0].fingering, registers=registers))
    return tuple(found)


# --- what to try next --------------------------------------------------------------------------------


def _with_ranks(predictions: Sequence[Prediction], survey: Survey) -> list[Prediction]:
    """Say which notes would be filled, and what to try first: the best fingering of each, then others."""
    gaps = [_filling(each, survey) for each in predictions]
    worth = [0.0 if each.measured_hz is not None else _worth(each) for each in predictions]
    best: dict[str, int] = {}
    for i in sorted(range(len(predictions)), key=lambda i: -worth[i]):
        note = gaps[i]
        if note is not None and predictions[i].likely_to_speak >= LIKELY_ENOUGH:
            best.setdefault(note, i)
    first = set(best.values())
    order = sorted(
        (
            i
            for i, each in enumerate(predictions)
            if each.measured_hz is None and each.likely_to_speak >= LIKELY_ENOUGH
        ),
        key=lambda i: (i not in first, gaps[i] is None, -worth[i]),
    )
    rank = {i: place for place, i in enumerate(order, start=1)}
    return [replace(each, fills=gaps[i], rank=rank.get(i)) for i, each in enumerate(predictions)]


def _filling(prediction: Prediction, survey: Survey) -> str | None:
    """Return the note that it would add above the first register, or None."""
    first = [entry.frequency_hz for entry in survey.entries if entry.register == 1]
    played = {entry.note for entry in survey.entries}
    above = not first or prediction.frequency_hz > max(first) * 2.0 ** (1.0 / 24.0)
    new = prediction.measured_hz is None and prediction.note not in played
    return prediction.note if above and new else None


def _worth(prediction: Prediction) -> float:
    """Return how well worth a try it is: how likely it speaks, and how near its note it then is."""
    spread = prediction.uncertainty_cents**2 + _OFF_CENTS**2
    return prediction.likely_to_speak * exp(-0.5 * prediction.cents**2 / spread)


def _sorted(predictions: Iterable[Prediction]) -> tuple[Prediction, ...]:
    """Put what to try first, then what was measured, then the rest, each low to high."""
    return tuple(
        sorted(
            predictions,
            key=lambda each: (
                each.rank is None,
                each.rank or 0,
                each.measured_hz is None,
                each.register,
                each.frequency_hz,
            ),
        )
    )


def _played(survey: Survey) -> list[Fingering]:
    """Return the fingerings that were played in some register, low to high."""
    return list(dict.fromkeys(entry.fingering for entry in survey.entries))
