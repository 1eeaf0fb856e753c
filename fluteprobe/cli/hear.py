"""`fluteprobe hear`: what is in single recordings."""

from pathlib import Path
from typing import TYPE_CHECKING

import click

from fluteprobe.cli.options import A4_HZ, json_option

if TYPE_CHECKING:
    from fluteprobe.session import Problem
    from fluteprobe.survey import Reading


@click.command(short_help="Say what sounds in single recordings.")
@click.argument("files", nargs=-1, required=True, type=click.Path(path_type=Path), metavar="FILE…")
@click.option("--a4-hz", type=A4_HZ, default=440.0, metavar="HZ", help="What A4 is tuned to.  [default: 440]")
@json_option
@click.pass_context
def hear(ctx: click.Context, files: tuple[Path, ...], a4_hz: float, as_json: bool) -> None:
    """Say what sounds in single recordings: every steady tone, its note and how far off it is.

    No session folder is needed. FILE is a recording of any kind: WAV, AIFF, FLAC, Ogg, MP3 …

    \b
    Example:
      fluteprobe hear heron/takes/oxxxxx.wav
    """  # noqa: D301  (click reads the \b)
    from fluteprobe.cli import screen
    from fluteprobe.results import heard_json, json_text

    readings, problems = _heard(files, a4_hz)
    if as_json:
        click.echo(json_text(heard_json(readings, problems, a4_hz=a4_hz)), nl=False)
    else:
        screen.say(screen.heard_table(readings, a4_hz))
        screen.tell_cautions(readings)
    screen.tell_problems(problems)
    ctx.exit(1 if problems else 0)


def _heard(files: tuple[Path, ...], a4_hz: float) -> tuple[list["Reading"], list["Problem"]]:
    """Hear every file; one that cannot be used becomes a problem, the others are heard all the same."""
    from fluteprobe import survey
    from fluteprobe.cli import screen
    from fluteprobe.session import Problem, printable
    from fluteprobe.sound.recording import RecordingError

    readings: list[Reading] = []
    problems: list[Problem] = []
    with screen.progress("Listening") as on_take:
        for done, path in enumerate(files, start=1):
            name = printable(str(path))
            try:
                readings += survey.hear(path, a4_hz=a4_hz, name=name)
            except RecordingError as error:
                problems.append(Problem(take=name, message=str(error)))
            on_take(done, len(files))
    return readings, problems
