"""`fluteprobe chart`: the printed page."""

from pathlib import Path

import click

from fluteprobe.cli.measure import measured
from fluteprobe.cli.options import FOLDER, out_option, reports_folder

FORMATS = ("pdf", "png", "svg")
PAPERS = ("a4", "letter")


def _formats(ctx: click.Context, param: click.Parameter, given: tuple[str, ...]) -> tuple[str, ...]:
    """Return the formats asked for, each once; several may stand in one word with commas."""
    words = [word.strip().lower() for text in given for word in text.split(",")]
    for word in words:
        if word not in FORMATS:
            raise click.BadParameter(f"{word!r} is not one of {', '.join(FORMATS)}.", ctx, param)
    return tuple(dict.fromkeys(words))


@click.command(short_help="Measure a flute and draw its printable chart.")
@click.argument("folder", type=FOLDER)
@click.option(
    "--format",
    "formats",
    multiple=True,
    default=("pdf",),
    callback=_formats,
    metavar="|".join(FORMATS),
    help="Kind of file; several with commas.  [default: pdf]",
)
@click.option(
    "--paper",
    type=click.Choice(PAPERS, case_sensitive=False),
    default="a4",
    help="What it is printed on.  [default: a4]",
)
@click.option(
    "--tolerance",
    "tolerance_cents",
    type=click.FloatRange(0.0, 50.0, min_open=True),
    default=10.0,
    metavar="CENTS",
    help="How far off still counts as tuned.  [default: 10]",
)
@out_option
@click.pass_context
def chart(  # noqa: PLR0913, PLR0917  (click passes every option by name)
    ctx: click.Context,
    folder: Path,
    formats: tuple[str, ...],
    paper: str,
    tolerance_cents: float,
    out: Path | None,
) -> None:
    """Measure every take of a session folder and draw the flute's fingering chart.

    Writes chart.pdf (or the formats asked for), measurements.json and measurements.csv, and prints
    where. A take that cannot be used is named, and the chart is drawn from all others.

    \b
    Example:
      fluteprobe chart heron --format pdf,png
    """  # noqa: D301  (click reads the \b)
    from fluteprobe.cli import screen
    from fluteprobe.results import write_results

    survey = measured(folder)
    target = reports_folder(folder, out)
    written = list(write_results(survey, target))

    from fluteprobe.pages.chart import write_chart

    for suffix in formats:
        written.append(target / f"chart.{suffix}")
        write_chart(survey, written[-1], paper=paper, tolerance_cents=tolerance_cents)
    screen.tell_cautions(survey.readings)
    screen.tell_problems(survey.problems)
    screen.tell_written(written, as_result=True)
    ctx.exit(1 if survey.problems else 0)
