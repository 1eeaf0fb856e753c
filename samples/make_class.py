"""Makes the measurements of a small class of flutes, and of one flute before and after work, anew.

Run it from anywhere: `python samples/make_class.py [FOLDER]`. The same files come out each time. Flutes,
names and numbers are invented: there are no recordings. Each pitch is a resonance of the tube model, plus
what the player adds to the whole flute, plus a scatter from take to take (TAKE_SCATTER_CENTS) and an error of
measuring (TONE_UNCERTAINTY_CENTS); the measurements are then summed up as any others are.
"""

import sys
from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cache
from pathlib import Path

import numpy as np
from builds import Reals, head_correction_mm, lay_out

from fluteprobe.flute.fingering import Fingering, ladder
from fluteprobe.flute.register import Register, RegisterCall
from fluteprobe.flute.tube import Tube, resonances
from fluteprobe.flute.tuning import Note, nearest_note, temperature_shift_cents
from fluteprobe.results import write_results
from fluteprobe.session import FluteFacts, Sitting, Take
from fluteprobe.sound.tone import Tone
from fluteprobe.survey import Reading, Survey, summed_up

HERE = Path(__file__).parent
TAKE_SCATTER_CENTS = 1.5
TONE_UNCERTAINTY_CENTS = 0.4
TAKES = 2
_MAKER = "Lintel & Daughter"
_REFERENCE_C = 20.0
_SCALE = (0, 3, 5, 7, 8, 10, 12)
_FIRST: Register = 1
_SECOND: Register = 2
_UPPER = ("oxxxxx", "xxxxxo", "xxxxoo", "xxxooo")


@dataclass(frozen=True, slots=True, kw_only=True)
class Pupil:
    """A flute in the class: who plays it, how it is built apart from the others, and what it is played like.

    `holes_mm` are changes of diameter, top hole first; `upper` is how many upper notes the player has.
    """

    name: str
    player: str
    serial: str
    air_c: float
    adds_cents: float
    upper: int
    longer_mm: float = 0.0
    holes_mm: tuple[float, ...] = (0.0,) * 6


CLASS = (
    Pupil(name="Teal", player="Ada", serial="12", air_c=19.0, adds_cents=-3.0, upper=4),
    Pupil(name="Dipper", player="Bela", serial="13", air_c=19.5, adds_cents=6.0, upper=3, longer_mm=-1.5),
    Pupil(name="Plover", player="Cleo", serial="14", air_c=21.0, adds_cents=0.0, upper=4,
          holes_mm=(0.0, 0.0, 1.8, 0.0, 0.0, 0.0)),
    Pupil(name="Snipe", player="Dov", serial="15", air_c=22.0, adds_cents=-8.0, upper=1),
    Pupil(name="Crake", player="Edith", serial="16", air_c=22.5, adds_cents=2.0, upper=2, longer_mm=1.0),
)  # fmt: skip


@cache
def model() -> Tube:
    """Return the six-hole flute that all of the class are copies of."""
    tube = Tube(
        bore_mm=19.0,
        length_mm=700.0,
        wall_mm=4.0,
        holes_mm=tuple((100.0 * (k + 1), size) for k, size in enumerate((8.0, 8.0, 6.5, 8.5, 8.5, 9.0))),
        head_correction_mm=head_correction_mm(19.0, 4.5, 11.0),
        temperature_c=_REFERENCE_C,
    )
    return lay_out(tube, Note(67).frequency_hz(), _SCALE, (-6.0, 2.0, -4.0, 3.0, -2.0, 5.0, 8.0))


def pupil_survey(pupil: Pupil, place: int) -> Survey:
    """Return what was measured of a flute of the class; `place` seeds its chances of building and playing."""
    random = np.random.default_rng([2026, place])
    tube = _copied(model(), random, pupil.longer_mm, pupil.holes_mm)
    facts = FluteFacts(
        name=pupil.name, holes=6, maker=_MAKER, serial=pupil.serial, key="G minor", wood="cherry"
    )
    sitting = Sitting(
        air_temperature_c=pupil.air_c,
        reference_temperature_c=_REFERENCE_C,
        date="2026-03-02",
        player=pupil.player,
        place="a classroom",
    )
    upper = [Fingering(word) for word in _UPPER[: pupil.upper]]
    return measured(tube, facts, sitting, upper, adds_cents=pupil.adds_cents, random=random)


