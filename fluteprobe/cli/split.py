"""`fluteprobe split`: one long recording becomes takes."""

import sys
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

import click

from fluteprobe.cli.options import FOLDER, json_option
from fluteprobe.flute.plan import EDITIONS

if TYPE_CHECKING:
    from fluteprobe.session import Session
    from fluteprobe.sound.recording import Recording
    from fluteprobe.splitting import Cutting, Order, Sound

_TITLES = ("at", "length", "note", "cents", "take", "remark")
_NUMBERS = {0, 1, 3}


@click.command(short_help="Cut one long recording into takes.")
@click.argument("long", type=click.Path(path_type=Path), metavar="LONG")
@click.argument("folder", type=FOLDER)
@click.option(
    "--edition",
    type=click.Choice(EDITIONS, case_sensitive=False),
    default="standard",
    help="Which take sheet was followed.  [default: standard]",
)
@click.option(
    "--order",
    "order_file",
    type=click.Path(path_type=Path),
    metavar="FILE",
    help="A text file with the takes in the order played, one a line (oxxxxx-over), in place of the sheet's.",
)
@click.option("--yes", is_flag=True, help="Write the takes without asking; refused where one is doubtful.")
@json_option
@click.pass_context
def split(  # noqa: PLR0913, PLR0917  (click passes every option by name)
    ctx: click.Context,
    long: Path,
    folder: Path,
    edition: str,
    order_file: Path | None,
    yes: bool,
    as_json: bool,
) -> None:
    """Cut one long recording into takes, by its pauses and the order of the take sheet.

    LONG is listened to: what sounds between two pauses is matched with the order by its pitch, so that
    a take that was repeated, left out or failed, and what is no take (a word, a cough, a wrong note), are
    told apart. The takes are shown with when they sound, and written to the session folder's takes/ once
    you agree: with the samples of LONG, half a second of the room on both sides, and over no take that
    is there already. LONG itself stays as it is.

    Where nobody can be asked, nothing is written without --yes. Where what was heard and the order cannot
    be brought together, it says what was heard when, and nothing is written (exit code 1).

    \b
    Example:
      fluteprobe split evening.flac heron
    """  # noqa: D301  (click reads the \b)
    from fluteprobe.cli import screen
    from fluteprobe.results import json_text
    from fluteprobe.session import read_session
    from fluteprobe.splitting import read_order, sheet_order, split_json

    session = read_session(folder)
    holes = session.flute.holes
    order = read_order(order_file, holes) if order_file else sheet_order(holes, edition.lower())
    recording, cutting = _heard(long, session, order)
    if not as_json:
        screen.say(_listed(cutting))
    for caution in cutting.cautions:
        screen.say(f"Caution: {caution}", err=True)
    written = _written(cutting, recording, session, yes=yes)
    if as_json:
        click.echo(json_text(split_json(cutting, session, written or ())), nl=False)
    ctx.exit(1 if written is None else 0)


def _heard(long: Path, session: "Session", order: "Order") -> "tuple[Recording, Cutting]":
    """Listen to the long recording, on all cores where that works."""
    import os
    from concurrent.futures import BrokenExecutor

    from fluteprobe.cli import screen
    from fluteprobe.hearing import _pool
    from fluteprobe.session import SessionError, printable
    from fluteprobe.sound.recording import RecordingError, open_recording
    from fluteprobe.splitting import cutting_of

    try:
        recording = open_recording(long)
        with screen.progress("Listening") as on_piece:
            try:
                with _pool(os.cpu_count() or 1) as pool:
                    return recording, cutting_of(recording, session, order, pool, on_piece)
            except BrokenExecutor:  # a process was ended from outside
                return recording, cutting_of(recording, session, order)
    except RecordingError as error:
        raise SessionError(f"{printable(str(long))}: {error}") from None


