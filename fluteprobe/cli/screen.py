"""What people see in a terminal: tables as plain aligned text, at most 80 columns, and lines about takes.

Conventions: deviations in cents with a sign, ± the standard uncertainty; `?` is an undecided register, `–`
no note. Results go to stdout, everything else to stderr. A terminal that cannot show ♯ or ± gets # or
+/-.
"""

import sys
import textwrap
import time
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from contextlib import contextmanager
from itertools import groupby
from pathlib import Path
from typing import Any

import click

from fluteprobe.cli.columns import aligned
from fluteprobe.session import FluteFacts, Problem, Sitting, printable
from fluteprobe.survey import Entry, Reading, Survey

WIDTH = 80
SHOW_PROGRESS_AFTER_S = 1.0
SHARED = 4  # takes with one caution, from which on it is said once for all of them

_SURROUNDINGS = (
    "nothing above", "mains hum", "a noisy room", "automatic gain", "noise reduction", "wrong sampling rate",
)  # fmt: skip

_PLAIN = str.maketrans({"♯": "#", "±": "+/-", "−": "-", "–": "-", "…": "...", "·": "|", "°": " ", "’": "'"})

_SILENT = {"breath only": "Did not speak", "edge tone": "Edge tone", "multiphonic": "Two tones at once"}

_SURVEY_COLUMNS = ("fingering", "register", "note", "cents", "reference", "stretch", "takes", "caution")
_NUMBERS = {"register", "cents", "reference", "stretch", "takes", "Hz"}

Row = Mapping[str, str]


# --- saying ------------------------------------------------------------------------------------------


def say(text: str, *, err: bool = False) -> None:
    """Print text, with plain signs where the terminal has no others."""
    stream = sys.stderr if err else sys.stdout
    try:
        text.encode(stream.encoding or "ascii")
    except UnicodeEncodeError:
        text = text.translate(_PLAIN)
    click.echo(text, err=err)


def tell_problems(problems: Iterable[Problem]) -> None:
    """Name on stderr what could not be used, a line each, with the cure."""
    for problem in problems:
        say(f"Not used: {printable(problem.take)}: {printable(problem.message)}", err=True)


def tell_cautions(readings: Iterable[Reading]) -> None:
    """Say on stderr which numbers are less sure and why, a line each.

    What many takes share, of the room and the recorder, is said once for all of them, as of the first.
    """
    readings = list(readings)
    shared = _shared(readings)
    said: set[str] = set()
    for reading in readings:
        for text in _cautions(reading):
            kind = _surroundings(text)
            if kind in said:
                continue
            place = f"{printable(reading.take)}, {_span(reading)}"
            if kind in shared:
                said.add(kind)
                place = f"{shared[kind]} takes"
            say(f"Caution: {place}: {printable(text)}", err=True)


def _shared(readings: Iterable[Reading]) -> dict[str, int]:
    """Return the cautions of room and recorder that many takes share, and how many takes those are."""
    takes: dict[str, set[str]] = {kind: set() for kind in _SURROUNDINGS}
    for reading in readings:
        for text in reading.tone.cautions:
            takes.get(_surroundings(text), set()).add(reading.take)
    return {kind: len(names) for kind, names in takes.items() if len(names) >= SHARED}


def _surroundings(text: str) -> str:
    """Return which caution of the room or the recorder a text is, or the text itself."""
    return next((kind for kind in _SURROUNDINGS if text.startswith(kind)), text)


def _cautions(reading: Reading) -> Iterator[str]:
    """Yield what a tone's cautions say, and whether its register is undecided for no other reason."""
    yield from reading.tone.cautions
    if _is_undecided(reading) and reading.fingering is not None and reading.call.caution is None:
        chances = ", ".join(f"{k} {100 * p:.0f} %" for k, p in sorted(reading.call.probability.items()))
        yield f"register undecided ({chances})"


