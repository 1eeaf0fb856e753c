"""Surveys side by side: which temperature and A4 they meet at, what is compared with what, and the table.

Conventions: pitches in cents above 1 Hz; tables have shape (rows, flutes), NaN where a flute has nothing.
"""

from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from math import atan2, cos, hypot, log2, nan, pi, sin

import numpy as np

from fluteprobe.compare.statistics import Reals
from fluteprobe.compare.values import Flute, Matching
from fluteprobe.flute.tuning import A4_MIDI, Note, temperature_shift_cents
from fluteprobe.session import printable
from fluteprobe.survey import Entry, Survey

REFERENCE_C = 20.0  # ISO 1:2022's reference temperature, where the surveys name none
ALIKE_CENTS = 60.0  # a fingering of the same build is within this; a semitone is 100
ALIKE_SHARE = 0.75  # of the shared fingerings, for flutes to count as one build
FEWEST_ALIKE = 3  # shared fingerings, or all that the smaller survey has
SPEAKS_WELL = 0.75  # share of takes from which a fingering counts as one to rely on
_TOGETHER = 0.7

Key = tuple[str, int]  # a fingering and its register, or a note and 0


@dataclass(frozen=True, slots=True, kw_only=True)
class Found:
    """One entry of one flute, with its pitch carried to the comparison's temperature."""

    entry: Entry
    pitch: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Table:
    """Everything that is compared: each row's key and MIDI note, pitches and uncertainties (rows, flutes)."""

    by: Matching
    keys: tuple[Key, ...]
    midi: tuple[int, ...]
    found: tuple[tuple[Found | None, ...], ...]
    pitch: Reals
    uncertainty: Reals
    a4_pitch: float

    @property
    def cents(self) -> Reals:
        """Deviations from the rows' notes in equal temperament, shape (rows, flutes)."""
        return np.asarray(self.pitch - self.note_pitch[:, None])

    @property
    def note_pitch(self) -> Reals:
        """The rows' notes in cents above 1 Hz, shape (rows,)."""
        return self.a4_pitch + 100.0 * (np.array(self.midi, dtype=np.float64) - A4_MIDI)


def meeting_temperature_c(surveys: Sequence[Survey]) -> float | None:
    """Return the temperature that pitches are carried to; None where no air's temperature is known.

    It is the reference that the surveys name, if they agree; else the air's own where it was the same for
    all; else 20 °C.
    """
    air = {s.sitting.air_temperature_c for s in surveys} - {None}
    if not air:
        return None
    named = {s.sitting.reference_temperature_c for s in surveys} - {None}
    for known in (named, air):
        if len(known) == 1:
            return next(iter(known))
    return REFERENCE_C


def meeting_a4_hz(surveys: Sequence[Survey]) -> float:
    """Return the A4 that most of the surveys use, of equals the first."""
    return Counter(survey.sitting.a4_hz for survey in surveys).most_common(1)[0][0]


def flutes_of(
    surveys: Sequence[Survey], names: Sequence[str], temperature_c: float | None
) -> tuple[Flute, ...]:
    """Return a column for every survey; `names`, of their folders, tell equal labels apart."""
    kin: dict[tuple[str, ...], int] = {}
    labels = _labels(surveys, names)
    return tuple(
        Flute(
            label=label,
            facts=survey.flute,
            sitting=survey.sitting,
            shift_cents=_shift_cents(survey, temperature_c),
            kin=kin.setdefault(_identity(survey), len(kin)),
        )
        for survey, label in zip(surveys, labels, strict=True)
    )


def found_in(surveys: Sequence[Survey], flutes: Sequence[Flute]) -> list[list[Found]]:
    """Return every survey's entries, carried."""
    return [
        [
            Found(entry=entry, pitch=1200.0 * log2(entry.frequency_hz) + (flute.shift_cents or 0.0))
            for entry in survey.entries
        ]
        for survey, flute in zip(surveys, flutes, strict=True)
    ]


def same_build(flutes: Sequence[Flute], found: Sequence[Sequence[Found]]) -> bool:
    """Whether the flutes are of one build: as many holes, and the same fingerings near the same pitch."""
    if len({flute.facts.holes for flute in flutes}) > 1:
        return False
    table = _by_fingering(found, 0.0)
    shared = np.isfinite(table.pitch).sum(axis=1) >= 2
    return all(_fits_the_others(table.pitch[shared], k, len(found[k])) for k in range(len(flutes)))


def table_of(found: Sequence[Sequence[Found]], by: Matching, a4_hz: float) -> Table:
    """Return the table by fingering or by note, rows from low to high."""
    a4_pitch = 1200.0 * log2(a4_hz)
    if by == "fingering":
        return _by_fingering(found, a4_pitch)
    return _by_note(found, a4_pitch, leaning_of(found, a4_pitch))


def leaning_of(found: Sequence[Sequence[Found]], a4_pitch: float) -> float:
    """Return by how much all that was found leans away from the semitones round A4: see `leaning_cents`."""
    return leaning_cents(np.array([each.pitch - a4_pitch for flute in found for each in flute]))