def work_surveys() -> tuple[Survey, Survey]:
    """Return one flute before and after its maker enlarged the fourth hole by 0.7 mm, on a warmer day."""
    random = np.random.default_rng([2026, 99])
    before = _copied(model(), random, 0.0, (0.0,) * 6)
    holes = tuple((place, size + (0.7 if k == 3 else 0.0)) for k, (place, size) in enumerate(before.holes_mm))
    facts = FluteFacts(name="Avocet", holes=6, maker=_MAKER, serial="17", key="G minor", wood="pear")
    upper = [Fingering(word) for word in _UPPER]
    sittings = (
        Sitting(air_temperature_c=18.0, reference_temperature_c=_REFERENCE_C, date="2026-03-09"),
        Sitting(air_temperature_c=22.0, reference_temperature_c=_REFERENCE_C, date="2026-03-11"),
    )
    first, second = (
        measured(tube, facts, sitting, upper, adds_cents=0.0, random=random)
        for tube, sitting in zip((before, replace(before, holes_mm=holes)), sittings, strict=True)
    )
    return first, second


def measured(  # noqa: PLR0913 - who plays what, how, and with which luck
    tube: Tube,
    facts: FluteFacts,
    sitting: Sitting,
    upper: Sequence[Fingering],
    *,
    adds_cents: float,
    random: np.random.Generator,
) -> Survey:
    """Return a survey of the ladder and some upper notes, each played TAKES times."""
    air_c = sitting.air_temperature_c
    warm = replace(tube, temperature_c=_REFERENCE_C if air_c is None else air_c)
    played: list[tuple[Fingering, Register]] = [(each, _FIRST) for each in ladder(facts.holes)]
    played += [(each, _SECOND) for each in upper]
    found = resonances(warm, [fingering for fingering, _ in played], 2).frequency_hz
    takes: list[Take] = []
    readings: list[Reading] = []
    for k, (fingering, register) in enumerate(played):
        for number in range(1, TAKES + 1):
            off = (
                adds_cents
                + random.normal(0.0, TAKE_SCATTER_CENTS)
                + random.normal(0.0, TONE_UNCERTAINTY_CENTS)
            )
            frequency_hz = float(found[k, register - 1] * 2.0 ** (off / 1200.0))
            take = _take(fingering, register, number)
            takes.append(take)
            readings.append(_reading(take, frequency_hz, register, sitting))
    entries = summed_up(readings, takes, sitting)
    return Survey(flute=facts, sitting=sitting, readings=tuple(readings), entries=entries, problems=())


def make(where: Path) -> None:
    """Write the class and the flute before and after work under `where`."""
    for place, pupil in enumerate(CLASS):
        write_results(pupil_survey(pupil, place), where / "class" / pupil.name.lower())
    for name, survey in zip(("before", "after"), work_surveys(), strict=True):
        write_results(survey, where / "avocet" / name)


def main() -> None:
    """Make all."""
    where = Path(sys.argv[1]) if len(sys.argv) > 1 else HERE
    make(where)
    print(f"{len(CLASS)} flutes in {where / 'class'}, one before and after work in {where / 'avocet'}")


def _copied(tube: Tube, random: np.random.Generator, longer_mm: float, holes_mm: Sequence[float]) -> Tube:
    """Return a copy of a tube as a workshop makes it: holes 0.3 mm off in place, 0.1 mm in size (s.d.)."""
    moved: Reals = random.normal(0.0, 0.3, len(holes_mm))
    drilled: Reals = random.normal(0.0, 0.1, len(holes_mm))
    holes = tuple(
        (place + float(dx), size + float(ds) + change)
        for (place, size), dx, ds, change in zip(tube.holes_mm, moved, drilled, holes_mm, strict=True)
    )
    return replace(tube, length_mm=tube.length_mm + longer_mm, holes_mm=holes)


def _take(fingering: Fingering, register: Register, number: int) -> Take:
    over = "-over" if register > 1 else ""
    name = f"takes/{fingering}{over}{f'-{number}' if number > 1 else ''}.wav"
    breath = "over" if register > 1 else "normal"
    return Take(name=name, path=Path(name), fingering=fingering, breath=breath, number=number)  # type: ignore[arg-type]


def _reading(take: Take, frequency_hz: float, register: Register, sitting: Sitting) -> Reading:
    note, cents = nearest_note(frequency_hz, sitting.a4_hz)
    shift = temperature_shift_cents(sitting.air_temperature_c or _REFERENCE_C, _REFERENCE_C)
    tone = Tone(
        start_s=0.3, end_s=2.1, kind="tone", frequency_hz=frequency_hz,
        uncertainty_cents=TONE_UNCERTAINTY_CENTS, partials=(), harmonic_to_noise_db=None,
        breath_resonances=(), drift_cents=None, vibrato=None, attack_ms=None, cautions=(),
    )  # fmt: skip
    sure: dict[Register, float] = {1: 0.0, 2: 0.0, 3: 0.0, register: 1.0}
    return Reading(
        take=take.name,
        fingering=take.fingering,
        breath=take.breath,
        tone=tone,
        note=str(note),
        cents=cents,
        cents_at_reference=cents + shift,
        call=RegisterCall(register=register, probability=sure),
    )


if __name__ == "__main__":
    main()
