"""Surveys of known tubes, made without sound: what a flute of that tube would give, bent by a breath of ours.

They are truth by construction: the tube that is fitted is the tube that made them, but bends and scatter are
drawn anew (`random`), and are not those that the model believes.
"""

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import cast

import numpy as np

from fluteprobe.flute.fingering import Breath, Fingering, ladder
from fluteprobe.flute.register import REGISTERS, Register, RegisterCall
from fluteprobe.flute.tube import Tube, openness_of, resonances
from fluteprobe.flute.tuning import nearest_note
from fluteprobe.session import FluteFacts, Sitting, Take
from fluteprobe.sound.tone import BreathResonance, Tone
from fluteprobe.survey import Reading, Survey, summed_up

SIX_HOLES = Tube(
    bore_mm=19.0,
    length_mm=400.0,
    wall_mm=4.0,
    holes_mm=((160.0, 8.0), (188.0, 8.5), (217.0, 7.5), (250.0, 8.5), (285.0, 8.0), (318.0, 9.0)),
    head_correction_mm=40.0,
    temperature_c=21.0,
)
FIRST_WORDS = ("xoxxxx", "xxoxxx", "xxxoxx", "xxxxox", "xoxxoo", "oxxxoo")
UPPER_WORDS = ("xxxxxx", "xxxxxo", "xxxxoo", "vxxxxx", "oxxxxx", "xxxoxx", "xxxxox")

_NUMBERS = 4
_BREATH: Mapping[int, Breath] = {0: "soft", 1: "normal", 2: "over", 3: "over"}
_SUFFIX = {0: "-soft", 1: "", 2: "-over", 3: "-over-2"}


@dataclass(frozen=True, slots=True, kw_only=True)
class Blown:
    """How a flute is blown: cents over the resonance by register, of a bump, and their scatter."""

    tone_cents: Mapping[int, float] = field(default_factory=lambda: {1: -6.0, 2: 2.0, 3: 8.0})
    bump_cents: float = -3.0
    scatter_cents: float = 5.0


def first_takes(holes: int = 6, more: Iterable[str] = FIRST_WORDS) -> list[tuple[str, int]]:
    """Return the ladder and cross-fingerings, in the first register."""
    return [(str(rung), 1) for rung in ladder(holes)] + [(word, 1) for word in more]


def upper_takes(words: Iterable[str] = UPPER_WORDS) -> list[tuple[str, int]]:
    """Return fingerings in the second register."""
    return [(word, 2) for word in words]


def survey_of_tube(
    tube: Tube,
    takes: Sequence[tuple[str, int]],
    *,
    blown: Blown | None = None,
    with_bumps: bool = True,
    random: int = 1,
    **facts: object,
) -> Survey:
    """Return the survey of a flute of that tube: fingerings and the register that sounds, 0 breath alone."""
    blown = blown or Blown()
    numbers = np.random.default_rng(random)
    readings = tuple(
        _reading(tube, word, register, blown=blown, with_bumps=with_bumps, numbers=numbers)
        for word, register in takes
    )
    sitting = Sitting(air_temperature_c=tube.temperature_c)
    named = [
        Take(name=each.take, path=Path(each.take), fingering=each.fingering, breath=each.breath)
        for each in readings
        if each.fingering is not None and each.breath is not None
    ]
    return Survey(
        flute=FluteFacts(name="Dipper", holes=len(tube.holes_mm), **facts),  # type: ignore[arg-type]
        sitting=sitting,
        readings=readings,
        entries=summed_up(readings, named, sitting),
        problems=(),
    )


def true_hz(tube: Tube, word: str, register: int, blown: Blown | None = None) -> float:
    """Return what a fingering would sound without scatter."""
    resonant = resonances(tube, [Fingering(word)], _NUMBERS).frequency_hz[0, register - 1]
    return float(resonant * 2.0 ** ((blown or Blown()).tone_cents[register] / 1200.0))


def renamed(survey: Survey, one: str, other: str) -> Survey:
    """Return a survey in which two fingerings' first-register takes bear each other's names."""
    swap = {one: other, other: one}

    def named(reading: Reading) -> Reading:
        word = swap.get(str(reading.fingering))
        if word is None or reading.call.register != 1:
            return reading
        return replace(reading, fingering=Fingering(word), take=f"takes/{word}.wav")

    return replace(survey, readings=tuple(named(each) for each in survey.readings))


def _reading(
    tube: Tube, word: str, register: int, *, blown: Blown, with_bumps: bool, numbers: np.random.Generator
) -> Reading:
    """Return what is heard of a fingering that sounds in a register, or of breath alone (0)."""
    resonant = resonances(tube, openness_of([Fingering(word)]), _NUMBERS).frequency_hz[0]
    sounding_hz = None
    if register:
        bend = blown.tone_cents[register] + blown.scatter_cents * numbers.standard_normal()
        sounding_hz = float(resonant[register - 1] * 2.0 ** (bend / 1200.0))
    bumps = tuple(
        BreathResonance(
            frequency_hz=float(hz * 2.0 ** ((blown.bump_cents + 4.0 * numbers.standard_normal()) / 1200.0)),
            width_hz=float(hz) / 60.0,
            prominence_db=9.0,
            chance=1e-6,
        )
        for number, hz in enumerate(resonant, start=1)
        if with_bumps and np.isfinite(hz) and (register == 0 or number > register)
    )
    note, cents = nearest_note(sounding_hz, 440.0) if sounding_hz else (None, None)
    call = RegisterCall(
        register=cast(Register, register) if register else None,
        probability={k: float(k == register) for k in REGISTERS},
    )
    return Reading(
        take=f"takes/{word}{_SUFFIX[register]}.wav", fingering=Fingering(word), breath=_BREATH[register],
        tone=_tone(sounding_hz, bumps), note=None if note is None else str(note), cents=cents,
        cents_at_reference=None, call=call,
    )  # fmt: skip


def _tone(frequency_hz: float | None, bumps: tuple[BreathResonance, ...]) -> Tone:
    return Tone(
        start_s=0.3, end_s=2.1, kind="tone" if frequency_hz else "breath only", frequency_hz=frequency_hz,
        uncertainty_cents=0.5 if frequency_hz else None, partials=(), harmonic_to_noise_db=None,
        breath_resonances=bumps, drift_cents=None, vibrato=None, attack_ms=None, cautions=(),
    )  # fmt: skip
