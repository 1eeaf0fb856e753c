"""Invented surveys for the tests of the pages: flutes, makers and numbers are made up and measure nothing."""

import copy
from dataclasses import replace
from typing import Any

from fluteprobe.flute.fingering import Breath, Fingering
from fluteprobe.flute.register import Evidence, Register, RegisterCall
from fluteprobe.flute.tuning import nearest_note
from fluteprobe.session import FluteFacts, Problem, Sitting
from fluteprobe.sound.tone import BreathResonance, Kind, Partial, Tone, Vibrato
from fluteprobe.survey import Entry, Reading, Survey

A4_HZ = 440.0
TEN_HOLES = "xxxxxxxxxx"


def entry(
    states: str,
    register: Register,
    midi: int,
    cents: float,
    *,
    uncertainty: float = 1.0,
    takes: int = 2,
    reliability: float = 1.0,
    at_reference: float | None = None,
    stretch: float | None = None,
) -> Entry:
    """Return an entry that sounds `cents` above an equal-tempered note."""
    frequency_hz = A4_HZ * 2.0 ** ((midi - 69 + cents / 100.0) / 12.0)
    note, deviation = nearest_note(frequency_hz, A4_HZ)
    return Entry(
        fingering=Fingering(states),
        register=register,
        frequency_hz=frequency_hz,
        uncertainty_cents=uncertainty,
        note=str(note),
        cents=deviation,
        cents_at_reference=at_reference,
        stretch_cents=stretch,
        takes=tuple(f"takes/{states}-{register}-{k + 1}.wav" for k in range(takes)),
        tones=takes,
        reliability=reliability,
    )


def reading(
    states: str, *, breath: Breath = "normal", kind: Kind = "breath only", frequency_hz: float | None = None
) -> Reading:
    """Return a reading that is in no entry: breath, an edge tone, or a tone of undecided register."""
    note, cents = nearest_note(frequency_hz, A4_HZ) if frequency_hz else (None, None)
    tone = Tone(
        start_s=0.3, end_s=2.1, kind=kind, frequency_hz=frequency_hz,
        uncertainty_cents=None if frequency_hz is None else 1.5, partials=(), harmonic_to_noise_db=None,
        breath_resonances=(), drift_cents=None, vibrato=None, attack_ms=None, cautions=(),
    )  # fmt: skip
    call = RegisterCall(register=None, probability={1: 0.4, 2: 0.5, 3: 0.1})
    return Reading(
        take=f"takes/{states}-{breath}.wav", fingering=Fingering(states), breath=breath, tone=tone,
        note=None if note is None else str(note), cents=cents, cents_at_reference=None, call=call,
    )  # fmt: skip