def leaning_cents(pitches: Reals) -> float:
    """Return by how much pitches lie off the semitones of a scale on average, in [-50, 50].

    They lie on a circle of a semitone, and this is their mean direction (Mardia & Jupp, Directional
    Statistics, 2000, ch. 2), so that a group that is 45 cents flat is not split between two notes. Pitches
    that lie all round the circle (a mean resultant length under 0.7: more than 13 cents of scatter) lean
    nowhere: 0.
    """
    angles = 2.0 * pi * pitches / 100.0
    east, north = sum(cos(a) for a in angles), sum(sin(a) for a in angles)
    if hypot(east, north) < _TOGETHER * len(angles):
        return 0.0
    return 100.0 * atan2(north, east) / (2.0 * pi)


# --- columns -----------------------------------------------------------------------------------------


def _shift_cents(survey: Survey, temperature_c: float | None) -> float | None:
    air_c = survey.sitting.air_temperature_c
    if air_c is None or temperature_c is None:
        return None
    return temperature_shift_cents(air_c, temperature_c)


def _identity(survey: Survey) -> tuple[str, ...]:
    """Return what tells instruments apart: name, maker and serial, in any case, and the holes."""
    facts = survey.flute
    words = (facts.name, facts.maker or "", facts.serial or "", str(facts.holes))
    return tuple(" ".join(word.casefold().split()) for word in words)


def _labels(surveys: Sequence[Survey], names: Sequence[str]) -> list[str]:
    """Return a label for each survey: its flute's name, with what tells it from others of that name."""
    labels = [printable(survey.flute.name).strip() or "flute" for survey in surveys]
    further = (
        [f"no. {s.flute.serial}" if s.flute.serial else "" for s in surveys],
        [s.sitting.player or "" for s in surveys],
        [s.sitting.date or "" for s in surveys],
        list(names),
        [str(k + 1) for k in range(len(surveys))],
    )
    for words in further:
        labels = _told_apart(labels, words)
    return labels


def _told_apart(labels: Sequence[str], words: Sequence[str]) -> list[str]:
    """Add a word to labels that are equal, where it tells any of them apart."""
    words = [printable(word).strip() for word in words]
    told = list(labels)
    for label, count in Counter(labels).items():
        mine = [k for k, other in enumerate(labels) if other == label]
        if count > 1 and len({words[k] for k in mine}) > 1:
            for k in mine:
                told[k] = f"{label}, {words[k]}" if words[k] else label
    return told


# --- rows --------------------------------------------------------------------------------------------


def _fits_the_others(pitch: Reals, flute: int, entries: int) -> bool:
    """Whether a flute's shared fingerings, pitch (rows, flutes), sound near the middle of the others'."""
    mine = pitch[np.isfinite(pitch[:, flute])]
    if not len(mine) or len(mine) < min(FEWEST_ALIKE, entries):
        return entries == 0  # one that gave nothing says nothing against it
    others = np.nanmedian(np.delete(mine, flute, axis=1), axis=1)
    near = np.abs(mine[:, flute] - others) <= ALIKE_CENTS
    return bool(near.mean() >= ALIKE_SHARE)


def _by_fingering(found: Sequence[Sequence[Found]], a4_pitch: float) -> Table:
    columns: list[dict[Key, Found]] = [
        {(str(f.entry.fingering), f.entry.register): f for f in flute} for flute in found
    ]
    return _table("fingering", columns, a4_pitch, leaning=0.0)


def _by_note(found: Sequence[Sequence[Found]], a4_pitch: float, leaning: float) -> Table:
    """Put notes side by side: of several fingerings for one note, the best of that flute."""
    columns: list[dict[Key, Found]] = []
    for flute in found:
        column: dict[Key, Found] = {}
        for each in sorted(flute, key=lambda f: _rank(f, a4_pitch, leaning), reverse=True):
            column[str(Note(midi_of(each.pitch - a4_pitch, leaning))), 0] = each
        columns.append(column)
    return _table("note", columns, a4_pitch, leaning)


def _rank(found: Found, a4_pitch: float, leaning: float) -> tuple[bool, float, str]:
    """Return a key by which a note's best fingering sorts first: it speaks well, then is closest."""
    above = found.pitch - a4_pitch - leaning
    off = abs(above - 100.0 * round(above / 100.0))
    return found.entry.reliability < SPEAKS_WELL, off, str(found.entry.fingering)


def midi_of(cents_above_a4: float, leaning: float) -> int:
    """Return the note that a pitch counts as, among notes that all lean by so many cents."""
    return A4_MIDI + round((cents_above_a4 - leaning) / 100.0)


def _table(by: Matching, columns: Sequence[Mapping[Key, Found]], a4_pitch: float, leaning: float) -> Table:
    keys = list(dict.fromkeys(key for column in columns for key in column))
    found = {key: tuple(column.get(key) for column in columns) for key in keys}
    middle = {key: float(np.median([f.pitch for f in row if f])) for key, row in found.items()}
    keys.sort(key=lambda key: (middle[key], key))
    return Table(
        by=by,
        keys=tuple(keys),
        midi=tuple(midi_of(middle[key] - a4_pitch, leaning) for key in keys),
        found=tuple(found[key] for key in keys),
        pitch=_matrix([[f.pitch if f else nan for f in found[key]] for key in keys], len(columns)),
        uncertainty=_matrix(
            [[f.entry.uncertainty_cents if f else nan for f in found[key]] for key in keys], len(columns)
        ),
        a4_pitch=a4_pitch,
    )


def _matrix(rows: Sequence[Sequence[float]], columns: int) -> Reals:
    return np.array(rows, dtype=np.float64).reshape(len(rows), columns)