def _written(
    cutting: "Cutting", recording: "Recording", session: "Session", *, yes: bool
) -> Sequence[Path] | None:
    """Write the takes if that is agreed to; return the files, None where they cannot be written."""
    from fluteprobe.cli import screen
    from fluteprobe.session import TAKES_FOLDER, SessionError, printable
    from fluteprobe.sound.recording import RecordingError
    from fluteprobe.splitting import write_takes

    refusal = _refusal(cutting, yes=yes)
    if refusal:
        for line in refusal:
            screen.say(f"Error: {line}", err=True)
        screen.say("Nothing was written.", err=True)
        return None
    target = printable(str(session.folder / TAKES_FOLDER))
    takes = f"{len(cutting.takes)} take{'s' if len(cutting.takes) > 1 else ''}"
    if not yes and not _agreed(f"Write {takes} into {target}?"):
        return ()
    try:
        written = write_takes(cutting, recording, session)
    except RecordingError as error:
        raise SessionError(f"{printable(str(cutting.recording))}: {error}") from None
    screen.say(f"Wrote {takes} into {target}", err=True)
    return written


def _refusal(cutting: "Cutting", *, yes: bool) -> Sequence[str]:
    """Say why nothing can be written: faults, or doubts with nobody to ask."""
    if cutting.faults or not (yes and cutting.doubtful):
        return cutting.faults
    files = ", ".join(sound.file or "" for sound in cutting.doubtful)
    return (f"not sure of {files}: run it at a terminal and look, or give the order with --order",)


def _agreed(question: str) -> bool:
    """Ask at a terminal; where nobody can be asked, say how to agree."""
    from fluteprobe.cli import screen

    if not _on_terminal():
        screen.say("Nothing was written: look at the table, then add --yes.", err=True)
        return False
    if click.confirm(question, err=True):
        return True
    screen.say("Nothing was written.", err=True)
    return False


def _on_terminal() -> bool:
    return sys.stdin.isatty()


def _listed(cutting: "Cutting") -> str:
    """Return the cutting as a table, in the order of time, and what was not heard."""
    from textwrap import wrap

    from fluteprobe.cli.screen import WIDTH
    from fluteprobe.session import printable

    takes = len(cutting.takes)
    heading = (
        f"{printable(cutting.recording.name)} · {_clock(cutting.duration_s)} · {printable(cutting.order)} · "
        f"{takes} take{'' if takes == 1 else 's'}"
    )
    shown = [sound for sound in cutting.sounds if sound.what != "voice or noise"]
    lines = [heading, "", *_aligned([_TITLES, *(_row(sound) for sound in shown)])]
    others = len(cutting.sounds) - len(shown)
    if others:
        lines += ["", f"Left out: {others} voice{'s' if others > 1 else ''} or other noise"]
    if cutting.missing:
        text = f"Not heard: {', '.join(cutting.missing)}"
        lines += ["", *wrap(text, WIDTH, subsequent_indent="  ", break_on_hyphens=False)]
    return "\n".join(lines)


def _row(sound: "Sound") -> tuple[str, ...]:
    return (
        _clock(sound.start_s),
        f"{sound.end_s - sound.start_s:.1f} s",
        "–" if sound.note is None else sound.note.replace("#", "♯"),
        "" if sound.cents is None else f"{sound.cents:+.0f}".replace("-", "−"),
        sound.file or "–",
        sound.remark,
    )


def _aligned(table: Sequence[Sequence[str]]) -> list[str]:
    """Return rows as lines, column under column, numbers to the right; nothing is cut."""
    widths = [max(map(len, column)) for column in zip(*table, strict=True)]
    return [
        "  ".join(
            cell.rjust(width) if column in _NUMBERS else cell.ljust(width)
            for column, (cell, width) in enumerate(zip(row, widths, strict=True))
        ).rstrip()
        for row in table
    ]


def _clock(seconds: float) -> str:
    """Return a time as minutes and seconds: 12:07.3."""
    tenths = round(10.0 * seconds)
    return f"{tenths // 600}:{tenths % 600 // 10:02}.{tenths % 10}"