def heron() -> Survey:
    """Return a six-hole flute as one might measure it: 12 first-register and 10 second-register entries."""
    return Survey(
        flute=FluteFacts(name="Heron", holes=6, maker="Osier & Reed", serial="27", key="A minor", wood="yew"),
        sitting=Sitting(
            a4_hz=440.0,
            air_temperature_c=22.0,
            reference_temperature_c=20.0,
            date="2024-05-11",
            player="Ada",
            place="back room",
            microphone="phone, 40 cm away",
        ),
        entries=(
            entry("xxxxxx", 1, 69, -3.2, takes=3, uncertainty=0.6, at_reference=-6.6),
            entry("xxxxxh", 1, 71, -21.0, takes=1, uncertainty=4.2, at_reference=-24.4),
            entry("xxxxxo", 1, 72, 4.1, uncertainty=0.8, at_reference=0.7),
            entry("xxxxoo", 1, 74, 1.8, uncertainty=0.9, at_reference=-1.6),
            entry("xxxxox", 1, 73, 17.5, uncertainty=1.4, at_reference=14.1),
            entry("xxxooo", 1, 76, -6.4, takes=3, uncertainty=0.7, at_reference=-9.8),
            entry("xxxoxx", 1, 75, 8.8, uncertainty=1.9, takes=1, at_reference=5.4),
            entry("xxoxxx", 1, 76, 13.6, uncertainty=1.2, at_reference=10.2),
            entry("xxoooo", 1, 77, 11.2, uncertainty=0.8, at_reference=7.8),
            entry("xxoxoo", 1, 77, -18.3, uncertainty=1.1, takes=1, at_reference=-21.7),
            entry("xooooo", 1, 79, -1.1, uncertainty=0.5, takes=3, at_reference=-4.5),
            entry("oooooo", 1, 81, 6.9, uncertainty=0.9, at_reference=3.5),
            entry(
                "vxxxxx",
                2,
                81,
                -9.4,
                uncertainty=1.3,
                takes=3,
                reliability=1.0,
                at_reference=-12.8,
                stretch=-6.2,
            ),
            entry(
                "xxxxxx",
                2,
                81,
                -17.0,
                uncertainty=2.8,
                takes=2,
                reliability=0.5,
                at_reference=-20.4,
                stretch=-13.8,
            ),
            entry("oxxxxx", 2, 82, 5.2, uncertainty=1.6, takes=4, reliability=0.8, at_reference=1.8),
            entry("oxxxxo", 2, 84, 3.0, uncertainty=1.1, takes=2, at_reference=-0.4),
            entry("vxxxxo", 2, 84, 12.4, uncertainty=2.0, takes=1, at_reference=9.0, stretch=8.3),
            entry("oxxxoo", 2, 86, -14.9, uncertainty=2.2, takes=3, reliability=0.75, at_reference=-18.3),
            entry("hxxxox", 2, 85, 1.3, uncertainty=3.1, takes=2, reliability=0.67, at_reference=-2.1),
            entry("oxxoxx", 2, 87, 22.7, uncertainty=4.6, takes=1, reliability=0.33, at_reference=19.3),
            entry("oxxooo", 2, 88, -4.7, uncertainty=1.9, takes=2, at_reference=-8.1, stretch=1.7),
            entry("oxoxxx", 2, 88, -11.8, uncertainty=2.4, takes=2, reliability=0.67, at_reference=-15.2),
        ),
        readings=(
            reading("xhxxxx", breath="over"),
            reading("ooxxxx", breath="soft"),
            reading("ooxxxx", breath="over"),
            reading("oxxxxh", breath="over", kind="edge tone", frequency_hz=2210.0),
            reading("oxoxox", breath="over", kind="tone", frequency_hz=1188.0),
            reading("xxoooh", breath="normal", kind="tone", frequency_hz=733.0),
        ),
        problems=(
            Problem(take="takes/xxxxxx-over-3.wav", message="the recording is empty: record it again"),
        ),
    )


def one_take() -> Survey:
    """Return the smallest survey: one entry, and nothing known that need not be."""
    return Survey(
        flute=FluteFacts(name="Wren", holes=5), sitting=Sitting(),
        readings=(), entries=(entry("xxxxx", 1, 64, 0.2, takes=1),), problems=(),
    )  # fmt: skip


def nothing_heard() -> Survey:
    """Return a survey in which nothing spoke."""
    return Survey(
        flute=FluteFacts(name="Wren", holes=5),
        sitting=Sitting(),
        readings=(reading("xxxxx"),),
        entries=(),
        problems=(),
    )


def first_register_only() -> Survey:
    """Return a flute of which no upper note has been heard."""
    entries = tuple(entry(f"{'x' * (6 - k)}{'o' * k}", 1, 62 + 2 * k, 2.0 * k - 6.0) for k in range(7))
    return Survey(
        flute=FluteFacts(name="Coot", holes=6), sitting=Sitting(), readings=(), entries=entries, problems=()
    )


def sixty_entries() -> Survey:
    """Return a ten-hole flute with 60 entries in three registers and a long list of what did not speak."""
    words = [f"{k:010b}".replace("0", "x").replace("1", "o") for k in range(1, 61)]
    entries = tuple(
        entry(
            words[k],
            1 if k < 24 else (2 if k < 50 else 3),
            60 + (k * 2) // 3,
            (k * 37) % 91 - 45.0,
            takes=1 + k % 3,
        )
        for k in range(60)
    )
    silent = tuple(reading(f"{k:010b}".replace("0", "h").replace("1", "v"), breath="over") for k in range(40))
    return Survey(
        flute=FluteFacts(name="Bittern", holes=10, maker="Osier & Reed"), sitting=Sitting(), readings=silent,
        entries=entries, problems=(),
    )  # fmt: skip


def all_off(cents: float) -> Survey:
    """Return a flute of which every note is off by the same number of cents, with a wide uncertainty."""
    first = [entry(f"{'x' * (6 - k)}{'o' * k}", 1, 62 + 2 * k, cents, uncertainty=15.0) for k in range(7)]
    upper = entry("oxxxxx", 2, 74, cents, uncertainty=40.0)
    flute = FluteFacts(name="Coot", holes=6)
    return Survey(flute=flute, sitting=Sitting(), readings=(), entries=(*first, upper), problems=())