def tell_written(paths: Iterable[Path], *, as_result: bool = False) -> None:
    """Name the files that were written, a line each: on stderr, or on stdout where they are the result."""
    for path in paths:
        say(printable(str(path)) if as_result else f"Wrote {printable(str(path))}", err=not as_result)


@contextmanager
def progress(label: str) -> Iterator[Callable[[int, int], None]]:
    """Give a function to call with (done, total); a bar appears on stderr once a second has gone by."""
    start = time.monotonic()
    bars: list[Any] = []

    def on_take(done: int, total: int) -> None:
        if not bars and (time.monotonic() - start < SHOW_PROGRESS_AFTER_S or not sys.stderr.isatty()):
            return
        if not bars:
            bars.append(click.progressbar(length=total, label=label, file=sys.stderr))
        bars[0].update(done - bars[0].pos)

    try:
        yield on_take
    finally:
        for bar in bars:
            bar.render_finish()


# --- tables ------------------------------------------------------------------------------------------


def survey_table(survey: Survey) -> str:
    """Return what every fingering gives, in the order of pitch, and what did not speak."""
    heading, silent = _heading(survey.flute, survey.sitting), _silent_lines(survey.readings)
    rows = _survey_rows(survey)
    if not rows:
        return "\n".join([heading, "", "No fingering gave a steady tone.", *silent])
    titles = {key: key for key in _SURVEY_COLUMNS}
    notes = ["", "cents: off the note as played, ± standard uncertainty; above 0 is sharp"]
    if any("reference" in row for row in rows):
        titles["reference"] = _reference_title(survey.sitting)
        notes.append(f"{titles['reference']}: the same carried to that temperature, an estimate")
    else:
        del titles["reference"]
    return "\n".join([heading, "", *_aligned(titles, rows), *notes, *silent])


def heard_table(readings: Sequence[Reading], a4_hz: float) -> str:
    """Return every tone under the name of its recording, in the order of time."""
    if not readings:
        return "Nothing was heard."
    titles = {key: key for key in ("steady", "register", "note", "cents", "Hz", "remarks")}
    header, *below = _aligned(titles, [_heard_row(reading) for reading in readings])
    lines, rows = [f"  {header}"], iter(below)
    for take, tones in groupby(readings, key=lambda reading: reading.take):
        lines.append(printable(take))
        lines += [f"  {next(rows)}" for _ in tones]
    return "\n".join([*lines, "", f"cents: off the note at A4 = {a4_hz:g} Hz, ± standard uncertainty"])


def _heading(flute: FluteFacts, sitting: Sitting) -> str:
    parts = [f"{flute.holes} hole{'s' if flute.holes > 1 else ''}", f"A4 = {sitting.a4_hz:g} Hz"]
    if sitting.air_temperature_c is not None:
        parts.append(f"air {sitting.air_temperature_c:g} °C")
    tail, name = " · ".join(["", *parts]), printable(flute.name)
    room = WIDTH - len(tail)
    return (name if len(name) <= room else f"{name[: room - 1]}…") + tail


def _reference_title(sitting: Sitting) -> str:
    reference_c = sitting.reference_temperature_c
    return "at reference" if reference_c is None else f"at {reference_c:g} °C"


def _survey_rows(survey: Survey) -> list[Row]:
    """Return a row for every entry and for every tone of undecided register, low to high."""
    rows = [(entry.frequency_hz, _entry_row(entry, survey.readings)) for entry in survey.entries]
    rows += [
        (reading.tone.frequency_hz or 0.0, _undecided_row(reading))
        for reading in survey.readings
        if _is_undecided(reading)
    ]
    return [row for _, row in sorted(rows, key=lambda item: item[0])]


def _entry_row(entry: Entry, readings: Iterable[Reading]) -> Row:
    gave = len(entry.takes)
    tried = round(gave / entry.reliability) if entry.reliability > 0.0 else gave
    row = {
        "fingering": str(entry.fingering),
        "register": str(entry.register),
        "note": _note(entry.note),
        "cents": _off(entry.cents, entry.uncertainty_cents),
        "takes": str(gave) if tried <= gave else f"{gave} of {tried}",
        "caution": _entry_cautions(entry, readings),
    }
    if entry.cents_at_reference is not None:
        row["reference"] = _signed(entry.cents_at_reference)
    if entry.stretch_cents is not None:
        row["stretch"] = _signed(entry.stretch_cents)
    return row


