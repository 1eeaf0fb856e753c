"""`fluteprobe hear`: what is in single recordings."""

from pathlib import Path
from typing import TYPE_CHECKING

import click

from fluteprobe.cli.options import A4_HZ, FOLDER, json_option, paper_option
from fluteprobe.cli.second import Opinions
from fluteprobe.cli.take_pages import draw_pages

if TYPE_CHECKING:
    from fluteprobe.session import Problem
    from fluteprobe.survey import Reading

PAGES_FOLDER = Path("reports", "takes")


@click.command(short_help="Say what sounds in single recordings.")
@click.argument("files", nargs=-1, required=True, type=click.Path(path_type=Path), metavar="FILE…")
@click.option("--a4-hz", type=A4_HZ, default=440.0, metavar="HZ", help="What A4 is tuned to.  [default: 440]")
@click.option("--page", is_flag=True, help="Draw a page for each recording: what was measured, and why.")
@click.option(
    "--second-opinion",
    "second",
    is_flag=True,
    help="Have pYIN read every tone too, say where it differs, and show it on the page.",
)
@paper_option("a page")
@click.option(
    "--out", type=FOLDER, metavar="DIR", help=f"Where pages are written.  [default: {PAGES_FOLDER}]"
)
@json_option
@click.pass_context
def hear(  # noqa: PLR0913, PLR0917  (click passes every option by name)
    ctx: click.Context,
    files: tuple[Path, ...],
    a4_hz: float,
    page: bool,
    second: bool,
    paper: str,
    out: Path | None,
    as_json: bool,
) -> None:
    """Say what sounds in single recordings: every steady tone, its note and how far off it is.

    No session folder is needed. FILE is a recording of any kind: WAV, AIFF, FLAC, Ogg, MP3 …

    With --page a PDF shows what the numbers come from: waveform, pitch track, spectrum, breath
    resonances, and the reasons for the register. Open it when a number looks wrong.

    \b
    Example:
      fluteprobe hear heron/takes/oxxxxx.wav
    """  # noqa: D301  (click reads the \b)
    from fluteprobe.cli import screen
    from fluteprobe.cli.second import told, with_opinions
    from fluteprobe.results import heard_json, json_text

    heard, problems = _heard(files, a4_hz)
    readings = [reading for _, mine in heard for reading in mine]
    opinions: Opinions = [None] * len(readings)
    if page or second:
        opinions, undrawn = draw_pages(heard, out or PAGES_FOLDER, paper, second)
        problems += undrawn
    if as_json:
        values = heard_json(readings, problems, a4_hz=a4_hz)
        click.echo(json_text(with_opinions(values, opinions) if second else values), nl=False)
    else:
        screen.say(screen.heard_table(readings, a4_hz))
        if any(opinions):
            screen.say("\n" + told(readings, opinions))
        screen.tell_cautions(readings)
    screen.tell_problems(problems)
    ctx.exit(1 if problems else 0)


def _heard(
    files: tuple[Path, ...], a4_hz: float
) -> tuple[list[tuple[Path, tuple["Reading", ...]]], list["Problem"]]:
    """Hear every file; one that cannot be used becomes a problem, the others are heard all the same."""
    from fluteprobe import survey
    from fluteprobe.cli import screen
    from fluteprobe.session import Problem, printable
    from fluteprobe.sound.recording import RecordingError

    heard: list[tuple[Path, tuple[Reading, ...]]] = []
    problems: list[Problem] = []
    with screen.progress("Listening") as on_take:
        for done, path in enumerate(files, start=1):
            name = printable(str(path))
            try:
                heard.append((path, survey.hear(path, a4_hz=a4_hz, name=name)))
            except RecordingError as error:
                problems.append(Problem(take=name, message=str(error)))
            on_take(done, len(files))
    return heard, problems
