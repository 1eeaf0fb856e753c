"""What a survey tells of the air column: tones, breath resonances, and what did and did not speak.

Conventions: pitches in cents above 1 Hz. A breath resonance at the tone itself or at one of its partials is
theirs, and is not told.
"""

from collections.abc import Iterable, Mapping, Sequence
from math import log2

from fluteprobe.flute.fingering import Breath, Fingering, ladder
from fluteprobe.flute.joint import Heard, Kind
from fluteprobe.flute.proportions import Known
from fluteprobe.flute.speak import Try
from fluteprobe.sound.tone import BreathResonance
from fluteprobe.survey import Reading, Survey

_TOLERANCE_MM = 0.3
_OWN_BUMP_CENTS = 70.0  # so near the tone itself, a bump in the breath is the tone's own
_PARTIAL_CENTS = 12.0
_BUMP_LEAST_CENTS, _BUMP_FAINT_CENTS = (
    3.0,
    25.0,
)  # how far off a bump is read: at best, and per dB of prominence
_FIRST: Mapping[Breath, Kind] = {"soft": "first, soft", "normal": "first", "over": "first, overblown"}


def heard_of(survey: Survey) -> list[Heard]:
    """Return the tones of known register and the breath resonances of a survey, by fingering."""
    found: list[Heard] = []
    broke = {reading.take for reading in survey.readings if (reading.call.register or 0) > 1}
    for reading in survey.readings:
        if reading.fingering is None:
            continue
        if reading.tone.kind == "breath only":
            found += [_bump(reading, bump, "bump alone") for bump in reading.tone.breath_resonances]
        elif reading.tone.kind == "tone" and reading.call.register is not None:
            found += [_tone(reading, reading.take in broke), *_bumps(reading)]
    return found


def _tone(reading: Reading, broke: bool) -> Heard:
    register = reading.call.register or 0
    assert reading.fingering is not None  # noqa: S101  (the caller asked)
    return Heard(
        take=reading.take,
        fingering=reading.fingering,
        kind=_tone_kind(register, reading.breath or "normal", broke),
        resonance=register,
        cents=_cents(reading.tone.frequency_hz or 1.0),
        uncertainty_cents=reading.tone.uncertainty_cents or 0.0,
        sounding=register,
    )


def _tone_kind(register: int, breath: Breath, broke: bool) -> Kind:
    """Return how a tone was blown; `broke` tells that its take went on to a higher register."""
    if register > 1:
        return "second" if register == 2 else "third"
    return "first, before" if broke and breath == "over" else _FIRST[breath]


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


def known_rungs(holes: int, heard: Iterable[Heard]) -> dict[int, float]:
    """Return the ladder's first register in cents, by open holes; a guess at one rung if none was heard.

    The guess is from a higher register, if possible of the ladder, taken as harmonic. A leak at the top hole
    leaves the second register where it is with that hole closed (common practice, no source).
    """
    steps = {fingering: k for k, fingering in enumerate(ladder(holes))}
    tones = [each for each in heard if each.is_tone]
    on_ladder = [each for each in tones if each.fingering in steps]
    first = {steps[each.fingering]: each.cents for each in on_ladder if each.resonance == 1}
    if first or not tones:
        return first
    lowest = min(on_ladder or tones, key=lambda each: each.cents - _cents(each.resonance))
    states = str(lowest.fingering)
    below = states if lowest.resonance == 1 else f"x{states[1:]}"
    return {holes - Fingering(below).closed_from_top: lowest.cents - _cents(lowest.resonance)}


def known_dimensions(survey: Survey) -> Known:
    """Return what flute.toml tells of the flute's dimensions and the air."""
    flute = survey.flute
    return Known(
        bore_mm=flute.bore_mm,
        wall_mm=flute.wall_mm,
        length_mm=flute.length_mm,
        profile_mm=flute.bore_profile_mm or (),
        holes_mm=flute.holes_mm,
        tolerance_mm=flute.tolerance_mm or _TOLERANCE_MM,
        air_c=survey.sitting.air_temperature_c,
    )


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