def _undecided_row(reading: Reading) -> Row:
    row = {
        "fingering": str(reading.fingering),
        "register": "?",
        "note": _note(reading.note),
        "cents": _off(reading.cents, reading.tone.uncertainty_cents),
        "takes": "1",
        "caution": _brief(reading.tone.cautions),
    }
    if reading.cents_at_reference is not None:
        row["reference"] = _signed(reading.cents_at_reference)
    return row


def _heard_row(reading: Reading) -> Row:
    tone = reading.tone
    if tone.frequency_hz is None:
        return {"steady": _span(reading), "remarks": tone.kind}
    remarks: list[str] = [] if tone.kind == "tone" else [tone.kind]
    if tone.vibrato is not None:
        remarks.append(f"vibrato {tone.vibrato.rate_hz:.1f} Hz")
    remarks += [text for text in [_brief(tone.cautions)] if text]
    return {
        "steady": _span(reading),
        "register": "?" if reading.call.register is None else str(reading.call.register),
        "note": _note(reading.note),
        "cents": _off(reading.cents, tone.uncertainty_cents),
        "Hz": f"{tone.frequency_hz:.2f}",
        "remarks": ", ".join(remarks),
    }


def _entry_cautions(entry: Entry, readings: Iterable[Reading]) -> str:
    """Return in brief what is said against the tones that an entry sums up."""
    mine = [r for r in readings if r.fingering == entry.fingering and r.call.register == entry.register]
    shared = _shared(readings)
    cautions = [caution for reading in mine for caution in reading.tone.cautions]
    return _brief(caution for caution in cautions if _surroundings(caution) not in shared)


def _brief(cautions: Iterable[str]) -> str:
    """Return the first word of each caution, which is told in full on stderr."""
    return ", ".join(dict.fromkeys(printable(caution.split(":")[0].split(" (")[0]) for caution in cautions))


def _silent_lines(readings: Iterable[Reading]) -> list[str]:
    """Return which fingerings were tried and gave no tone of the air column, and how they were blown."""
    lines = []
    for kind, words in {
        "breath only": "Did not speak",
        "edge tone": "Edge tone",
        "multiphonic": "Two tones",
    }.items():
        tried = [f"{r.fingering} ({r.breath})" for r in readings if r.tone.kind == kind]
        if tried:
            text = f"{words}: {', '.join(dict.fromkeys(tried))}"
            lines += ["", *textwrap.wrap(text, WIDTH, subsequent_indent="  ", break_on_hyphens=False)]
    return lines


def _is_undecided(reading: Reading) -> bool:
    return reading.tone.kind == "tone" and reading.call.register is None


def _aligned(titles: Mapping[str, str], rows: Sequence[Row]) -> list[str]:
    """Return the titles and rows as lines, numbers to the right."""
    table = [[row.get(key, "") for key in titles] for row in (titles, *rows)]
    return aligned(table, {k for k, key in enumerate(titles) if key in _NUMBERS})


def _span(reading: Reading) -> str:
    return f"{reading.tone.start_s:.2f}–{reading.tone.end_s:.2f} s"


def _note(note: str | None) -> str:
    return "–" if note is None else note.replace("#", "♯")


def _off(cents: float | None, uncertainty_cents: float | None) -> str:
    """Return a deviation with its uncertainty, which is never told as less than 0.1."""
    if cents is None:
        return "–"
    uncertainty = "" if uncertainty_cents is None else f"± {max(uncertainty_cents, 0.1):4.1f}"
    return f"{_signed(cents)} {uncertainty:6}"


def _signed(cents: float) -> str:
    return f"{round(cents, 1) + 0.0:+.1f}".replace("-", "−")
