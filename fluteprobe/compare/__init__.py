"""Several measured flutes beside one another: `compare(surveys)` gives a Comparison.

The flutes are compared by fingering where they are of one build, by sounding note otherwise. What they
meet at (temperature and A4) and how rows are made is in `table`; differences, and which of them are real, in
`pairs`; the group as a whole in `group`; flute, player and drift in `parts`; JSON and CSV in `contract`.
"""

from collections.abc import Iterator, Sequence

from fluteprobe.compare.group import group_pitch, reach_of, rows_of
from fluteprobe.compare.pairs import PAIRS_UP_TO, pairs_of
from fluteprobe.compare.parts import drifts_of, parts_of
from fluteprobe.compare.table import (
    Found,
    Table,
    flutes_of,
    found_in,
    leaning_of,
    meeting_a4_hz,
    meeting_temperature_c,
    same_build,
    table_of,
)
from fluteprobe.compare.values import Comparison, Flute, Matching
from fluteprobe.survey import Survey

__all__ = ["compare"]

_MOST_NAMED = 4


def compare(
    surveys: Sequence[Survey],
    *,
    names: Sequence[str] = (),
    by: Matching | None = None,
    a4_hz: float | None = None,
    temperature_c: float | None = None,
) -> Comparison:
    """Return surveys beside one another.

    Parameters
    ----------
    surveys
        One for each flute, or for each sitting with it.
    names
        What the surveys' files are called, to tell flutes of one name apart.
    by
        What makes a row: a fingering, or a note. None chooses: fingerings where all are of one build.
    a4_hz, temperature_c
        What they meet at; None is the A4 that most use, and the reference temperature they name.

    Raises
    ------
    ValueError
        If there are fewer than two surveys.
    """
    if len(surveys) < 2:
        raise ValueError(f"a comparison takes two flutes or more, not {len(surveys)}")
    meeting_c = meeting_temperature_c(surveys) if temperature_c is None else temperature_c
    flutes = flutes_of(surveys, names or [""] * len(surveys), meeting_c)
    meeting_c = meeting_c if any(flute.shift_cents is not None for flute in flutes) else None
    found = found_in(surveys, flutes)
    chosen = by or ("fingering" if same_build(flutes, found) else "note")
    meeting_hz = meeting_a4_hz(surveys) if a4_hz is None else a4_hz
    table = table_of(found, chosen, meeting_hz)
    notes = table if chosen == "note" else table_of(found, "note", meeting_hz)
    pairs = pairs_of(table, flutes)
    return Comparison(
        by=chosen,
        a4_hz=meeting_hz,
        temperature_c=meeting_c,
        flutes=flutes,
        rows=rows_of(table),
        pairs=pairs,
        compared=sum(len(pair.differences) for pair in pairs),
        notes=reach_of(found, table.a4_pitch, leaning_of(found, table.a4_pitch)),
        group=group_pitch(notes),
        parts=parts_of(table, flutes),
        drifts=drifts_of(table, flutes),
        cautions=tuple(_cautions(flutes, found, table, automatic=by is None)),
    )


# --- cautions ----------------------------------------------------------------------------------------


def _cautions(
    flutes: Sequence[Flute], found: Sequence[Sequence[Found]], table: Table, *, automatic: bool
) -> Iterator[str]:
    """Say what makes the comparison less sure, or other than one may expect, a sentence each."""
    airless = [flute.label for flute in flutes if flute.shift_cents is None]
    if airless:
        yield (
            f"no air temperature is given for {_named(airless)}: a degree moves a whole flute by about "
            "3 cents, so trust single notes beside one another more than flutes as wholes"
        )
    pitches = sorted({flute.sitting.a4_hz for flute in flutes})
    if len(pitches) > 1:
        told = ", ".join(f"{hz:g}" for hz in pitches)
        yield f"the flutes were measured against A4 = {told} Hz; here all are at one"
    if table.by == "note" and automatic:
        yield "the flutes are of different builds, so they are compared by sounding note"
    once = [
        flute.label
        for flute, entries in zip(flutes, found, strict=True)
        if entries and all(each.entry.tones < 2 for each in entries)
    ]
    if once:
        yield f"no take was repeated for {_named(once)}: how well the pitch repeats is not in the uncertainty"
    silent = [flute.label for flute, entries in zip(flutes, found, strict=True) if not entries]
    if silent:
        yield f"no fingering of {_named(silent)} gave a note of known register"
    if len(flutes) > PAIRS_UP_TO:
        yield f"over {PAIRS_UP_TO} flutes are not compared in pairs, but each with the middle of all"


def _named(labels: Sequence[str]) -> str:
    if len(labels) <= _MOST_NAMED:
        return ", ".join(labels)
    return f"{', '.join(labels[: _MOST_NAMED - 1])} and {len(labels) - _MOST_NAMED + 1} more"
