"""What stands on the chart, in words and in order: chosen from a survey before anything is drawn.

Conventions: registers from the highest down; within one, notes from low to high; alternatives for one note
together, best first. All text is cleaned for printing. Deviations in cents, positive is sharp; a number that
is not known is written as a question mark.
"""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from itertools import groupby
from math import isfinite

from fluteprobe.flute.register import Register
from fluteprobe.forecast.values import Prediction
from fluteprobe.pages.paper import MINUS, clean
from fluteprobe.survey import Entry, Reading, Survey

SPEAKS_WELL = 0.75  # share of takes from which a fingering counts as one to rely on

_REGISTER_NAMES: dict[Register, str] = {1: "First register", 2: "Second register", 3: "Third register"}
_SOUNDS = {"edge tone": "edge tone", "multiphonic": "several notes at once"}


@dataclass(frozen=True, slots=True, kw_only=True)
class NoteGroup:
    """One note of a register and the fingerings that give it, best first."""

    note: str
    entries: tuple[Entry, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Section:
    """One register: its title, its notes from low to high, or in words why there are none.

    Where it is `foretold` nothing of it was played: an entry's reliability is how likely it is to speak.
    """

    register: Register
    title: str
    groups: tuple[NoteGroup, ...]
    remark: str
    foretold: bool = False

    @property
    def entries(self) -> tuple[Entry, ...]:
        """All fingerings of the register in the order they are drawn."""
        return tuple(entry for group in self.groups for entry in group.entries)


@dataclass(frozen=True, slots=True, kw_only=True)
class Aside:
    """A short list beside the chart: its label and its items."""

    label: str
    items: tuple[str, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Contents:
    """The whole chart in words: title, registers, asides, and the conditions."""

    title: str
    subtitle: str
    summary: str
    maker: str | None
    holes: int
    sections: tuple[Section, ...]
    asides: tuple[Aside, ...]
    conditions: tuple[str, ...]
    reference_label: str | None


def chart_contents(
    survey: Survey,
    tolerance_cents: float = 10.0,
    *,
    best_only: bool = False,
    foretold: Sequence[Prediction] = (),
) -> Contents:
    """Return what a survey's chart says; with `best_only` one fingering for each note, and no lists.

    Of what is `foretold`, the best fingering of every note that would be new stands on it.

    Raises
    ------
    ValueError
        If the tolerance is not a positive number of cents.
    """
    if not (isfinite(tolerance_cents) and tolerance_cents > 0.0):
        raise ValueError(f"a tolerance is above 0 cents, not {tolerance_cents}")
    entries = _best_of_each_note(survey.entries, tolerance_cents) if best_only else survey.entries
    heard: list[Register] = [3] if any(entry.register == 3 for entry in entries) else []
    return Contents(
        title=clean(survey.flute.name) or "A flute without a name",
        subtitle=_subtitle(survey),
        summary=_summary(entries),
        maker=clean(survey.flute.maker or "") or None,
        holes=survey.flute.holes,
        sections=(
            *(_section(entries, r, tolerance_cents) for r in (*heard, 2, 1)),
            *_foretold(foretold),
        ),
        asides=() if best_only else _asides(survey),
        conditions=_conditions(survey, carried=not best_only),
        reference_label=_reference_label(survey),
    )


def note_text(note: str) -> str:
    """Return a note as it is printed: `C#5` becomes `C♯5`, `Bb4` becomes `B♭4`."""
    return note[:1] + note[1:].replace("#", "♯").replace("b", "♭")


def cents_text(cents: float | None, tolerance_cents: float | None = None) -> str:
    """Return a deviation in whole cents, always with its sign: `+4`, `−12`, `0`.

    Given a tolerance, a deviation gets as many decimals as it takes to stand on the same side of it in print:
    with a tolerance of 10 cents 10.3 is `+10.3` and not `+10`.
    """
    if cents is None or not isfinite(cents):
        return "?"
    digits = 0
    while tolerance_cents is not None and digits < 3 and _misleads(cents, tolerance_cents, digits):
        digits += 1
    number = f"{abs(cents):.{digits}f}"
    sign = "+" if cents > 0.0 else MINUS
    return number if float(number) == 0.0 else f"{sign}{number}"


def _misleads(cents: float, tolerance_cents: float, digits: int) -> bool:
    """Whether a rounded deviation is on the other side of a tolerance than the deviation itself."""
    return (round(abs(cents), digits) > tolerance_cents) != (abs(cents) > tolerance_cents)


def uncertainty_text(cents: float | None) -> str:
    """Return a standard uncertainty: `±0.6` under ten cents, `±14` from there."""
    if cents is None or not isfinite(cents):
        return "±?"
    return f"±{cents:.1f}" if cents < 9.95 else f"±{cents:.0f}"


def spoke_text(entry: Entry) -> str:
    """Return in how many takes a fingering spoke: `3`, or where others did not `3 of 4`.

    Of one that was only foretold it is how likely it is to speak: `92 %`.
    """
    if not entry.tones:
        return f"{100.0 * entry.reliability:.0f} %"
    spoke = len(entry.takes)
    tried = round(spoke / entry.reliability) if entry.reliability > 0.0 else spoke
    return f"{spoke} of {tried}" if entry.reliability < 1.0 else f"{spoke}"


def best_first(entries: Iterable[Entry], tolerance_cents: float) -> tuple[Entry, ...]:
    """Return fingerings of one note, best first.

    One that speaks well comes before one that does not, then one within the tolerance before one that is
    off, then the surer, then the closer.
    """

    def rank(entry: Entry) -> tuple[bool, bool, float, float, str]:
        off = abs(entry.cents) > tolerance_cents
        return (
            entry.reliability < SPEAKS_WELL,
            off,
            -entry.reliability,
            abs(entry.cents),
            str(entry.fingering),
        )

    return tuple(sorted(entries, key=rank))


def _best_of_each_note(entries: Sequence[Entry], tolerance_cents: float) -> tuple[Entry, ...]:
    """Return one fingering for each note, the best in whichever register it is."""
    notes = dict.fromkeys(entry.note for entry in entries)
    return tuple(
        best_first((entry for entry in entries if entry.note == note), tolerance_cents)[0] for note in notes
    )


def _section(entries: Sequence[Entry], register: Register, tolerance_cents: float) -> Section:
    mine = [entry for entry in entries if entry.register == register]
    mine.sort(key=lambda entry: entry.frequency_hz)  # which keeps the entries of one note together
    groups = tuple(
        NoteGroup(note=note_text(note), entries=best_first(group, tolerance_cents))
        for note, group in groupby(mine, key=lambda entry: entry.note)
    )
    name = _REGISTER_NAMES[register]
    remark = _counted(len(mine), "fingering", len(groups)) if groups else "Nothing has been heard in it yet."
    return Section(register=register, title=name, groups=groups, remark=remark)


def _foretold(predictions: Sequence[Prediction]) -> tuple[Section, ...]:
    """Return what would fill the scale as a section of its own, or none."""
    best: dict[str, Prediction] = {}
    for each in sorted((p for p in predictions if p.rank and p.fills), key=lambda p: p.rank or 0):
        best.setdefault(each.note, each)
    rising = sorted(best.values(), key=lambda p: p.frequency_hz)
    groups = tuple(NoteGroup(note=note_text(p.note), entries=(_as_entry(p),)) for p in rising)
    remark = "Not played yet: estimates, from what was. The lowest line is how likely they are to speak."
    section = Section(register=2, title="Foretold", groups=groups, remark=remark, foretold=True)
    return (section,) if groups else ()


def _as_entry(prediction: Prediction) -> Entry:
    """Return what is foretold in an entry's place: no take, no tone, and its chance to speak."""
    return Entry(
        fingering=prediction.fingering,
        register=3 if prediction.register == 3 else 2,
        frequency_hz=prediction.frequency_hz,
        uncertainty_cents=prediction.uncertainty_cents,
        note=prediction.note,
        cents=prediction.cents,
        cents_at_reference=None,
        stretch_cents=None,
        takes=(),
        tones=0,
        reliability=prediction.likely_to_speak,
    )


def _counted(fingerings: int, word: str, notes: int) -> str:
    return f"{fingerings} {word}{'' if fingerings == 1 else 's'}, {notes} note{'' if notes == 1 else 's'}"


def _subtitle(survey: Survey) -> str:
    facts = survey.flute
    made = ", ".join(
        filter(None, (clean(facts.maker or ""), f"no. {clean(facts.serial)}" if facts.serial else ""))
    )
    holes = f"{facts.holes} hole{'' if facts.holes == 1 else 's'}"
    return "  ·  ".join(filter(None, (made, clean(facts.key or ""), clean(facts.wood or ""), holes)))


def _summary(entries: Sequence[Entry]) -> str:
    if not entries:
        return ""
    ordered = sorted(entries, key=lambda entry: entry.frequency_hz)
    lowest, highest = note_text(ordered[0].note), note_text(ordered[-1].note)
    notes = len({entry.note for entry in ordered})
    return lowest if notes == 1 else f"{notes} notes from {lowest} to {highest}"


def _asides(survey: Survey) -> tuple[Aside, ...]:
    return tuple(aside for aside in (_silent(survey), _undecided(survey), _unused(survey)) if aside.items)


def _silent(survey: Survey) -> Aside:
    breath_only = [r for r in _outside(survey) if r.tone.kind == "breath only"]
    return Aside(label="did not speak", items=tuple(_with_breaths(breath_only)))


def _undecided(survey: Survey) -> Aside:
    sounding = [r for r in _outside(survey) if r.tone.kind != "breath only"]
    return Aside(label="undecided", items=tuple(dict.fromkeys(_described(r) for r in sounding)))


def _unused(survey: Survey) -> Aside:
    return Aside(
        label="not used", items=tuple(dict.fromkeys(clean(problem.take) for problem in survey.problems))
    )


def _outside(survey: Survey) -> list[Reading]:
    """Return readings that stand behind no entry: of takes in none, or sounding with no register decided."""
    used = {take for entry in survey.entries for take in entry.takes}

    def stands_outside(r: Reading) -> bool:
        return r.take not in used or (r.tone.kind != "breath only" and r.call.register is None)

    return [r for r in survey.readings if stands_outside(r)]


def _with_breaths(readings: Sequence[Reading]) -> list[str]:
    breaths: dict[str, list[str]] = {}
    for r in readings:
        known = breaths.setdefault(_word(r), [])
        if r.breath is not None and r.breath not in known:
            known.append(r.breath)
    return [f"{word} ({', '.join(known)})" if known else word for word, known in breaths.items()]


def _described(r: Reading) -> str:
    breath = f" ({r.breath})" if r.breath else ""
    pitch = f" {note_text(r.note)} {cents_text(r.cents)}" if r.note else ""
    kind = f" {_SOUNDS[r.tone.kind]}" if r.tone.kind in _SOUNDS else ""
    return f"{_word(r)}{breath}{kind}{pitch}"


def _word(r: Reading) -> str:
    return clean(r.take) if r.fingering is None else str(r.fingering)


def _conditions(survey: Survey, *, carried: bool) -> tuple[str, ...]:
    sitting = survey.sitting
    facts = (
        ("A4 =", f"{sitting.a4_hz:g} Hz"),
        ("air", _celsius(sitting.air_temperature_c)),
        ("carried to", _carried_to(survey) if carried else None),
        ("", sitting.date),
        ("played by", sitting.player),
        ("at", sitting.place),
        ("microphone", sitting.microphone),
    )
    return tuple(clean(f"{label} {value}") for label, value in facts if value and clean(value))


def _carried_to(survey: Survey) -> str | None:
    reference = _celsius(survey.sitting.reference_temperature_c)
    return None if reference is None else f"{reference}: an estimate"


def _celsius(temperature_c: float | None) -> str | None:
    return None if temperature_c is None else f"{temperature_c:g} °C".replace("-", MINUS)


def _reference_label(survey: Survey) -> str | None:
    if all(entry.cents_at_reference is None for entry in survey.entries):
        return None
    temperature = _celsius(survey.sitting.reference_temperature_c)
    return f"est. at {temperature}" if temperature else "est. at ref."
