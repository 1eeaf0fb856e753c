"""A tune as plain notes: one line, as it sounds.

Conventions: times in quarter notes from the start of the tune. Pitch is a MIDI note number, 69 for A4, with
decimals where the score asks for less than a semitone. A grace note has no duration. `bar` is the bar's
number as the score writes it; `beat` counts from 1 within the bar.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace

MOST_NOTES = 100_000


class ScoreError(ValueError):
    """A tune that cannot be read; the text is one line that says what is wrong and what to do."""


@dataclass(frozen=True, slots=True, kw_only=True)
class TuneNote:
    """One note of a tune."""

    start_quarters: float
    duration_quarters: float
    pitch_semitones: float
    bar: str
    beat: float

    @property
    def end_quarters(self) -> float:
        """When the note ends."""
        return self.start_quarters + self.duration_quarters


@dataclass(frozen=True, slots=True, kw_only=True)
class Part:
    """One part, track or channel of a score: all its notes, several at once if it has them."""

    name: str
    notes: tuple[TuneNote, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Score:
    """All that was read from a file.

    `legato_share` is how much of a note the next one may overlap and still follow it: played music
    overlaps, written music does not.
    """

    title: str | None
    parts: tuple[Part, ...]
    legato_share: float = 0.0
    cautions: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class Tune:
    """One line of a score."""

    title: str | None
    part: str
    notes: tuple[TuneNote, ...]
    cautions: tuple[str, ...]


def tune_of(score: Score, part: str | None = None) -> Tune:
    """Return one part of a score as a single line; `part` is its number from 1 or its name.

    Without one the first part that has notes is taken, and told of where there are others.

    Raises
    ------
    ScoreError
        If there is no such part, or no part has a note.
    """
    parts = [each for each in score.parts if each.notes]
    if not parts:
        raise ScoreError("it holds no pitched notes: give a score or a MIDI file with a melody")
    chosen = parts[0] if part is None else _named(parts, part)
    cautions = list(score.cautions)
    if part is None and len(parts) > 1:
        cautions.append(f"it has {len(parts)} parts, the first is taken; the others: {_names(parts[1:], 2)}")
    notes, left_out = top_line(chosen.notes, score.legato_share)
    if left_out:
        cautions.append(
            f"several notes sound at once: the top line is taken, {left_out} of {len(chosen.notes)} left out"
        )
    return Tune(title=score.title, part=chosen.name, notes=notes, cautions=tuple(cautions))


def top_line(notes: Sequence[TuneNote], legato_share: float = 0.0) -> tuple[tuple[TuneNote, ...], int]:
    """Return the highest of the notes that sound at any time, and how many were left out.

    A higher note cuts off a lower one. A lower note under a higher one is left out, unless it overlaps the
    end of the one before by no more than a share of the shorter of the two.
    """
    line: list[TuneNote] = []
    held = -1  # where in the line the note stands that sounds on
    left_out = 0
    for note in sorted(notes, key=lambda note: (note.start_quarters, -note.pitch_semitones)):
        before = line[held] if held >= 0 else None
        if before is None or note.duration_quarters == 0.0 or _follows(before, note, legato_share):
            pass
        elif note.start_quarters == before.start_quarters or note.pitch_semitones <= before.pitch_semitones:
            left_out += 1
            continue
        if note.duration_quarters > 0.0:
            if before is not None and before.end_quarters > note.start_quarters:
                line[held] = replace(before, duration_quarters=note.start_quarters - before.start_quarters)
            held = len(line)
        line.append(note)
    return tuple(line), left_out


def _follows(before: TuneNote, note: TuneNote, legato_share: float) -> bool:
    """Whether a note begins when the one before is over, or nearly."""
    shorter = min(before.duration_quarters, note.duration_quarters)
    overlap = before.end_quarters - note.start_quarters
    return overlap <= max(legato_share * shorter, 1e-6) and note.start_quarters > before.start_quarters


def _named(parts: Sequence[Part], wanted: str) -> Part:
    """Return a part by its number from 1 or by its name, upper and lower case alike."""
    if wanted.isascii() and wanted.isdigit() and 1 <= int(wanted[:9]) <= len(parts):
        return parts[int(wanted[:9]) - 1]
    for part in parts:
        if part.name.casefold() == wanted.casefold():
            return part
    raise ScoreError(f"it has no part {wanted!r}, expected one of {_names(parts, 1)}")


def _names(parts: Sequence[Part], first: int) -> str:
    shown = [f"{k} {part.name}".strip() for k, part in enumerate(parts[:8], start=first)]
    return ", ".join([*shown, "…"] if len(parts) > 8 else shown)