def strange_words() -> Survey:
    """Return a survey whose words are long, in many scripts, and hostile to a typesetter."""
    name = "Аист и цапля $x^2$ 鷺の笛 Ωκεανός \x07\x1b[31m naïve ∮ \U0001f985 " + "ж" * 40
    facts = FluteFacts(
        name=name[:80], holes=6, maker="_{$\\frac{1}{0}$}\n" * 12, wood="\u202eyew", key="$" * 90
    )
    sitting = Sitting(
        player="<&>'\"" * 30,
        place="\x00" * 5,
        microphone="μ " * 200,
        date="2024-05-11 " * 12,
        air_temperature_c=-3.5,
    )
    problem = Problem(take="takes/$\\alpha$-\ud800.wav", message="")
    return Survey(
        flute=facts, sitting=sitting, readings=heron().readings, entries=heron().entries, problems=(problem,)
    )


def low_flute() -> Survey:
    """Return a bass flute: its notes need the bass clef, and a mark where they are too low even for that."""
    entries = [entry(f"{'x' * (5 - k)}{'o' * k}", 1, 28 + 3 * k, 4.0 - k) for k in range(6)]
    upper = [entry("oxxxx", 2, 41, 8.0), entry("vxxxo", 2, 43, 10.3), entry("hxxxo", 3, 50, -10.02)]
    return Survey(
        flute=FluteFacts(name="Great Bittern", holes=5), sitting=Sitting(), readings=(),
        entries=(*entries, *upper), problems=(),
    )  # fmt: skip


def high_flute() -> Survey:
    """Return a flute whose notes are too high for a few ledger lines."""
    entries = [entry(f"{'x' * (6 - k)}{'o' * k}", 1, 81 + 2 * k, 3.0 * k - 9.0) for k in range(7)]
    upper = [entry("oxxxxx", 2, 94, 8.0), entry("oxxxxo", 2, 97, -3.0), entry("oxxxoo", 2, 107, 12.0)]
    return Survey(
        flute=FluteFacts(name="Firecrest", holes=6), sitting=Sitting(), readings=(),
        entries=(*entries, *upper), problems=(),
    )  # fmt: skip


def full_reading() -> Reading:
    """Return a reading in which everything is known."""
    plain = reading("oxxxxx", breath="over", kind="tone", frequency_hz=938.12345678)
    tone = replace(
        plain.tone,
        uncertainty_cents=0.0123456,
        partials=(
            Partial(order=1, frequency_hz=938.12345678, level_db=-0.0),
            Partial(order=2, frequency_hz=1876.2, level_db=-17.256),
        ),
        harmonic_to_noise_db=31.23456,
        breath_resonances=(
            BreathResonance(frequency_hz=470.123, width_hz=12.345, prominence_db=14.567, chance=1.23456e-7),
        ),
        drift_cents=-0.00001,
        vibrato=Vibrato(rate_hz=5.12345, extent_cents=14.5678),
        attack_ms=41.26,
        cautions=("clipped: record with less gain",),
    )
    call = RegisterCall(
        register=2,
        probability={1: 0.01, 2: 0.98, 3: 0.01},
        evidence=(Evidence(source="ladder", favours=2, log_odds=3.89182, detail="above the ladder"),),
    )
    return replace(plain, tone=tone, call=call, cents_at_reference=1.23456)


def full_survey() -> Survey:
    """Return a flute of which everything is known, one tone in every detail."""
    survey = heron()
    return replace(
        survey,
        flute=replace(
            survey.flute,
            holes_mm=((105.0, 9.0), (127.0, 9.5)),
            bore_mm=19.0,
            bore_profile_mm=((0.0, 19.0), (200.0, 18.0), (200.0, 17.5), (385.0, 16.5)),
            length_mm=385.0,
            tolerance_mm=0.5,
        ),
        readings=(full_reading(), *survey.readings),
    )


def changed(values: dict[str, Any], path: tuple[Any, ...], value: Any) -> dict[str, Any]:
    """Return a copy of JSON values with one of them replaced."""
    new = copy.deepcopy(values)
    place: Any = new
    for step in path[:-1]:
        place = place[step]
    place[path[-1]] = value
    return new
