"""What people see in a terminal: tables as plain aligned text, at most 80 columns, and lines about takes.

Conventions: deviations in cents with a sign, ± the standard uncertainty; `?` is an undecided register, `–`
does not apply. Results go to stdout, everything else to stderr. A terminal that cannot show ♯ or ± gets # or
+/-.
"""

import sys
import textwrap
import time
from collections.abc import Callable, Iterable, Iterator, Sequence
from contextlib import contextmanager
from itertools import groupby
from pathlib import Path
from typing import Any

import click

from fluteprobe.session import FluteFacts, Problem, Sitting, printable
from fluteprobe.survey import Entry, Reading, Survey

WIDTH = 80
SHOW_PROGRESS_AFTER_S = 1.0

_PLAIN = str.maketrans({"♯": "#", "±": "+/-", "−": "-", "–": "-", "…": "...", "·": "|", "°": " ", "’": "'"})

_SILENT = {"breath only": "Did not speak", "edge tone": "Edge tone", "multiphonic": "Two tones at once"}

Row = Sequence[str]


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
        say(f"Left out {printable(problem.take)}: {printable(problem.message)}", err=True)


def tell_cautions(readings: Iterable[Reading]) -> None:
    """Say on stderr which numbers are less sure and why, a line each."""
    for reading in readings:
        place = f"{printable(reading.take)}, {_span(reading)}"
        for caution in reading.tone.cautions:
            say(f"Caution {place}: {printable(caution)}", err=True)
        if _is_undecided(reading) and reading.fingering is not None:
            chances = ", ".join(f"{k} {100 * p:.0f} %" for k, p in sorted(reading.call.probability.items()))
            say(f"Caution {place}: register undecided ({chances})", err=True)


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
    reference = f"at {survey.sitting.reference_temperature_c or 0.0:g} °C"
    with_reference = any(entry.cents_at_reference is not None for entry in survey.entries)
    header = ["fingering", "register", "note", "cents", "stretch", "takes", "caution"]
    if with_reference:
        header.insert(4, reference)
    cautions = {
        (entry.fingering, entry.register): _entry_cautions(entry, survey.readings) for entry in survey.entries
    }
    rows = [
        (e.frequency_hz, _entry_row(e, cautions[e.fingering, e.register], with_reference))
        for e in survey.entries
    ]
    rows += [
        (r.tone.frequency_hz or 0.0, _undecided_row(r, with_reference))
        for r in survey.readings
        if _is_undecided(r)
    ]
    body = [row for _, row in sorted(rows, key=lambda row: (row[0], row[1]))]
    aligned = _aligned([header, *body], right={"register", "cents", reference, "stretch", "takes"})
    return "\n".join([_heading(survey.flute, survey.sitting), "", *aligned, *_silent_lines(survey.readings)])


def heard_table(readings: Sequence[Reading], a4_hz: float) -> str:
    """Return every tone under the name of its recording, in the order of time."""
    if not readings:
        return "Nothing was heard."
    header = ["steady", "register", "note", "cents", "Hz", "remarks"]
    aligned = _aligned([header, *map(_heard_row, readings)], right={"register", "cents", "Hz"})
    lines = [f"  {aligned[0]}   (A4 = {a4_hz:g} Hz)" if len(aligned[0]) < 56 else f"  {aligned[0]}"]
    below = iter(aligned[1:])
    for take, tones in groupby(readings, key=lambda reading: reading.take):
        lines.append(printable(take))
        lines += [f"  {next(below)}" for _ in tones]
    return "\n".join(lines)


def _heading(flute: FluteFacts, sitting: Sitting) -> str:
    parts = [flute.name, f"{flute.holes} hole{'s' if flute.holes > 1 else ''}", f"A4 = {sitting.a4_hz:g} Hz"]
    if sitting.air_temperature_c is not None:
        parts.append(f"air {sitting.air_temperature_c:g} °C")
    return textwrap.shorten(printable(" · ".join(parts)), WIDTH, placeholder=" …")


def _entry_row(entry: Entry, cautions: str, with_reference: bool) -> list[str]:
    tried = round(len(entry.takes) / entry.reliability) if entry.reliability > 0.0 else len(entry.takes)
    row = [
        str(entry.fingering),
        str(entry.register),
        _note(entry.note),
        _off(entry.cents, entry.uncertainty_cents),
        "" if entry.stretch_cents is None else _signed(entry.stretch_cents),
        str(tried) if tried == len(entry.takes) else f"{len(entry.takes)} of {tried}",
        cautions,
    ]
    if with_reference:
        row.insert(4, "" if entry.cents_at_reference is None else _signed(entry.cents_at_reference))
    return row


def _undecided_row(reading: Reading, with_reference: bool) -> list[str]:
    row = [
        str(reading.fingering),
        "?",
        _note(reading.note),
        _off(reading.cents, reading.tone.uncertainty_cents),
        "",
        "1",
        _brief(reading.tone.cautions),
    ]
    if with_reference:
        row.insert(4, "" if reading.cents_at_reference is None else _signed(reading.cents_at_reference))
    return row


def _heard_row(reading: Reading) -> list[str]:
    tone = reading.tone
    if tone.frequency_hz is None:
        return [_span(reading), "–", "–", "–", "–", tone.kind]
    remarks = [] if tone.kind == "tone" else [tone.kind]
    if tone.vibrato is not None:
        remarks.append(f"vibrato {tone.vibrato.rate_hz:.1f} Hz")
    remarks += [text for text in [_brief(tone.cautions)] if text]
    return [
        _span(reading),
        "?" if reading.call.register is None else str(reading.call.register),
        _note(reading.note),
        _off(reading.cents, tone.uncertainty_cents),
        f"{tone.frequency_hz:.2f}",
        ", ".join(remarks),
    ]


def _entry_cautions(entry: Entry, readings: Iterable[Reading]) -> str:
    """Return in brief what is said against the tones that an entry sums up."""
    mine = [r for r in readings if r.fingering == entry.fingering and r.call.register == entry.register]
    return _brief([caution for reading in mine for caution in reading.tone.cautions])


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


def _aligned(rows: Sequence[Row], right: set[str]) -> list[str]:
    """Return rows as lines with the columns under their headers, numbers to the right; no row is cut short."""
    header = rows[0]
    widths = [max(len(row[k]) for row in rows) for k in range(len(header))]
    return [
        "  ".join(
            cell.rjust(width) if name in right else cell.ljust(width)
            for cell, width, name in zip(row, widths, header, strict=True)
        ).rstrip()
        for row in rows
    ]


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
